"""The fundamental found with no hint."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tests.measurement.waves import Wave, series
from trimmer.measurement import measure
from trimmer.measurement.screening import record_of
from trimmer.measurement.search import _hann, coarse_fundamental, nearest_lines


def distorted(rng: np.random.Generator, count: int, cycles: float, thd: float) -> np.ndarray:
    w = 2 * math.pi * cycles / count
    most = min(40, int(0.98 * math.pi / w))
    parts = rng.standard_normal(2 * (most - 1)) / np.repeat(
        np.arange(2, most + 1), 2
    ) ** rng.uniform(0, 2)
    parts *= thd / max(float(np.linalg.norm(parts)), 1e-9)
    return Wave(parts, w, phase=float(rng.uniform(0, 7))).samples(count)


@pytest.mark.parametrize("seed", range(60))
def test_the_fundamental_is_found_among_distortion_hum_offset_and_drift(seed):
    rng = np.random.default_rng(seed)
    count = int(10 ** rng.uniform(1.9, 4.6))
    cycles = 10 ** rng.uniform(math.log10(3.02), math.log10(count / 7))
    n = np.arange(count)
    samples = distorted(rng, count, cycles, rng.uniform(0, 0.3))
    interval = 10 ** rng.uniform(-8, -3)
    samples += rng.uniform(-2, 2) + rng.choice([0.0, 0.5]) * (n / count - 0.5)
    samples += rng.choice([0.0, 0.05]) * np.cos(2 * math.pi * 50 * interval * n + 1)
    samples += 10 ** rng.uniform(-6, -1.7) * rng.standard_normal(count)
    reading = measure(samples * 10 ** rng.uniform(-3, 2), interval)
    assert reading.cycles == pytest.approx(cycles, abs=0.1)


@pytest.mark.parametrize("cycles", [3.3, 30.7, 301.2, 9_999.7, 100_000.3])
def test_long_records_are_searched_without_transforming_them_whole(cycles):
    rng = np.random.default_rng(int(cycles))
    count = 700_000
    samples = distorted(rng, count, cycles, 0.3) + 0.02 * rng.standard_normal(count) + 5.0
    w, unsure = coarse_fundamental(record_of(samples, 1.0))
    assert abs(w * count / (2 * math.pi) - cycles) <= max(0.3, 0.5 * unsure * count / (2 * math.pi))
    assert measure(samples, 1.0).cycles == pytest.approx(cycles, abs=1e-2)


@pytest.mark.parametrize("frequency", [10.0, 47.0, 1234.5, 18_000.0, 200_000.0])
@pytest.mark.parametrize("per_cycle", [8.3, 40.0, 2500.0])
def test_any_frequency_at_any_rate(frequency, per_cycle):
    count = int(max(400, 6.3 * per_cycle))
    interval = 1.0 / (frequency * per_cycle)
    samples = Wave(series("triangle", 3), 2 * math.pi / per_cycle).samples(count)
    reading = measure(samples, interval, orders=3)
    assert reading.fundamental_hz == pytest.approx(frequency, rel=1e-6)


@pytest.mark.parametrize("kind", ["square", "ramp", "triangle"])
@pytest.mark.parametrize("cycles", [3.2, 7.7, 55.5])
def test_strongly_distorted_waves_have_the_period_they_have(kind, cycles):
    count = 4000
    samples = Wave(series(kind, 30), 2 * math.pi * cycles / count, phase=1.0).samples(count)
    assert measure(samples, 1.0).cycles == pytest.approx(cycles, abs=1e-6)


def test_mains_lines_off_their_nominal_frequency_are_found():
    n = np.arange(100_000)
    samples = np.cos(2 * math.pi * 0.01037 * n) + 0.01 * np.cos(2 * math.pi * 49.93e-5 * n)
    record = record_of(samples, 1e-5)
    w = 2 * math.pi * 1e-5 * np.array([50.0, 60.0])
    found = nearest_lines(record, w, 0.01 * w)
    assert found[0] == pytest.approx(2 * math.pi * 49.93e-5, rel=2e-4)


def test_the_window_is_the_one_of_the_tables():
    # Harris, Proc. IEEE 66, 1978 (from memory): coherent gain 0.5, noise bandwidth 1.5 bins,
    # scallop loss 1.4236 dB
    window = _hann(4096)
    assert window.mean() == pytest.approx(0.5, abs=1e-9)
    assert 4096 * (window**2).sum() / window.sum() ** 2 == pytest.approx(1.5, abs=1e-9)
    half = abs((window * np.exp(1j * math.pi * np.arange(4096) / 4096)).sum()) / window.sum()
    assert -20 * math.log10(half) == pytest.approx(1.4236, abs=1e-3)
