"""What is seen from this machine, asked only when a person asks."""

from __future__ import annotations

import time

import pytest

from drivers.contract import SourceError, SourceTimeout
from drivers.visa import list_instruments, open_instrument
from drivers.visa.library import manager
from tests.drivers.visa.servers.links import HislipServer
from tests.drivers.visa.servers.speakers import TenField


def seen(monkeypatch: pytest.MonkeyPatch, *resources: str) -> None:
    monkeypatch.setattr(manager(), "list_resources", lambda *_: resources)


def test_each_instrument_is_listed_with_what_it_answers(monkeypatch, tmp_path) -> None:
    with HislipServer(TenField()) as server:
        with open_instrument(server.resource, settings_dir=tmp_path) as source:
            source.capture()
        seen(monkeypatch, server.resource, "ASRL/dev/ttyS0::INSTR", "TCPIP::127.0.0.1,1::x::INSTR")
        listed = {each.resource: each for each in list_instruments(5.0, tmp_path)}
    found = listed[server.resource]
    assert found.identity == "EXAMPLE WORKS,SCOPE 10,SN0001,1.00"
    assert found.dialect == "ten-field"
    assert found.problem is None
    assert "not asked" in (listed["ASRL/dev/ttyS0::INSTR"].problem or "")
    assert "refused" in (listed["TCPIP::127.0.0.1,1::x::INSTR"].problem or "")


def test_a_list_that_takes_too_long_is_given_up(monkeypatch) -> None:
    monkeypatch.setattr(manager(), "list_resources", lambda *_: time.sleep(1.0))
    before = time.monotonic()
    with pytest.raises(SourceTimeout):
        list_instruments(0.2)
    assert time.monotonic() - before < 0.8


def test_a_list_that_fails_is_a_source_error(monkeypatch) -> None:
    def fail(*_: object) -> None:
        raise RuntimeError("no network\x1b[31m")

    monkeypatch.setattr(manager(), "list_resources", fail)
    with pytest.raises(SourceError) as caught:
        list_instruments(1.0)
    assert "\x1b" not in str(caught.value)


def test_a_name_from_the_wire_is_shown_clean(monkeypatch) -> None:
    seen(monkeypatch, "TCPIP::\x1b[31mevil::INSTR")
    (listed,) = list_instruments(2.0)
    assert "\x1b" not in listed.resource + (listed.problem or "")
