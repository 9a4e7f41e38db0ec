"""One period for the eye."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tests.measurement.waves import Wave, parts_of
from trimmer.measurement import fold, measure, shape_of

PARTS = parts_of(k2=0.05 - 0.02j, k3=-0.04 + 0.03j)
COUNT = 20_000
WAVE = Wave(PARTS, 2 * math.pi * 31.7 / COUNT, phase=2.1, amplitude=3.0, offset=-1.0)


def test_the_shape_begins_at_the_positive_crest_in_units_of_the_fundamental():
    reading = measure(WAVE.samples(COUNT), 1e-6)
    theta, shape = shape_of(reading, 360)
    assert theta[0] == 0.0
    assert theta[90] == pytest.approx(math.pi / 2)
    expected = Wave(PARTS, 2 * math.pi / 360).samples(360)
    assert np.abs(shape - expected).max() < 1e-9


def test_folded_samples_lie_on_the_fitted_shape():
    rng = np.random.default_rng(0)
    samples = WAVE.samples(COUNT) + 0.03 * rng.standard_normal(COUNT)
    reading = measure(samples, 1e-6)
    theta, folded = fold(samples, 1e-6, reading, 200)
    _, shape = shape_of(reading, 200)
    assert np.array_equal(theta, shape_of(reading, 200)[0])
    assert np.abs(folded - shape).max() < 4.5 * 0.01 / math.sqrt(COUNT / 200) + 2e-4


def test_bins_without_samples_are_empty():
    samples = Wave(PARTS, 2 * math.pi / 25).samples(100)
    _, folded = fold(samples, 1.0, measure(samples, 1.0), 200)
    assert np.isnan(folded).sum() == 175
    with pytest.raises(ValueError, match="at least one"):
        shape_of(measure(samples, 1.0), 0)
