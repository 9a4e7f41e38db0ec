"""From codes to volts: worked examples, marks, rails, shifted codes, and refusals."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.contract import SourceRefused, UnusableCapture
from drivers.visa.frame import Reading, code_step, convert
from drivers.visa.shelf import shelf

DIALECTS = shelf()[0]


def ten(name: str, payload: bytes, **changes: float):
    """Convert with a ten-field preamble."""
    fields = {
        "channel": 1.0,
        "encoding": 0.0,
        "format": 0.0,
        "type": 0.0,
        "points": float(len(payload)),
        "count": 1.0,
        "x_increment": 1e-6,
        "x_origin": 0.0,
        "x_reference": 0.0,
        "y_increment": 0.008,
        "y_origin": 50.0,
        "y_reference": 127.0,
        "mode": None,
        "sample_rate": None,
    }
    return convert(DIALECTS[name], {**fields, **changes}, payload, Reading())


def test_the_same_preamble_means_two_things() -> None:
    """(.008, 50, 127) and code 200: 50.584 V with the origin in volts, 0.184 V in codes."""
    assert ten("ten-field", bytes([200, 90])).volts[0] == pytest.approx(50.584, rel=1e-12)
    assert ten("ten-field-code", bytes([200, 90])).volts[0] == pytest.approx(0.184, rel=1e-12)


def test_signed_codes_go_through_zero_without_a_gap() -> None:
    codes = np.arange(-128, 128).astype(np.int8)
    volts = ten("ten-field-signed", codes.tobytes(), y_origin=0.0, y_reference=0.0).volts
    assert np.allclose(np.diff(volts), 0.008, rtol=1e-9)
    assert volts[128] == 0.0


def test_text_scales_read_negative_codes_as_twos_complement() -> None:
    """A division by 25 a code; taking 255 off instead of 256 would leave a step of two codes."""
    codes = np.arange(-100, 101).astype(np.int8)
    fields = {"channel": 1.0, "vdiv": 0.5, "offset": 0.1, "rate": 1e6, "mode": None}
    volts = convert(DIALECTS["vdiv-text"], fields, codes.tobytes(), Reading()).volts
    assert np.allclose(np.diff(volts), 0.02, rtol=1e-9)
    assert volts[100] == pytest.approx(-0.1)


def test_a_keyword_preamble_by_its_worked_example() -> None:
    """YMULT 31.25e-6, offsets 0, code 6400 is 0.2 V."""
    fields = {
        "channel": 1.0, "width": 2.0, "bits": 16.0, "format": "RI", "order": "MSB", "points": 2.0, "shape": "Y",
        "interval": 1e-6, "multiplier": 31.25e-6, "offset": 0.0, "zero": 0.0, "mode": None, "averages": None,
    }  # fmt: skip
    payload = np.array([6400, -6400], dtype=">i2").tobytes()
    read = convert(DIALECTS["keyword-curve"], fields, payload, Reading())
    assert read.volts == pytest.approx([0.2, -0.2], rel=1e-14)


def test_codes_kept_for_marks_are_holes_and_clipped_samples() -> None:
    read = ten("ten-field", bytes([1, 255, 255, 100, 101, 102]), y_origin=0.0)
    assert read.clipped == 3
    assert read.low_rail == pytest.approx(-126 * 0.008)
    assert read.high_rail == pytest.approx(128 * 0.008)
    with pytest.raises(UnusableCapture, match="1 of 4 samples"):
        ten("ten-field", bytes([0, 100, 101, 102]))


def test_without_marks_the_rails_are_the_outermost_codes() -> None:
    read = ten("ten-field-code", bytes([0, 255, 0, 100]), y_origin=0.0)
    assert read.clipped == 3
    assert (read.low_rail, read.high_rail) == pytest.approx((-127 * 0.008, 128 * 0.008))


def test_eight_bits_shifted_into_sixteen_are_seen_as_eight() -> None:
    words = (np.arange(20, 240, dtype=np.uint16) << 8).astype("<u2")
    read = ten(
        "ten-field-code", words.tobytes(), format=1.0, points=220.0, y_increment=1e-5, y_origin=0.0
    )
    assert read.bits == 8
    assert read.code == pytest.approx(256e-5)
    assert read.high_rail == pytest.approx((0xFF00 - 127) * 1e-5)
    assert read.clipped == 0


def test_averaged_words_have_their_true_bits() -> None:
    words = np.random.default_rng(1).integers(0x2000, 0xD000, 1000) & 0xFFF0
    read = ten("ten-field", words.astype("<u2").tobytes(), format=1.0, points=1000.0, count=64.0)
    assert read.bits == 12
    assert read.averaged == 64


def test_peak_detect_is_refused_with_a_remedy() -> None:
    with pytest.raises(UnusableCapture, match="peak detect") as caught:
        ten("ten-field", bytes([100, 101]), type=1.0)
    assert "normal" in caught.value.remedy


@pytest.mark.parametrize("points", [3.0, 5.0, 2.0])
def test_a_count_that_does_not_fit_its_points_is_refused(points) -> None:
    with pytest.raises(SourceRefused, match="points"):
        ten("ten-field", bytes([1, 2, 3, 4]), points=points)


@pytest.mark.parametrize("interval", [0.0, -1e-6, float("nan"), float("inf")])
def test_an_interval_that_is_none_is_refused(interval) -> None:
    with pytest.raises(SourceRefused):
        ten("ten-field", bytes([100, 101]), x_increment=interval)


def test_no_samples_are_no_capture() -> None:
    with pytest.raises(UnusableCapture, match="no samples"):
        ten("ten-field", b"")


def trace(values: list[float]):
    payload = np.array(values, dtype=">f8").tobytes()
    fields = {"channel": 1.0, "encoding": 0.0, "points": float(len(values)), "interval": 1e-6}
    return convert(DIALECTS["format-trace"], fields, payload, Reading())


def test_out_of_range_values_are_counted_and_drawn_at_the_edge() -> None:
    """9.9E37 and -9.9E37: SCPI-1999, 7.2.1.4."""
    read = trace([9.9e37, 0.5, -0.25, -9.9e37, float("inf")])
    assert read.clipped == 3
    assert list(read.volts) == [0.5, 0.5, -0.25, -0.25, 0.5]


@pytest.mark.parametrize("missing", [9.91e37, float("nan")])
def test_not_a_number_is_a_missing_sample(missing) -> None:
    """9.91E37: SCPI-1999, 7.2.1.5."""
    with pytest.raises(UnusableCapture, match="missing"):
        trace([0.1, missing, 0.2])


def test_all_out_of_range_is_no_capture() -> None:
    with pytest.raises(UnusableCapture, match="every sample"):
        trace([9.9e37, 9.9e37])


def test_rails_that_the_codes_contradict_are_not_claimed() -> None:
    codes = np.array([-100, 0, 100, 200], dtype=">i2")
    fields = {"channel": 1.0, "vertical_scale": 0.2, "period": 1e-6, "centre": 0.0}
    read = convert(DIALECTS["memory-header"], fields, codes.tobytes(), Reading())
    assert (read.low_rail, read.high_rail) == (None, None)


@given(
    codes=st.lists(st.integers(0, 255), min_size=2, max_size=200).filter(lambda c: len(set(c)) > 1),
    shift=st.integers(0, 8),
)
def test_the_step_between_codes_is_at_least_the_shift(codes: list[int], shift: int) -> None:
    shifted = np.array(codes, dtype=np.uint16) << shift
    step = code_step(shifted)
    assert step >= 1 << shift
    assert all((int(code) - int(shifted[0])) % step == 0 for code in shifted)


@given(
    codes=st.lists(st.integers(-32768, 32767), min_size=1, max_size=50),
    big=st.booleans(),
)
def test_both_byte_orders_give_the_same_volts(codes: list[int], big: bool) -> None:
    order = ">" if big else "<"
    fields = {
        "channel": 1.0, "width": 2.0, "bits": 16.0, "format": "RI", "order": "MSB" if big else "LSB",
        "points": float(len(codes)), "shape": "Y", "interval": 1e-6, "multiplier": 1.0,
        "offset": 0.0, "zero": 0.0, "mode": None, "averages": None,
    }  # fmt: skip
    payload = np.array(codes, dtype=f"{order}i2").tobytes()
    volts = convert(DIALECTS["keyword-curve"], fields, payload, Reading()).volts
    assert list(volts) == [float(code) for code in codes]
