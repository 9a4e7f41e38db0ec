"""Intervals of THD: the stored belt against its construction and against what it promises."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats
from scipy.special import chndtr

from tests.campaigns.measurement_belt import (
    FREEDOMS,
    LENGTHS,
    acceptance,
    log_density,
    render,
    table,
)
from trimmer.measurement import belt_table
from trimmer.measurement.thd import Disturbance, belt, student_95, thd_of


def test_the_stored_table_is_what_its_construction_gives():
    some = {freedom: acceptance(float(freedom)) for freedom in (2, 28)}
    for freedom, rows in some.items():
        at = FREEDOMS.index(freedom)
        assert np.abs(np.array(belt_table.LEAST[at]) - rows[:, 0]).max() < 2e-4
        assert np.abs(np.array(belt_table.LARGEST[at]) - rows[:, 1]).max() < 2e-4
    assert belt_table.FREEDOMS == FREEDOMS
    assert np.allclose(belt_table.LENGTHS, LENGTHS, rtol=1e-5)
    assert render({2: some[2]}).startswith('"""')
    assert callable(table)


def test_the_density_behind_it_is_scipys():
    y = np.array([0.5, 3.0, 20.0, 60.0, 200.0])
    for freedom, length in ((2, 1.0), (28, 3.0), (126, 9.0)):
        ours = log_density(y, length, freedom)
        theirs = stats.ncx2.logpdf(y, freedom, length**2)
        assert np.allclose(ours, theirs, atol=1e-6)


@pytest.mark.parametrize("freedom", [4, 10, 28, 33.3, 126, 300])
@pytest.mark.parametrize("length", [0.0, 0.6, 1.7, 2.6, 3.1, 4.4, 7.3, 15.0, 60.0, 500.0])
def test_the_belt_covers_the_truth_95_times_in_a_hundred(freedom, length):
    centre, spread = freedom + length**2, math.sqrt(2 * freedom + 4 * length**2)
    y = np.linspace(max(0.0, centre - 9 * spread), centre + 9 * spread, 6001)
    ends = np.array([belt(float(v), freedom) for v in y])
    held = (ends[:, 0] <= length) & (length <= ends[:, 1])
    chance = np.diff(chndtr(y, freedom, length**2))
    covered = float(chance[held[1:] & held[:-1]].sum())
    assert 0.94 < covered < 0.96


def test_the_interval_is_one_sided_near_zero_and_never_empty():
    for y in (0.0, 5.0, 28.0, 41.0):
        low, high = belt(y, 28.0)
        assert low == 0.0
        assert high >= 1.5
    low, high = belt(60.0, 28.0)
    assert 0.0 < low < math.sqrt(60 - 28) < high


def test_far_from_zero_the_interval_is_the_ordinary_one():
    parts = np.zeros(28)
    parts[:4] = 0.01, 0.02, -0.01, 0.005
    covariance = 1e-10 * np.eye(28)
    covariance[0, 0] = 9e-10
    thd = thd_of(parts, covariance, Disturbance(28e-10))
    direction = parts / np.linalg.norm(parts)
    sigma = math.sqrt(direction @ covariance @ direction)
    assert thd.sigma == pytest.approx(sigma, rel=0.01)
    assert thd.high - thd.value == pytest.approx(1.96 * sigma, rel=0.02)
    assert thd.value - thd.low == pytest.approx(1.96 * sigma, rel=0.02)


def test_a_systematic_part_widens_the_interval_but_is_not_taken_off():
    parts = np.zeros(28)
    parts[0] = 0.01
    systematic = np.zeros(28)
    systematic[0] = 1e-6
    wide = thd_of(
        parts, np.diag(systematic) + 1e-12 * np.eye(28), Disturbance(28e-12, tuple(systematic))
    )
    assert wide.value == pytest.approx(0.01, abs=1e-8)
    assert wide.sigma == pytest.approx(1e-3, rel=0.05)


def test_no_disturbance_at_all_gives_a_point():
    thd = thd_of(np.array([3e-3, 4e-3]), np.zeros((2, 2)), Disturbance(0.0))
    assert (thd.value, thd.low, thd.high, thd.sigma) == pytest.approx((5e-3, 5e-3, 5e-3, 0.0))


@pytest.mark.parametrize("freedom", [8, 12, 30, 100, 1000])
def test_students_half_width_is_scipys(freedom):
    assert student_95(freedom) == pytest.approx(stats.t.ppf(0.975, freedom), rel=2e-3)
    assert student_95(math.inf) == pytest.approx(stats.norm.ppf(0.975))


def test_what_noise_adds_is_taken_off_the_square():
    parts = np.zeros(28)
    parts[0] = 5e-4
    noise_power = 9e-8
    thd = thd_of(parts, noise_power / 28 * np.eye(28), Disturbance(noise_power))
    assert thd.value == pytest.approx(4e-4)  # 5e-4 squared less 3e-4 squared
    quiet = thd_of(0.5 * parts, noise_power / 28 * np.eye(28), Disturbance(noise_power))
    assert (quiet.value, quiet.low) == (0.0, 0.0)
    assert quiet.high > 1e-4


def test_squares_of_thd_are_right_on_average():
    rng = np.random.default_rng(6)
    truth = np.zeros(28)
    truth[:2] = 4e-4, 3e-4
    each = 1e-4
    squares = []
    for _ in range(4000):
        found = truth + each * rng.standard_normal(28)
        thd = thd_of(found, each**2 * np.eye(28), Disturbance(28 * each**2))
        squares.append(thd.value**2 if thd.value else found @ found - 28 * each**2)
    assert np.mean(squares) == pytest.approx(25e-8, rel=0.03)
