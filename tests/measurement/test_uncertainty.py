"""Stated uncertainties: against the inverse Fisher matrix of the record, and against the truth."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tests.campaigns.measurement_coverage import CASES, COARSE, SHAPED, run
from tests.measurement.waves import Wave, fisher_bound
from trimmer.measurement import measure


@pytest.mark.parametrize(("cycles", "count", "parts"), [(5.37, 1500, SHAPED), (31.3, 2500, COARSE)])
def test_the_covariance_is_the_inverse_fisher_matrix_of_the_very_record(cycles, count, parts):
    sigma = 0.004
    wave = Wave(parts, 2 * math.pi * cycles / count, phase=1.3, amplitude=2.0, offset=0.1)
    noise = sigma * np.random.default_rng(1).standard_normal(count)
    reading = measure(wave.samples(count) + noise, 1.0)
    orders = min(64, int(0.45 * count / cycles))
    bound, bound_w = fisher_bound(wave, count, orders, reading.noise)
    bound = bound[:28, :28]
    # the bound is taken at the true parts, the covariance at those found: they differ by the noise
    assert np.allclose(np.diag(reading.covariance), np.diag(bound), rtol=2e-2)
    scale = np.sqrt(np.multiply.outer(np.diag(bound), np.diag(bound)))
    assert np.abs((reading.covariance - bound) / scale).max() < 0.02
    assert 2 * math.pi * reading.fundamental_sigma_hz == pytest.approx(bound_w, rel=1e-2)


def test_for_many_periods_the_bound_takes_its_textbook_form():
    # Kay, Fundamentals of Statistical Signal Processing, 1993 (from memory); numerically confirmed:
    # along Z_k (2 s^2/(N A^2)) (1 + |Z_k|^2), across (2 s^2/(N A^2)) (1 + k^2 |Z_k|^2)
    count, sigma, amplitude = 8000, 0.01, 2.0
    parts = np.zeros(28)
    parts[4 * 2] = 0.2  # c_6, so that "along" is the crest part and "across" the skew part
    wave = Wave(parts, 2 * math.pi * 201.3 / count, amplitude=amplitude)
    noise = sigma * np.random.default_rng(2).standard_normal(count)
    reading = measure(wave.samples(count) + noise, 1.0)
    unit = 2 * reading.noise**2 / (count * amplitude**2)
    variances = np.diag(reading.covariance)
    assert variances[8] == pytest.approx(unit * (1 + 0.2**2), rel=0.02)
    assert variances[9] == pytest.approx(unit * (1 + 36 * 0.2**2), rel=0.02)
    assert variances[0] == pytest.approx(unit, rel=0.02)
    # var w = 24 s^2 / (N (N^2 - 1) sum l^2 A_l^2)
    weight = amplitude**2 * (1 + 36 * 0.2**2)
    w_sigma = math.sqrt(24 * reading.noise**2 / (count * (count**2 - 1) * weight))
    assert 2 * math.pi * reading.fundamental_sigma_hz == pytest.approx(w_sigma, rel=0.01)
    assert reading.amplitude_sigma == pytest.approx(math.sqrt(2 / count) * reading.noise, rel=0.01)


@pytest.mark.parametrize("case", [c for c in CASES if c.samples <= 5000], ids=lambda c: c.name)
def test_stated_intervals_hold_and_the_bound_is_met(case):
    records = 250
    outcome = run(case, records, seed=7)
    slack = 3.5 / math.sqrt(2 * records)  # of a standard deviation, with so few records
    assert outcome.spread_parts < 1.05 + slack / math.sqrt(28) * 2
    assert outcome.spread_w < 1.05 + slack
    assert outcome.bias < 0.1 + 3.9 / math.sqrt(records)
    assert 0.94 < outcome.cover_parts < 0.96
    assert 0.90 < outcome.cover_w <= 0.995
    assert 0.90 < outcome.cover_thd <= 0.995
    assert 0.95 < outcome.width_thd < 1.10


def test_noise_that_is_not_white_is_noticed_order_by_order():
    rng = np.random.default_rng(5)
    count = 8000
    wave = Wave(SHAPED, 2 * math.pi * 40.3 / count)
    n = np.arange(count)
    near_third = 0.03 * np.cos(3.05 * wave.w * n + np.cumsum(0.02 * rng.standard_normal(count)))
    samples = wave.samples(count) + 0.002 * rng.standard_normal(count) + near_third
    sigma = np.sqrt(np.diag(measure(samples, 1.0).covariance))
    assert sigma[2] > 2.0 * sigma[10]
    white = wave.samples(count) + 0.002 * rng.standard_normal(count)
    sigma = np.sqrt(np.diag(measure(white, 1.0).covariance))
    assert sigma[2] == pytest.approx(sigma[10], rel=0.02)
