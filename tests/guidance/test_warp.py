"""A change of a trim's scale, against the field on the changed scale by differences."""

import numpy as np
import pytest

from trimmer.guidance.field import FEATURES, features
from trimmer.guidance.warp import Warp, own_bend, to_plain, warp_matrix

UPPER, LOWER = Warp(1.3, 0.4, -0.8), Warp(-0.7, 0.2, 0.5)


def stretched(z, warp):
    return warp.scale * z + warp.bend * z**2 / 2 + warp.third * z**3 / 6


def test_the_new_weights_are_the_derivatives_on_the_new_scale():
    w = np.random.default_rng(0).standard_normal((3, FEATURES))
    new = w @ warp_matrix(UPPER, LOWER).T
    for u, v in ((0.01, 0.02), (-0.02, 0.01), (0.015, -0.015)):
        old_place = np.array([stretched(u, UPPER), stretched(v, LOWER)])
        # Equal up to the fourth order that the field leaves out: (2e-2)^4 of weights of size one.
        assert new @ features(np.array([u, v])) == pytest.approx(w @ features(old_place), abs=3e-6)


def test_plain_fields_have_no_bend_along_their_own_columns():
    rng = np.random.default_rng(1)
    w, template = rng.standard_normal((2, 6, FEATURES))
    template[:, 1:3] = 1.7 * w[:, 1:3] + 0.05 * rng.standard_normal((6, 2))
    plain = w @ warp_matrix(*to_plain(w, template)).T
    for trim, third in ((0, 6), (1, 9)):
        assert own_bend(plain, trim) == pytest.approx(0.0, abs=1e-12)
        assert plain[:, 1 + trim] @ plain[:, third] == pytest.approx(0.0, abs=1e-10)
        assert plain[:, 1 + trim] @ w[:, 1 + trim] == pytest.approx(
            template[:, 1 + trim] @ w[:, 1 + trim]
        )


def test_the_same_field_on_any_scale_is_the_same_when_plain():
    rng = np.random.default_rng(2)
    w = rng.standard_normal((6, FEATURES))
    other = w @ warp_matrix(Warp(1.2, 0.3, 0.1), Warp(0.8, -0.2, 0.4)).T
    first = w @ warp_matrix(*to_plain(w, w)).T
    second = other @ warp_matrix(*to_plain(other, w)).T
    assert second == pytest.approx(first, abs=1e-9)


def test_a_trim_turned_round_turns_what_is_odd_in_it():
    w = np.random.default_rng(3).standard_normal((4, FEATURES))
    turned = w @ warp_matrix(Warp(-1.0), Warp(1.0)).T
    assert turned[:, 1] == pytest.approx(-w[:, 1])
    assert turned[:, 3] == pytest.approx(w[:, 3])
    assert turned[:, 4] == pytest.approx(-w[:, 4])
    assert turned[:, 6] == pytest.approx(-w[:, 6])
    assert turned[:, 8] == pytest.approx(-w[:, 8])


def test_a_trim_without_effect_has_no_scale_of_its_own():
    silent = np.zeros((4, FEATURES))
    assert to_plain(silent, silent) == (Warp(1.0), Warp(1.0))
    assert own_bend(silent, 0) == 0.0
