"""Every fault on every link: named, bounded in time, cheap while waiting, and got over."""

from __future__ import annotations

import os
import time

import numpy as np
import pytest

from drivers.contract import (
    CaptureRequest,
    SourceError,
    SourceLost,
    SourceRefused,
    SourceTimeout,
)
from drivers.visa import open_instrument
from tests.drivers.visa.servers.links import (
    HislipServer,
    SerialServer,
    SocketServer,
    Vxi11Server,
)
from tests.drivers.visa.servers.speakers import Descriptor, TenField

LINKS = {
    "socket": SocketServer,
    "hislip": HislipServer,
    "vxi-11": Vxi11Server,
    "serial": SerialServer,
}
TIMEOUT_S = 0.25
FAULTS: dict[str, tuple[type[SourceError], ...]] = {
    "silence": (SourceTimeout,),
    "slow-drip": (SourceTimeout,),
    "short-block": (SourceTimeout, SourceRefused),
    "long-block": (SourceRefused,),
    "wrong-digits": (SourceRefused,),
    "indefinite": (SourceRefused,),
    "huge": (SourceRefused,),
    "drop": (SourceLost,),
    "reset": (SourceLost,),
    "late": (SourceTimeout,),
}
ENDED_BY_END = {"hislip", "vxi-11"}
CASES = [
    (link, fault)
    for link in LINKS
    for fault in FAULTS
    if not (link == "serial" and fault in ("drop", "reset"))
]


def seconds_of_cpu() -> float:
    used = os.times()
    return used.user + used.system


@pytest.mark.parametrize(("link", "fault"), CASES)
def test_a_fault_is_named_in_time_and_the_session_goes_on(link, fault) -> None:
    brain = TenField(points=200)
    with (
        LINKS[link](brain) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
    ):
        source.capture()
        server.faults.put(fault)
        before, cpu = time.monotonic(), seconds_of_cpu()
        if fault == "indefinite" and link in ENDED_BY_END:
            source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
        else:
            with pytest.raises(FAULTS[fault]) as caught:
                source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
            assert caught.value.remedy
        took, used = time.monotonic() - before, seconds_of_cpu() - cpu
        assert server.faults.shown == 1
        assert took < TIMEOUT_S + 1.0
        assert used < 0.35, "a core was used while waiting"
        taken = recovered(source)
        assert np.allclose(taken.samples, [float(volts) for volts in brain.meant], atol=1e-9)


def recovered(source):
    """Ask on, as a session does, until a frame comes."""
    until = time.monotonic() + 6.0
    while True:
        try:
            return source.capture(CaptureRequest(timeout_s=1.0))
        except SourceError:
            if time.monotonic() > until:
                raise
            time.sleep(0.1)


@pytest.mark.parametrize("link", ["socket", "serial"])
@pytest.mark.parametrize("garbled", [1, 2, 3])
def test_a_line_too_many_does_not_shift_the_answers_for_good(link, garbled) -> None:
    brain = TenField(points=200)
    with (
        LINKS[link](brain) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
    ):
        source.capture()
        server.faults.put("garbage", garbled)
        for _ in range(3):
            try:
                source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
            except SourceError:
                continue
        assert server.faults.shown == garbled
        taken = recovered(source)
        assert np.allclose(taken.samples, [float(volts) for volts in brain.meant], atol=1e-9)


@pytest.mark.parametrize("link", LINKS)
def test_an_old_frame_never_passes_for_a_new_one(link) -> None:
    brain = TenField(points=200)
    with (
        LINKS[link](brain) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
    ):
        source.capture()
        brain.frozen = True
        with pytest.raises(SourceTimeout, match="frame of before"):
            source.capture(CaptureRequest(timeout_s=2.0))
        brain.frozen = False
        taken = source.capture()
        assert np.allclose(taken.samples, [float(volts) for volts in brain.meant], atol=1e-9)


@pytest.mark.parametrize("link", LINKS)
def test_a_frame_late_from_before_does_not_pass_for_the_next(link) -> None:
    brain = TenField(points=200)
    with (
        LINKS[link](brain) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
    ):
        source.capture()
        server.faults.put("late")
        with pytest.raises(SourceTimeout):
            source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
        before = brain.armed
        taken = recovered(source)
        assert brain.armed > before
        assert np.allclose(taken.samples, [float(volts) for volts in brain.meant], atol=1e-9)


@pytest.mark.parametrize("link", LINKS)
def test_an_error_in_the_queue_is_told_with_its_words(link) -> None:
    brain = TenField(points=200)
    own = brain.own

    def failing(head: str, argument: str) -> bytes | None:
        if head.upper().endswith("DATA?"):
            brain.fail(-222)
            return None
        return own(head, argument)

    with (
        LINKS[link](brain) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
    ):
        source.capture()
        brain.own = failing  # type: ignore[method-assign]
        before = time.monotonic()
        with pytest.raises(SourceRefused, match="-222"):
            source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
        assert time.monotonic() - before < TIMEOUT_S + 1.0
        brain.own = own  # type: ignore[method-assign]
        assert recovered(source).samples.size == 200


def test_without_a_queue_the_event_register_tells_why() -> None:
    brain = Descriptor(points=200)
    own = brain.own

    def failing(head: str, argument: str) -> bytes | None:
        if "WF?" in head.upper():
            brain.fail(-221)
            return None
        return own(head, argument)

    with (
        SocketServer(brain) as server,
        open_instrument(server.resource, dialect="descriptor") as source,
    ):
        source.capture()
        brain.own = failing  # type: ignore[method-assign]
        with pytest.raises(SourceRefused, match="cannot do this now"):
            source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
        brain.own = own  # type: ignore[method-assign]
        assert recovered(source).samples.size == 200


@pytest.mark.parametrize("link", ["socket", "hislip", "vxi-11"])
def test_an_instrument_that_reboots_is_met_again(link) -> None:
    brain = TenField(points=200)
    with (
        LINKS[link](brain) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
    ):
        source.capture()
        server.go_away()
        with pytest.raises(SourceLost):
            source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
        with pytest.raises(SourceLost) as caught:
            source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
        assert "goes on by itself" in caught.value.remedy
        brain.format = 0  # a reboot forgets what was set
        server.come_back()
        taken = recovered(source)
        assert np.allclose(taken.samples, [float(volts) for volts in brain.meant], atol=1e-9)
        assert brain.format == 1


@pytest.mark.parametrize("link", ["socket", "hislip", "vxi-11"])
def test_another_instrument_at_the_same_address_is_not_taken(link) -> None:
    brain = TenField(points=200)
    with (
        LINKS[link](brain) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
    ):
        source.capture()
        server.go_away()
        with pytest.raises(SourceLost):
            source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
        brain.identity = "OTHER WORKS,METER 3,SN9,7"
        server.come_back()
        with pytest.raises(SourceRefused, match="another instrument"):
            source.capture()


def test_a_serial_line_that_is_unplugged_is_lost() -> None:
    server = SerialServer(TenField(points=200))
    with open_instrument(server.resource, dialect="ten-field") as source:
        source.capture()
        server.unplug()
        for _ in range(2):
            before = time.monotonic()
            with pytest.raises(SourceLost):
                source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
            assert time.monotonic() - before < TIMEOUT_S + 1.0
