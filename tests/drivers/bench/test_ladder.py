"""The ladders' network against what can be said of it by hand."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from drivers.bench.ladder import END_OHM, Ladder, tap_voltages
from drivers.bench.parts import NOMINAL

PLAIN = Ladder(8.2e3, (680.0, 820.0, 620.0, 470.0), 51e3, 47e3)
NO_FEED = replace(PLAIN, feed_ohm=1e15)


def test_without_trims_and_sharing_each_ladder_is_a_voltage_divider() -> None:
    upper, lower = tap_voltages(NO_FEED, NO_FEED, 1e-9, (10.0, -9.0), (0.3, 0.8))
    down = np.cumsum(NO_FEED.rungs_ohm)
    share = down / (down[-1] + NO_FEED.top_ohm)
    np.testing.assert_allclose(upper, 10.0 * share, rtol=1e-9)
    np.testing.assert_allclose(lower, -9.0 * share, rtol=1e-9)


def test_a_trim_pulls_its_ladder_like_its_thevenin_source() -> None:
    at = 0.3
    upper, _ = tap_voltages(PLAIN, NO_FEED, 1e-9, (10.0, -10.0), (at, 0.5))
    near, far = END_OHM + PLAIN.pot_ohm * at, END_OHM + PLAIN.pot_ohm * (1.0 - at)
    open_v = 10.0 * (far - near) / (far + near)
    source_ohm = near * far / (near + far) + PLAIN.feed_ohm
    down = np.cumsum(PLAIN.rungs_ohm)
    node = (10.0 / PLAIN.top_ohm + open_v / source_ohm) / (
        1.0 / PLAIN.top_ohm + 1.0 / source_ohm + 1.0 / down[-1]
    )
    np.testing.assert_allclose(upper, node * down / down[-1], rtol=1e-9)


def test_the_mirrored_setting_gives_the_mirrored_taps() -> None:
    upper, lower = tap_voltages(NOMINAL.upper, NOMINAL.lower, 200.0, (10.0, -10.0), (0.2, 0.7))
    other_upper, other_lower = tap_voltages(
        NOMINAL.upper, NOMINAL.lower, 200.0, (10.0, -10.0), (0.7, 0.2)
    )
    np.testing.assert_allclose(upper, -other_lower, rtol=1e-12)
    np.testing.assert_allclose(lower, -other_upper, rtol=1e-12)


def test_a_trim_moves_all_taps_of_its_half_the_outer_ones_most_and_the_other_half_a_little() -> (
    None
):
    def taps(at: float) -> np.ndarray:
        halves = tap_voltages(
            NOMINAL.upper, NOMINAL.lower, NOMINAL.shared_ohm, (10, -10), (at, 0.5)
        )
        return np.concatenate(halves)

    moved = taps(0.51) - taps(0.50)
    own, other = moved[:4], moved[4:]
    assert np.all(own < 0.0)
    assert np.all(np.diff(np.abs(own)) > 0.0)
    assert np.all(np.abs(other) > 0.0)
    assert np.max(np.abs(other)) < 0.3 * np.max(np.abs(own))


def test_both_ends_of_a_pot_can_be_reached() -> None:
    for at in (0.0, 1.0):
        halves = tap_voltages(NOMINAL.upper, NOMINAL.lower, 200.0, (10.0, -10.0), (at, 1.0 - at))
        assert np.all(np.isfinite(np.concatenate(halves)))


def test_broken_parts_are_refused() -> None:
    with pytest.raises(ValueError, match="positive"):
        replace(PLAIN, feed_ohm=0.0)
    with pytest.raises(ValueError, match="4 rungs"):
        replace(PLAIN, rungs_ohm=(1.0, 2.0))
