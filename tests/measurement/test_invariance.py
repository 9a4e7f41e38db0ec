"""What must not change a reading, or must change it in a known way."""

from __future__ import annotations

import math

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.measurement.waves import Wave, parts_of
from trimmer.measurement import measure

COUNT = 900
PARTS = parts_of(k2=0.02 - 0.01j, k3=-0.03 + 0.015j, k4=0.01j, k7=0.005)
NOISE = 1e-3 * np.random.default_rng(9).standard_normal(COUNT)

cycles = st.floats(5.0, 50.0)
phase = st.floats(0.0, 6.3)
quick = settings(max_examples=20, deadline=None, derandomize=True)


def wave(cycles: float, phase: float = 0.4) -> np.ndarray:
    return Wave(PARTS, 2 * math.pi * cycles / COUNT, phase).samples(COUNT)


def shaped(reading) -> np.ndarray:
    return reading.parts[: min(12, reading.parts.size)]


@quick
@given(cycles, phase)
def test_the_phase_of_the_capture_does_not_matter(cycles, phase):
    reading = measure(wave(cycles, phase), 1.0)
    assert np.abs(shaped(reading) - PARTS[: shaped(reading).size]).max() < 1e-8
    assert math.cos(reading.phase - phase) > 1 - 1e-12


@quick
@given(cycles, st.floats(-100, 100), st.floats(1e-6, 1e6))
def test_offset_and_scale_do_not_matter(cycles, offset, scale):
    plain = measure(wave(cycles) + NOISE, 1.0)
    other = measure(scale * (wave(cycles) + NOISE + offset), 1.0)
    assert np.abs(shaped(plain) - shaped(other)).max() < 1e-8
    assert math.isclose(other.amplitude, scale * plain.amplitude, rel_tol=1e-8)
    assert math.isclose(other.thd.high, plain.thd.high, rel_tol=1e-6)
    assert abs(other.offset - scale * (plain.offset + offset)) < 1e-8 * scale * (1 + abs(offset))


@quick
@given(cycles)
def test_time_reversal_keeps_the_crest_parts_and_turns_the_skew_parts(cycles):
    forward = measure(wave(cycles) + NOISE, 1.0)
    backward = measure((wave(cycles) + NOISE)[::-1], 1.0)
    assert np.abs(forward.crest_parts - backward.crest_parts).max() < 1e-8
    assert np.abs(forward.skew_parts + backward.skew_parts).max() < 1e-8
    assert abs(forward.rise_share + backward.rise_share - 1.0) < 1e-7


@quick
@given(cycles)
def test_upside_down_swaps_the_crests_and_turns_the_even_parts(cycles):
    upright = measure(wave(cycles) + NOISE, 1.0)
    inverted = measure(-(wave(cycles) + NOISE), 1.0)
    k = np.repeat(np.arange(2, upright.orders + 1), 2)
    assert np.abs(upright.parts - np.where(k % 2, 1, -1) * inverted.parts).max() < 1e-8
    assert abs(upright.crests.upper - inverted.crests.lower) < 1e-8
    assert abs(upright.crests.asymmetry + inverted.crests.asymmetry) < 1e-8


@quick
@given(cycles, st.floats(1e-9, 10.0))
def test_the_interval_only_names_the_frequency(cycles, interval):
    plain = measure(wave(cycles) + NOISE, 1.0, mains_hz=1e-9)
    other = measure(wave(cycles) + NOISE, interval, mains_hz=1e-9)
    assert np.abs(shaped(plain) - shaped(other)).max() < 1e-8
    assert math.isclose(other.fundamental_hz * interval, plain.fundamental_hz, rel_tol=1e-9)
