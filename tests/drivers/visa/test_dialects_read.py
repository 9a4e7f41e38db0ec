"""Every dialect, read from instruments of the tests that share no code with the drivers.

What they meant is worked out in exact fractions; volts and seconds must come within 1e-9.
"""

from __future__ import annotations

import numpy as np
import pytest

from drivers.contract import CaptureRequest, SourceRefused, UnusableCapture
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

NEAR = 1e-9

VARIETIES = {
    "ten-field, words": ("ten-field", lambda: TenField()),
    "ten-field, bytes": ("ten-field", lambda: TenField(words=False)),
    "ten-field, waits by word": ("ten-field", lambda: TenField(poll=":TRIGger:STATus?")),
    "ten-field-code, words": ("ten-field-code", lambda: TenField("code")),
    "ten-field-code, bytes": ("ten-field-code", lambda: TenField("code", words=False)),
    "ten-field-signed, words": ("ten-field-signed", lambda: TenField("signed", big=True)),
    "ten-field-signed, bytes": ("ten-field-signed", lambda: TenField("signed", words=False)),
    "keywords, signed words": ("keyword-curve", lambda: KeywordCurve()),
    "keywords, unsigned words": ("keyword-curve", lambda: KeywordCurve(signed=False)),
    "keywords, least first": ("keyword-curve", lambda: KeywordCurve(big=False)),
    "keywords, bytes": ("keyword-curve", lambda: KeywordCurve(words=False)),
    "keywords, unsigned bytes": ("keyword-curve", lambda: KeywordCurve(words=False, signed=False)),
    "keywords, the older query": ("keyword-curve", lambda: KeywordCurve(root="WFMPre")),
    "keywords, one by one": ("keyword-curve", lambda: KeywordCurve(toggles=False)),
    "descriptor, words": ("descriptor", lambda: Descriptor()),
    "descriptor, most first": ("descriptor", lambda: Descriptor(big=True)),
    "descriptor, bytes": ("descriptor", lambda: Descriptor(words=False)),
    "vdiv": ("vdiv-text", lambda: VdivText()),
    "vdiv, asked for all": ("vdiv-text", lambda: VdivText(asked="ALL")),
    "vdiv, waits by word": ("vdiv-text", lambda: VdivText(poll="SAST?")),
    "data header": ("data-header", lambda: DataHeader()),
    "memory header": ("memory-header", lambda: MemoryHeader()),
    "fetch, 64 bits": ("format-trace", lambda: FormatTrace()),
    "fetch, 32 bits": ("format-trace", lambda: FormatTrace(widest=32)),
}


def volts_of(brain: Brain) -> np.ndarray:
    return np.array([float(volts) for volts in brain.meant])


@pytest.mark.parametrize("variety", VARIETIES)
def test_volts_and_seconds_are_those_the_instrument_meant(variety) -> None:
    dialect, make = VARIETIES[variety]
    brain = make()
    with SocketServer(brain) as server, open_instrument(server.resource, dialect=dialect) as source:
        for _ in range(3):
            taken = source.capture()
            assert taken.samples.size == brain.points
            assert np.abs(taken.samples - volts_of(brain)).max() <= NEAR
            assert taken.interval_s == pytest.approx(float(brain.interval), rel=NEAR)
    assert brain.armed >= 3


@pytest.mark.parametrize("tells_depth", [True, False])
def test_a_deep_record_is_read_through_its_window(tells_depth) -> None:
    """Without a depth to ask for, the longest window that is not refused is read."""
    brain = TenField("code", points=30_000, tells_depth=tells_depth)
    with (
        SocketServer(brain) as server,
        open_instrument(server.resource, dialect="ten-field-code") as source,
    ):
        for _ in range(2):
            taken = source.capture()
            size = 30_000 if tells_depth else 25_000
            assert taken.samples.size == size
            assert np.abs(taken.samples - volts_of(brain)[:size]).max() <= NEAR


@pytest.mark.parametrize(
    ("form", "big", "text"),
    [
        ("volts", False, True),
        ("volts", True, True),  # takes :BYTeorder and does not keep to it
        ("code", False, True),
        ("code", True, True),
        ("signed", False, True),
        ("signed", True, True),
        ("volts", False, False),
        ("code", False, False),
        ("signed", True, False),
    ],
)
def test_the_ten_field_form_is_found_out_with_sign_and_byte_order(form, big, text) -> None:
    brain = TenField(form, big=big, says_text=text)
    with SocketServer(brain) as server, open_instrument(server.resource) as source:
        taken = source.capture()
        again = source.capture()
        assert np.abs(again.samples - volts_of(brain)).max() <= NEAR
        assert any("plausible" in note for note in taken.notes) is not text


def test_an_offset_set_later_still_finds_the_form() -> None:
    """With the origin at 0 both forms agree; nothing is settled until they do not."""
    brain = TenField("code", y_origin="0")
    with SocketServer(brain) as server, open_instrument(server.resource) as source:
        first = source.capture()
        assert np.abs(first.samples - volts_of(brain)).max() <= NEAR
        brain.y_origin = "40"
        second = source.capture()
        assert np.abs(second.samples - volts_of(brain)).max() <= NEAR
        assert source.info.dialect == "ten-field-code"


@pytest.mark.parametrize(
    ("dialect", "brain"),
    [
        ("ten-field", TenField(kind=1)),
        ("keyword-curve", KeywordCurve(envelope=True)),
        ("descriptor", Descriptor(record=2)),
        ("data-header", DataHeader(values=2)),
    ],
    ids=["peak detect", "envelope", "sequence", "two values an interval"],
)
def test_what_is_no_plain_waveform_is_refused(dialect, brain) -> None:
    with (
        SocketServer(brain) as server,
        open_instrument(server.resource, dialect=dialect) as source,
        pytest.raises(UnusableCapture) as caught,
    ):
        source.capture()
    assert caught.value.remedy


def test_clipped_samples_are_counted() -> None:
    brain = FormatTrace(over=7)
    with (
        SocketServer(brain) as server,
        open_instrument(server.resource, dialect="format-trace") as source,
    ):
        assert source.capture().clipped == 7


def test_what_is_known_of_the_digitiser_comes_along() -> None:
    with (
        SocketServer(Descriptor()) as server,
        open_instrument(server.resource, dialect="descriptor", name="the scope") as source,
    ):
        taken = source.capture()
        assert (taken.bits, taken.coupling, taken.averaged) == (8, "DC", 1)
        assert taken.code == pytest.approx(0.01)
        assert taken.low_rail == pytest.approx(-1.28 - 0.2)
        assert taken.high_rail == pytest.approx(1.27 - 0.2)
        assert taken.source == "the scope"
        assert taken.taken_at.tzinfo is not None
        assert 0.0 <= taken.age_s < 1.0
        assert source.info.identity == "EXAMPLE WORKS,SCOPE 10,SN0001,1.00"
        assert source.info.settings["coupling"] == "DC"


@pytest.mark.parametrize("coupling", ["AC", "A1M", "ACLimit"])
def test_ac_coupling_is_told(coupling) -> None:
    brain = TenField()
    brain.own = lambda head, argument, own=brain.own: (  # type: ignore[method-assign]
        coupling.encode() if "COUP" in head.upper() else own(head, argument)
    )
    with SocketServer(brain) as server, open_instrument(server.resource) as source:
        assert source.capture().coupling == "AC"


def test_a_frame_with_another_count_than_its_preamble_is_refused() -> None:
    brain = TenField()
    own = brain.data
    brain.data = lambda: own().replace(b"#9000001000", b"#9000000998")[:-2]  # type: ignore[method-assign]
    with (
        SocketServer(brain) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
        pytest.raises(SourceRefused, match="500 points of 2 bytes, but 998 bytes"),
    ):
        source.capture(CaptureRequest(timeout_s=2.0))
