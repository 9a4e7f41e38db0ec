"""USB test and measurement devices, over a bus that is none."""

from __future__ import annotations

import functools
import time

import numpy as np
import pytest
import usb.core

from drivers.contract import (
    CaptureRequest,
    SourceLost,
    SourceNotFound,
    SourceRefused,
    SourceTimeout,
)
from drivers.visa import open_instrument
from tests.drivers.visa.servers.speakers import TenField
from tests.drivers.visa.servers.usb_device import UsbInstrument

TIMEOUT_S = 0.4


@pytest.fixture
def device(monkeypatch: pytest.MonkeyPatch) -> UsbInstrument:
    instrument = UsbInstrument(TenField(points=3000))
    find = functools.partial(usb.core.find, backend=instrument)
    monkeypatch.setattr("usb.core.find", find)
    return instrument


def meant(device: UsbInstrument) -> np.ndarray:
    return np.array([float(volts) for volts in device.brain.meant])


def test_frames_come_over_usb(device) -> None:
    with open_instrument(device.resource) as source:
        for _ in range(3):
            assert np.abs(source.capture().samples - meant(device)).max() < 1e-9


@pytest.mark.parametrize("points", [2042, 2043, 512, 250, 253, 600_000])
def test_a_message_may_end_anywhere_in_a_packet(device, points) -> None:
    """Also beyond one read of the library, where it says END too early."""
    device.brain.points = points
    device.brain.new_frame()
    with open_instrument(device.resource, dialect="ten-field") as source:
        assert np.abs(source.capture().samples - meant(device)).max() < 1e-9


@pytest.mark.parametrize(
    ("fault", "kind"),
    [
        ("silence", SourceTimeout),
        ("short-block", SourceRefused),
        ("long-block", SourceRefused),
        ("wrong-digits", SourceRefused),
        ("huge", SourceRefused),
    ],
)
def test_a_fault_over_usb_is_named_in_time_and_got_over(device, fault, kind) -> None:
    with open_instrument(device.resource, dialect="ten-field") as source:
        source.capture()
        device.faults.put(fault)
        before = time.monotonic()
        with pytest.raises(kind):
            source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
        assert time.monotonic() - before < TIMEOUT_S + 1.0
        assert np.abs(source.capture().samples - meant(device)).max() < 1e-9


def test_a_device_unplugged_is_lost_and_found_again(device) -> None:
    with open_instrument(device.resource, dialect="ten-field") as source:
        source.capture()
        device.unplug()
        for _ in range(2):
            with pytest.raises(SourceLost):
                source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
        device.plugged = True
        assert np.abs(source.capture().samples - meant(device)).max() < 1e-9


def test_a_device_that_is_not_there_is_not_found(device) -> None:
    device.unplug()
    with pytest.raises(SourceNotFound):
        open_instrument(device.resource)
