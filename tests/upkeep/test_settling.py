"""The settling of a warm-up: what is foretold holds, and a unit that does not settle is noticed."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import curve_fit

from tests.campaigns.upkeep_settling import fleet
from tests.fleet.readings import Scope
from tests.upkeep.warmups import SORTS, WarmUnit
from trimmer.measurement import Reading
from trimmer.upkeep.channels import channels_of
from trimmer.upkeep.course import fit
from trimmer.upkeep.settling import GOOD_POINTS, GOOD_SHARE, SESSION_S, settle

SETTLED = np.concatenate(([0.004, 0.0005, -0.003], np.zeros(25)))
"""Parts of an invented wave, THD 0.5 %."""


def readings_of(
    course: np.ndarray, seed: int = 1, hertz: np.ndarray | None = None
) -> list[Reading]:
    """Read a wave whose parts follow a course, shape (n, 28)."""
    scope = Scope(np.random.default_rng(seed))
    taken = []
    for row, parts in enumerate(course):
        one = scope.read(parts)
        f = 1000.0 if hertz is None else float(hertz[row])
        noisy = f + 5e-3 * float(scope.rng.standard_normal())
        taken.append(replace(one, fundamental_hz=noisy, fundamental_sigma_hz=5e-3))
    return taken


def exponential(times: np.ndarray, tau_s: float, drift: np.ndarray) -> np.ndarray:
    return SETTLED + np.exp(-times[:, None] / tau_s) * drift


DRIFT = np.concatenate(([0.001, 0.0, 0.002], np.zeros(25)))


def test_what_the_first_third_foretells_holds_for_simulated_units() -> None:
    found = fleet(3)
    assert len(found) == 9
    assert sum(each.held for each in found) >= 8
    assert np.median([each.width_in_bars for each in found]) <= 1.0
    assert {each.sort for each in found} == set(SORTS)
    assert not [each for each in found if each.said.verdict == "unsettled"]


def test_one_time_constant_is_found_as_an_ordinary_fit_finds_it() -> None:
    times = np.arange(0.0, 300.0, 2.0)
    hertz = 1000.0 * (1.0 + 0.003 * np.exp(-times / 120.0))
    readings = readings_of(exponential(times, 120.0, DRIFT), hertz=hertz)
    said = settle(list(times), readings)
    seen = np.array([reading.fundamental_hz for reading in readings])
    (_, _, tau), _ = curve_fit(
        lambda t, a, b, tau: a + b * np.exp(-t / tau), times, seen, p0=(1000.0, 3.0, 100.0)
    )
    assert said.time_constant_s == pytest.approx(float(tau), rel=0.05)
    assert said.time_constant_s == pytest.approx(120.0, rel=0.05)
    assert said.fast_constant_s is None
    assert said.settled_fundamental_hz == pytest.approx(1000.0, abs=0.1)


def test_two_time_constants_are_told_from_one() -> None:
    times = np.arange(0.0, 900.0, 4.0)
    both = 0.5 * np.exp(-times / 30.0) + 0.5 * np.exp(-times / 300.0)
    hertz = 1000.0 * (1.0 + 0.003 * both)
    said = settle(list(times), readings_of(SETTLED + both[:, None] * DRIFT, hertz=hertz))
    assert said.fast_constant_s == pytest.approx(30.0, rel=0.2)
    assert said.time_constant_s == pytest.approx(300.0, rel=0.2)


def test_weights_of_the_time_constants_add_up_and_the_fit_follows_the_readings() -> None:
    times = np.arange(0.0, 200.0, 2.0)
    readings = readings_of(exponential(times, 60.0, DRIFT))
    channels = channels_of(list(times), readings)
    mixture = fit(channels)
    assert mixture.weights.sum() == pytest.approx(1.0)
    assert np.allclose(mixture.sizes.sum(axis=1), 1.0)
    left = channels.values - mixture.course(channels.times_s)
    assert np.all(np.sqrt((left**2 / channels.variance).mean(axis=0)) < 1.3)


def test_the_time_left_is_the_time_until_the_parts_hardly_move_within_a_session() -> None:
    times = np.arange(0.0, 180.0, 1.5)
    hertz = 1000.0 * (1.0 + 0.003 * np.exp(-times / 120.0))
    said = settle(list(times), readings_of(exponential(times, 120.0, DRIFT), hertz=hertz))
    good = max(GOOD_POINTS, GOOD_SHARE * np.linalg.norm(SETTLED))
    within = 1.0 - np.exp(-SESSION_S / 120.0)
    due = 120.0 * np.log(within * np.linalg.norm(DRIFT) / good) - times[-1]
    assert said.minutes_left is not None
    assert 60.0 * said.minutes_left == pytest.approx(due, rel=0.25)
    assert said.verdict == "settling"


def test_a_warm_unit_is_called_settled_and_soon() -> None:
    times = np.arange(0.0, 400.0, 2.0)
    readings = readings_of(np.tile(SETTLED, (times.size, 1)))
    assert settle(times[:8], readings[:8]).verdict == "settling"  # 16 s exclude no slow drift
    assert settle(times, readings).verdict == "settled"


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_a_unit_that_wanders_is_called_unsettled(seed: int) -> None:
    rng = np.random.default_rng(seed)
    times = np.arange(0.0, 600.0, 4.0)
    wander = 8e-4 * np.cumsum(rng.standard_normal(times.size)) / np.sqrt(20.0)
    course = SETTLED + wander[:, None] * np.eye(28)[2]
    assert settle(list(times), readings_of(course, seed)).verdict == "unsettled"


def test_a_drift_without_end_is_called_unsettled() -> None:
    times = np.arange(0.0, 2400.0, 15.0)
    course = SETTLED + 2e-6 * times[:, None] * np.eye(28)[2]
    said = settle(list(times), readings_of(course))
    assert said.verdict == "unsettled"
    assert "no end" in said.reason


def test_few_readings_say_nothing_of_a_time_constant() -> None:
    said = settle([0.0, 1.0], readings_of(np.tile(SETTLED, (2, 1))))
    assert said.settled_thd is None
    assert said.minutes_left is None
    assert said.verdict == "settling"


def test_the_same_readings_give_the_same_answer() -> None:
    unit = WarmUnit.drawn(4, "one")
    times, readings = unit.readings(0.3 * unit.slow_s)
    one, two = settle(times, readings), settle(times, readings)
    assert one.settled_thd == two.settled_thd


def test_readings_of_fewer_orders_are_compared_over_the_common_ones() -> None:
    times = np.arange(0.0, 60.0, 2.0)
    scope = Scope(np.random.default_rng(3), orders=9)
    mixed = readings_of(np.tile(SETTLED, (times.size, 1)))
    mixed[5] = scope.read(SETTLED)
    said = settle(list(times), mixed)
    assert said.drift_left is not None
    assert said.drift_left.size == 16


def test_times_must_ascend_and_be_as_many_as_the_readings() -> None:
    readings = readings_of(np.tile(SETTLED, (3, 1)))
    with pytest.raises(ValueError, match="as many"):
        settle([0.0, 1.0], readings)
    with pytest.raises(ValueError, match="as many"):
        settle([], [])
    with pytest.raises(ValueError, match="ascend"):
        settle([0.0, 2.0, 1.0], readings)
