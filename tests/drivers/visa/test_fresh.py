"""Fresh frames: armed for each capture, after the moment asked for, within the time given."""

from __future__ import annotations

import time

import numpy as np
import pytest

from drivers.contract import CaptureRequest, SourceTimeout
from drivers.visa import open_instrument
from tests.drivers.visa.servers.links import SocketServer
from tests.drivers.visa.servers.speakers import KeywordCurve, TenField, VdivText


@pytest.mark.parametrize("make", [TenField, KeywordCurve, VdivText])
def test_the_instrument_is_armed_for_every_capture(make) -> None:
    brain = make(points=50)
    with SocketServer(brain) as server, open_instrument(server.resource) as source:
        source.capture()
        armed = brain.armed
        for count in range(1, 6):
            source.capture()
            assert brain.armed == armed + count


def test_nothing_is_sampled_before_the_moment_asked_for() -> None:
    class Timed(TenField):
        last = 0.0

        def arm(self) -> None:
            self.last = time.monotonic()
            super().arm()

    brain = Timed(points=50)
    with SocketServer(brain) as server, open_instrument(server.resource) as source:
        source.capture()
        moment = time.monotonic() + 0.3
        source.capture(CaptureRequest(fresh_after=moment))
        assert brain.last >= moment


def test_a_moment_after_the_time_out_is_refused_at_once() -> None:
    with SocketServer(TenField(points=50)) as server, open_instrument(server.resource) as source:
        before = time.monotonic()
        with pytest.raises(SourceTimeout):
            source.capture(CaptureRequest(timeout_s=0.5, fresh_after=before + 60.0))
        assert time.monotonic() - before < 0.3


def test_an_acquisition_that_never_completes_is_a_timeout_that_says_so() -> None:
    class Untriggered(TenField):
        waits = False

        def own(self, head: str, argument: str) -> bytes | None:
            if self.waits and head.upper().startswith(":OPER"):
                return b"8"
            return super().own(head, argument)

    brain = Untriggered(points=50)
    with SocketServer(brain) as server, open_instrument(server.resource) as source:
        source.capture()
        brain.waits = True
        before = time.monotonic()
        with pytest.raises(SourceTimeout, match="acquisition") as caught:
            source.capture(CaptureRequest(timeout_s=0.5))
        assert time.monotonic() - before < 1.5
        assert "trigger" in caught.value.remedy
        brain.waits = False
        assert source.capture().samples.size == 50


def test_a_frame_of_one_value_may_come_twice() -> None:
    """An open input on a quiet converter: identical bytes are no sign of an old frame there."""

    class Flat(TenField):
        def draw(self, low: int, high: int, step: int = 1) -> np.ndarray:
            return np.full(self.points, 100)

    with SocketServer(Flat(points=50)) as server, open_instrument(server.resource) as source:
        assert source.capture().samples.size == 50
        assert source.capture().samples.size == 50


def test_so_many_samples_come_as_are_asked_for_where_that_can_be() -> None:
    brain = TenField(points=50)
    with SocketServer(brain) as server, open_instrument(server.resource) as source:
        source.capture(CaptureRequest(samples=777))
    assert ":WAVeform:POINts 777" in brain.log
