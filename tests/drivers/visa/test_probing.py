"""Which dialect: found by asking, without disturbing, and remembered."""

from __future__ import annotations

import json
import threading

import numpy as np
import pytest

from drivers.contract import SourceRefused, SourceTimeout
from drivers.visa import open_instrument
from tests.drivers.visa.servers.brain import Brain
from tests.drivers.visa.servers.links import SocketServer
from tests.drivers.visa.servers.speakers import (
    DataHeader,
    Descriptor,
    FormatTrace,
    KeywordCurve,
    MemoryHeader,
    TenField,
    VdivText,
)
from tests.drivers.visa.test_dialect_files import SOUND

SPEAKERS = {
    "ten-field": TenField,
    "ten-field-code": lambda: TenField("code"),
    "ten-field-signed": lambda: TenField("signed", big=True),
    "keyword-curve": KeywordCurve,
    "descriptor": Descriptor,
    "vdiv-text": VdivText,
    "data-header": DataHeader,
    "memory-header": MemoryHeader,
    "format-trace": FormatTrace,
}

DISTURBING = ("*RST", ":RUN", "RUN", "STOP", "SING", "ARM", "TRMD", "DIG", "INIT", "AUT")


@pytest.mark.parametrize("dialect", SPEAKERS)
def test_each_dialect_is_found_by_harmless_queries_one_a_message(dialect) -> None:
    brain = SPEAKERS[dialect]()
    with SocketServer(brain) as server, open_instrument(server.resource) as source:
        asked = brain.log[: brain.log.index("*CLS")]
        assert brain.armed == 0
        taken = source.capture()
        meant = [float(volts) for volts in brain.meant]
        assert np.abs(taken.samples - np.array(meant)).max() < 1e-9
        assert source.info.dialect == dialect
        assert source.info.settings["dialect found"] == "asked"
    assert asked[0] == "*IDN?"
    for message in asked:
        assert message.split()[0].endswith("?")
        assert ";" not in message
        assert not any(message.upper().lstrip(":").startswith(word) for word in DISTURBING)


def test_what_was_found_is_kept_under_the_whole_identification(tmp_path) -> None:
    brain = KeywordCurve(root="WFMPre")
    with SocketServer(brain) as server:
        with open_instrument(server.resource, settings_dir=tmp_path) as source:
            source.capture()
        asked = len(brain.log)
        with open_instrument(server.resource, settings_dir=tmp_path) as source:
            source.capture()
            assert source.info.settings["dialect found"] == "remembered"
        again = len(brain.log) - asked
    kept = json.loads((tmp_path / "instruments.json").read_text(encoding="utf-8"))
    assert kept[brain.identity]["dialect"] == "keyword-curve"
    assert again < asked - 10
    assert not list(tmp_path.glob(".instruments*"))


def test_new_firmware_is_asked_again(tmp_path) -> None:
    brain = VdivText()
    with SocketServer(brain) as server:
        with open_instrument(server.resource, settings_dir=tmp_path) as source:
            source.capture()
        brain.identity = brain.identity.replace("1.00", "2.00")
        with open_instrument(server.resource, settings_dir=tmp_path) as source:
            assert source.info.settings["dialect found"] == "asked"


def test_what_is_remembered_wrongly_is_found_again(tmp_path) -> None:
    brain = DataHeader()
    (tmp_path / "instruments.json").write_text(
        json.dumps({brain.identity: {"dialect": "ten-field", "encoding": None}}), encoding="utf-8"
    )
    with (
        SocketServer(brain) as server,
        open_instrument(server.resource, settings_dir=tmp_path) as source,
    ):
        assert source.capture().samples.size == 500
        assert source.info.dialect == "data-header"


@pytest.mark.parametrize(
    "text", ["", "no json", "[]", '{"EXAMPLE WORKS,SCOPE 10,SN0001,1.00": {"dialect": 3}}', "\x00"]
)
def test_a_spoilt_memory_only_means_asking_again(tmp_path, text) -> None:
    (tmp_path / "instruments.json").write_text(text, encoding="utf-8")
    with (
        SocketServer(TenField()) as server,
        open_instrument(server.resource, settings_dir=tmp_path) as source,
    ):
        assert source.capture().samples.size == 500


def test_a_name_decides_over_what_is_remembered(tmp_path) -> None:
    brain = TenField("code")
    with SocketServer(brain) as server:
        with open_instrument(server.resource, settings_dir=tmp_path) as source:
            source.capture()
        with open_instrument(server.resource, settings_dir=tmp_path, dialect="ten-field") as source:
            assert source.info.dialect == "ten-field"
            assert source.info.settings["dialect found"] == "named"


def test_a_persons_own_dialect_is_found_too(tmp_path) -> None:
    class Mine(Brain):
        def new_frame(self) -> None:
            self.codes = self.draw(10, 240)
            self.meant = list(self.codes * 0.25)

        def own(self, head: str, argument: str) -> bytes | None:
            match head:
                case "SCALES?":
                    return b"0.25,1E-6"
                case "DATA?":
                    return b"#3500" + bytes(self.codes.astype(np.uint8))
                case "GO":
                    self.arm()
                case _:
                    self.fail()
            return None

    (tmp_path / "dialects").mkdir()
    (tmp_path / "dialects" / "mine.toml").write_text(SOUND, encoding="utf-8")
    brain = Mine()
    with (
        SocketServer(brain) as server,
        open_instrument(server.resource, settings_dir=tmp_path) as source,
    ):
        assert list(source.capture().samples) == brain.meant
        assert source.info.dialect == "mine"


def test_a_broken_file_of_a_person_is_told_while_asking(tmp_path) -> None:
    (tmp_path / "dialects").mkdir()
    (tmp_path / "dialects" / "mine.toml").write_text("name = 3", encoding="utf-8")
    with SocketServer(TenField()) as server:
        with pytest.raises(SourceRefused, match=r"mine\.toml: line 1, name"):
            open_instrument(server.resource, settings_dir=tmp_path)
        with open_instrument(server.resource, settings_dir=tmp_path, dialect="ten-field") as source:
            assert source.capture().samples.size == 500


class Mute(Brain):
    """Knows nothing but the common commands."""

    has_queue = False

    def new_frame(self) -> None:
        """Has none."""

    def own(self, head: str, argument: str) -> bytes | None:
        self.fail()
        return None


def test_an_instrument_in_no_known_dialect_is_told_with_what_to_do() -> None:
    with (
        SocketServer(Mute()) as server,
        pytest.raises(SourceRefused, match="no dialect known") as caught,
    ):
        open_instrument(server.resource)
    assert "--dialect" in caught.value.remedy


def test_a_channel_that_is_off_is_told_as_such() -> None:
    class Off(Mute):
        def own(self, head: str, argument: str) -> bytes | None:
            self.fail(-221 if "PRE" in head.upper() and head.startswith(":") else -113)
            return None

    with (
        SocketServer(Off()) as server,
        pytest.raises(SourceRefused, match="cannot answer it now") as caught,
    ):
        open_instrument(server.resource, channel=2)
    assert "channel 2" in caught.value.remedy


def test_a_late_answer_does_not_pass_for_the_next_one() -> None:
    """The first query is answered only after it was given up."""

    class Late(DataHeader):
        def message(self, text: str) -> bytes | None:
            if text == ":WAVeform:PREamble?":
                threading.Event().wait(0.4)
                return b"1,2,3"  # late, and no preamble of ten
            return super().message(text)

    with SocketServer(Late()) as server, open_instrument(server.resource) as source:
        assert source.info.dialect == "data-header"
        assert source.capture().samples.size == 500


def test_what_is_no_instrument_is_told() -> None:
    class Web(Mute):
        def message(self, text: str) -> bytes | None:
            return b"HTTP/1.1 400 Bad Request \x1b[31m"

    with SocketServer(Web()) as server, pytest.raises(SourceRefused, match="HTTP") as caught:
        open_instrument(server.resource)
    assert "\x1b" not in str(caught.value)


def test_an_identification_in_the_wild_is_read() -> None:
    brain = TenField()
    brain.identity = "*IDN EXAMPLE WORKS , SCOPE 10,SN 1, 1.0 ,extra\r"
    with SocketServer(brain) as server, open_instrument(server.resource) as source:
        assert source.info.identity == "EXAMPLE WORKS,SCOPE 10,SN 1,1.0,extra"


def test_a_port_that_never_answers_is_a_timeout() -> None:
    class Silent(Mute):
        def message(self, text: str) -> bytes | None:
            return None

    with SocketServer(Silent()) as server, pytest.raises(SourceTimeout, match=r"\*IDN\?"):
        open_instrument(server.resource, timeout_s=0.3)


def test_there_is_no_channel_zero() -> None:
    with pytest.raises(SourceRefused, match="channel 0"):
        open_instrument("TCPIP::127.0.0.1::1::SOCKET", channel=0)
