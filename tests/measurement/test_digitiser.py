"""What a digitiser does, and whether the reading says so."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tests.measurement.waves import Wave, parts_of, rounded
from trimmer.measurement import Digitiser, measure
from trimmer.measurement.digitiser import (
    default_nonlinearity,
    look_at,
    systematic_variances,
)
from trimmer.measurement.screening import record_of

COUNT = 5000
WAVE = Wave(parts_of(k2=0.004, k3=-0.006 + 0.002j), 2 * math.pi * 9.37 / COUNT, phase=0.3)


def captured(
    amplitude: float, bits: int, noise_codes: float, seed: int = 0, bend=None
) -> np.ndarray:
    """A wave through a converter of range -1..1, with noise and a bent characteristic."""
    code = 2.0 / 2**bits
    rng = np.random.default_rng(seed)
    values = amplitude * WAVE.samples(COUNT) + noise_codes * code * rng.standard_normal(COUNT)
    if bend is not None:
        values = values + bend(values)
    return rounded(values, bits, 1.0)


@pytest.mark.parametrize("bits", [6, 8, 12])
def test_the_step_of_the_codes_is_seen_where_it_is_not_stated(bits):
    samples = captured(0.9, bits, 0.5) if bits < 12 else captured(0.9, bits, 0.5)[:]
    seen = look_at(record_of(samples, 1.0), Digitiser())
    if bits == 12:  # more levels than could be told apart with certainty
        assert seen.code is None or seen.code == pytest.approx(2.0 / 2**bits)
    else:
        assert seen.code == pytest.approx(2.0 / 2**bits)
    assert look_at(record_of(samples, 1.0), Digitiser(8, 0.01)).code == 0.01
    stated = look_at(record_of(samples, 1.0), Digitiser(bits, None, -1.0, 1.0))
    assert stated.code == pytest.approx(2.0 / (2**bits - 1))


def test_values_without_steps_have_no_code():
    rng = np.random.default_rng(1)
    samples = WAVE.samples(COUNT) + 1e-3 * rng.standard_normal(COUNT)
    seen = look_at(record_of(samples, 1.0), Digitiser())
    assert seen.code is None
    assert seen.codes == math.inf


def test_codes_printed_with_few_digits_are_still_seen():
    samples = np.round(captured(0.9, 8, 0.5), 5)
    assert look_at(record_of(samples, 1.0), Digitiser()).code == pytest.approx(2.0 / 256, rel=0.01)


def test_rounding_with_noise_is_one_more_noise():
    reading = measure(
        captured(0.9, 8, 0.5), 1.0, digitiser=Digitiser(8, 2 / 256, nonlinearity_codes=0)
    )
    code = 2.0 / 256
    assert reading.noise == pytest.approx(math.hypot(0.5 * code, code / math.sqrt(12)), rel=0.04)
    assert reading.systematic.size == 0 or np.diag(reading.systematic).max() < 1e-12


def test_rounding_without_noise_is_told_as_systematic():
    """The spread over amplitude and offset of what rounding does is what is stated."""
    rng = np.random.default_rng(4)
    errors, stated = [], []
    truth = np.zeros(28)
    truth[: WAVE.parts.size] = WAVE.parts
    for _ in range(60):
        amplitude, offset = rng.uniform(0.3, 0.5), rng.uniform(0, 0.1)
        samples = rounded(amplitude * WAVE.samples(20_000) + offset, 8, 1.0)
        reading = measure(samples, 1.0, digitiser=Digitiser(8, 2 / 256, nonlinearity_codes=0.0))
        errors.append((reading.parts - truth)[0::2])
        stated.append(np.sqrt(np.diag(reading.covariance))[0::2])
    ratio = np.sqrt(np.mean(np.square(errors))) / np.sqrt(np.mean(np.square(stated)))
    assert 0.5 < ratio < 1.3


def test_a_range_used_at_a_fifth_says_so_in_its_uncertainty():
    bend = lambda v: 0.25 * (2 / 256) * np.sin(9.0 * v + 1.0)  # noqa: E731
    digitiser = Digitiser(8, 2 / 256, -1.0, 1.0, nonlinearity_codes=0.25)
    truth = WAVE.thd
    full = measure(captured(0.9, 8, 0.5, bend=bend), 1.0, digitiser=digitiser)
    fifth = measure(captured(0.2, 8, 0.5, bend=bend), 1.0, digitiser=digitiser)
    assert fifth.thd.sigma > 3.5 * full.thd.sigma
    for reading in (full, fifth):
        assert reading.thd.low <= truth <= reading.thd.high
    assert np.diag(fifth.systematic)[0] > 0.0
    assert np.all(np.diag(fifth.systematic)[1::2] == 0.0)  # a bent characteristic leaves skew alone


def test_a_stated_nonlinearity_covers_bows_and_bends_of_that_peak():
    code = 2.0 / 256
    digitiser = Digitiser(8, code, -1.0, 1.0, nonlinearity_codes=0.5)
    worst = 0.0
    for bend in (
        lambda v: 0.5 * code * (1 - v * v),
        lambda v: 0.5 * code * 2.6 * (v - v**3),
        lambda v: 0.5 * code * np.sin(3 * math.pi * v),
    ):
        clean = 0.9 * WAVE.samples(COUNT)
        bent = measure(clean + bend(clean), 1.0, digitiser=digitiser)
        plain = measure(clean, 1.0)
        sigma = np.sqrt(np.diag(bent.covariance) + 1e-30)
        worst = max(worst, float(np.abs((bent.parts - plain.parts) / sigma)[[0, 2, 4, 6]].max()))
    assert 1.0 < worst < 4.5


def test_default_nonlinearity_grows_with_the_bits_but_not_with_averaging():
    assert default_nonlinearity(8) == pytest.approx(0.1)
    assert default_nonlinearity(12) == pytest.approx(0.4)
    # 256 frames averaged turn 8 bits into 12: the same volts in codes a sixteenth as large
    assert default_nonlinearity(12, averaged=256) == pytest.approx(1.6)


def test_variances_follow_their_formula():
    samples = captured(0.9, 8, 0.5)
    digitiser = Digitiser(8, 2 / 256, nonlinearity_codes=1.0)
    seen = look_at(record_of(samples, 1.0), digitiser)
    loud = systematic_variances(28, 0.9, 3 * 2 / 256, seen, digitiser)
    codes = 0.9 / (2 / 256)
    assert math.sqrt(loud[0]) == pytest.approx(0.5 / 2 / codes)
    assert math.sqrt(loud[2]) == pytest.approx(0.5 / 3 / codes)
    assert loud[1] == 0.0
    quiet = systematic_variances(28, 0.9, 0.0, seen, Digitiser(8, 2 / 256, nonlinearity_codes=0.0))
    assert quiet[0] == pytest.approx(1 / (math.pi**4 * codes**3))
