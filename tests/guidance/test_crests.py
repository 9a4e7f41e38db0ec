"""Pointedness of the crests against known figures, and the labels of the trims."""

import numpy as np
import pytest

from trimmer.guidance.crests import are_swapped, crest_weights, worse_crest


def triangle(orders):
    """Crest parts of an ideal triangle: c_k = 1 / k^2 for odd k (Fourier series, any handbook)."""
    k = np.arange(2, orders + 1)
    parts = np.zeros(2 * (orders - 1))
    parts[0::2] = np.where(k % 2 == 1, 1.0 / k**2, 0.0)
    return parts


def test_a_triangles_crests_are_as_pointed_as_computed():
    # pi^2/16 - (1 - 1/sqrt 2) = 0.323958 for all orders, closed form; 0.293067 up to order 15.
    upper, lower = crest_weights(15)
    parts = triangle(15)
    assert upper @ parts[0::2] == pytest.approx(0.293067, abs=1e-6)
    assert lower @ parts[0::2] == pytest.approx(0.293067, abs=1e-6)
    upper, _ = crest_weights(20001)
    limit = np.pi**2 / 16 - (1 - 1 / np.sqrt(2))
    assert upper @ triangle(20001)[0::2] == pytest.approx(limit, abs=3e-5)  # the rest is 1 / 2K


def test_upside_down_the_crests_change_places():
    rng = np.random.default_rng(0)
    parts = rng.standard_normal(28)
    k = np.repeat(np.arange(2, 16), 2)
    mirrored = parts * np.where(k % 2 == 0, -1.0, 1.0)
    upper, lower = crest_weights(15)
    assert upper @ mirrored[0::2] == pytest.approx(lower @ parts[0::2])
    assert worse_crest(parts) == 1 - worse_crest(mirrored)


def on_crest(which):
    """A column that makes one crest more pointed and leaves the other."""
    upper, lower = crest_weights(15)
    want = upper if which == 0 else lower
    column = np.zeros(28)
    other = lower if which == 0 else upper
    column[0::2] = want - other * (want @ other) / (other @ other)
    return column


def test_labels_are_swapped_only_where_both_trims_say_so():
    assert are_swapped(np.array([on_crest(1), on_crest(0)]))
    assert not are_swapped(np.array([on_crest(0), on_crest(1)]))
    both = on_crest(0) + on_crest(1)
    assert not are_swapped(np.array([both, on_crest(0)]))


def test_a_coupled_pairs_trims_belong_to_no_crest_and_are_never_called_swapped():
    drive, balance = np.zeros(28), np.zeros(28)
    drive[2::4] = 0.03 / np.arange(1, 8)
    balance[0::4] = 0.05 / np.arange(1, 8)
    assert not are_swapped(np.array([drive, balance]))
    assert not are_swapped(np.array([balance, drive]))
