"""The polynomial field against its own definition, by differences and by moving the anchor."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from trimmer.guidance.field import (
    FEATURES,
    FieldBelief,
    derivative_weights,
    features,
    shift_matrix,
    slopes,
)

PLACES = st.tuples(st.floats(-1, 1), st.floats(-1, 1)).map(np.array)


def weights(seed=0, m=5):
    return np.random.default_rng(seed).standard_normal((m, FEATURES))


def test_features_are_the_terms_of_a_taylor_series():
    u, v = 0.3, -0.7
    expected = [
        1,
        u,
        v,
        u * u / 2,
        u * v,
        v * v / 2,
        u**3 / 6,
        u * u * v / 2,
        u * v * v / 2,
        v**3 / 6,
    ]
    assert features(np.array([u, v])) == pytest.approx(expected)


@given(PLACES)
def test_slopes_are_the_derivatives_of_the_features(at):
    h = 1e-5
    for trim in (0, 1):
        step = np.eye(2)[trim] * h
        by_differences = (features(at + step) - features(at - step)) / (2 * h)
        assert slopes(at)[trim] == pytest.approx(by_differences, abs=1e-8)


def test_many_places_at_once_give_what_each_gives_alone():
    at = np.random.default_rng(1).uniform(-1, 1, (4, 3, 2))
    assert features(at)[2, 1] == pytest.approx(features(at[2, 1]))
    assert slopes(at)[2, 1] == pytest.approx(slopes(at[2, 1]))


@given(PLACES, PLACES)
@settings(max_examples=50)
def test_moving_the_anchor_leaves_the_field_as_it_is(anchor, at):
    w = weights()
    belief = FieldBelief(np.zeros(2), w, np.tile(np.eye(FEATURES), (5, 1, 1)))
    moved = belief.moved_to(anchor)
    assert moved.at(at) == pytest.approx(belief.at(at), abs=1e-9)
    assert moved.columns(at) == pytest.approx(belief.columns(at), abs=1e-9)
    assert moved.variance(at) == pytest.approx(belief.variance(at), rel=1e-6, abs=1e-9)


def test_shifts_add_up():
    a, b = np.array([0.2, -0.4]), np.array([-0.5, 0.1])
    assert shift_matrix(a) @ shift_matrix(b) == pytest.approx(shift_matrix(a + b))


def test_the_derivatives_of_a_field_are_fields_of_second_degree():
    w = weights(3)
    at = np.array([0.25, 0.6])
    upper, lower = derivative_weights(w)
    assert upper @ features(at) == pytest.approx(slopes(at)[0] @ w.T)
    assert lower @ features(at) == pytest.approx(slopes(at)[1] @ w.T)


def test_columns_at_the_anchor_are_the_linear_weights():
    w = weights(4)
    belief = FieldBelief(np.array([0.1, 0.2]), w, np.zeros((5, FEATURES, FEATURES)))
    assert belief.columns(np.array([0.1, 0.2])) == pytest.approx(w[:, 1:3].T)
