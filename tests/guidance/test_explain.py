"""Which movement explains a reading."""

import numpy as np
import pytest

from trimmer.guidance.explain import Movement, explain, explain_both, fits
from trimmer.guidance.field import FEATURES, FieldBelief

SIGMA = 1e-4


def belief(seed=0, known=(True, True), bend=0.05):
    rng = np.random.default_rng(seed)
    k = np.repeat(np.arange(2, 16), 2)
    scale = 0.05 * (2.0 / k) ** 1.5
    scale[1::2] *= 0.05
    mean = np.zeros((28, FEATURES))
    covariance = np.zeros((28, FEATURES, FEATURES))
    for trim in (0, 1):
        if known[trim]:
            mean[:, 1 + trim] = scale * np.where(k % 2 == 0, 1.0 - 2.0 * trim, 1.0)
            covariance[:, 1 + trim, 1 + trim] = (0.02 * scale) ** 2
        else:
            covariance[:, 1 + trim, 1 + trim] = scale**2
    covariance[:, 3, 3] = covariance[:, 5, 5] = (bend * scale) ** 2
    mean[:, 0] = 0.003 * rng.standard_normal(28) * scale / scale[0]
    return FieldBelief(np.zeros(2), mean, covariance)


def read(b, at, seed=1):
    rng = np.random.default_rng(seed)
    return b.at(np.array(at)) + SIGMA * rng.standard_normal(28), np.full(28, SIGMA**2)


@pytest.mark.parametrize("way", [0.21, 0.034, -0.08])
def test_a_movement_is_found_within_its_own_uncertainty(way):
    b = belief()
    parts, variance = read(b, (way, 0.0))
    found = explain(b, parts, variance, Movement(0, 0.1, 10.0, -0.4, 0.4))
    assert abs(found.way - way) < 4 * found.sigma
    assert found.sigma < 0.01
    assert fits(found.misfit, 28)


def test_what_was_thought_of_a_movement_counts_where_the_reading_says_little():
    b = belief(known=(False, True))
    parts, variance = read(b, (0.0, 0.0))
    found = explain(b, parts, variance, Movement(0, 0.1, 0.01, 0.0, 0.2))
    assert found.way < 0.1


@pytest.mark.parametrize("seed", range(10))
def test_the_trim_that_moved_is_the_likeliest(seed):
    b = belief(seed)
    way = 0.02 + 0.01 * seed
    parts, variance = read(b, (0.0, way), seed)
    upper = min(
        explain(b, parts, variance, Movement(0, s * way / 2, way, min(0, s), max(0, s))).surprise
        for s in (-0.3, 0.3)
    )
    lower = explain(b, parts, variance, Movement(1, way / 2, way, 0.0, 0.3)).surprise
    assert lower + 20 < upper


def test_a_column_that_is_not_known_explains_anything_but_nothing_well():
    b = belief(known=(True, False))
    parts, variance = read(b, (0.06, 0.0))
    known = explain(b, parts, variance, Movement(0, 0.05, 0.05, 0.0, 0.2))
    unknown = explain(b, parts, variance, Movement(1, 0.05, 0.05, 0.0, 0.2))
    assert known.surprise + 20 < unknown.surprise


def test_where_nothing_fits_nobody_is_accused():
    b = belief()
    parts, variance = read(b, (0.0, 0.0))
    parts = parts + 30 * SIGMA * np.random.default_rng(3).standard_normal(28)
    found = explain(b, parts, variance, Movement(0, 0.05, 0.05, -0.2, 0.2))
    assert not fits(found.misfit, 28)


def test_both_trims_are_found_where_both_moved():
    b = belief()
    parts, variance = read(b, (0.05, -0.03))
    place, sigma, misfit = explain_both(b, parts, variance, np.array([0.05, 0.0]))
    assert np.all(np.abs(place - [0.05, -0.03]) < 4 * sigma)
    assert fits(misfit, 28)
