"""Rechecks: what changed is called, what did not is left, and the turns set it right."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from drivers.bench.parts import draw
from drivers.bench.unit import best
from tests.campaigns.upkeep_recheck import (
    HERTZ,
    LOGGED,
    by_age,
    by_hand,
    parts_of,
    read,
    retrimmed,
    taught,
    trials,
)
from tests.fleet.readings import Scope
from trimmer.guidance.warming import Warming
from trimmer.upkeep.changes import changes, is_called, is_doubtful
from trimmer.upkeep.recheck import rechecked
from trimmer.upkeep.retrim import retrim

TRUE = np.concatenate(([0.003, 0.0005, -0.002, 0.0, 0.001], np.zeros(23)))
"""Parts of an invented wave."""


@pytest.fixture
def scope() -> Scope:
    return Scope(np.random.default_rng(81))


def test_no_change_is_hardly_ever_called_one() -> None:
    assert trials(120, 0.0).called <= 8  # 3 % of 120 is 3.6; more than 8 has a chance of 0.01


def test_a_change_of_four_standard_uncertainties_is_called() -> None:
    assert trials(80, 4.0).called >= 72  # 95 % of 80 is 76; fewer than 72 has a chance of 0.02


def test_the_change_of_each_quantity_has_an_honest_uncertainty() -> None:
    seen = []
    for seed in range(300):
        scope = Scope(np.random.default_rng(seed))
        found = changes(read(scope, TRUE, 2), read(scope, TRUE, 3), same_input=True)
        seen.append([each.deviation for each in found if each.counts])
    spread = np.std(np.array(seen)[:, :4], axis=0)
    # of 300 values, a standard deviation is known to 4 %
    assert np.all(np.abs(spread - 1.0) < 0.17), spread


def test_what_the_input_adds_cancels_only_through_the_same_input(scope: Scope) -> None:
    then, now = read(scope, TRUE, 4), read(scope, TRUE, 4)
    same = changes(now, then, same_input=True)[0].sigma
    other = changes(now, then, same_input=False)[0].sigma
    louder = replace(now, amplitude=1.2 * now.amplitude)  # other codes of the digitiser are met
    assert other > 2.0 * same
    assert changes(louder, then, same_input=True)[0].sigma == pytest.approx(other, rel=1e-6)


def test_knobs_are_told_and_do_not_count(scope: Scope) -> None:
    then = read(scope, TRUE, 12)
    now = replace(then, amplitude=1.01 * then.amplitude, offset=then.offset + 0.3)
    found = changes(now, then, same_input=True)
    assert {each.name for each in found if not each.counts} == {"level", "offset"}
    assert not is_called(found)
    assert rechecked(now, then, same_input=True).verdict == "holds"


def test_a_change_of_shape_alone_is_called(scope: Scope) -> None:
    other = TRUE.copy()
    other[[4, 5]] = TRUE[[5, 4]]  # the same THD, another wave
    found = changes(read(scope, other, 8), read(scope, TRUE, 12), same_input=True)
    assert abs(found[0].deviation) < 3.0
    assert is_called(found)


def test_doubt_ends_where_reading_longer_adds_nothing(scope: Scope) -> None:
    then = read(scope, TRUE, 12)
    assert not is_doubtful(changes(then, then, same_input=True))
    assert not is_doubtful(changes(read(scope, 2.0 * TRUE, 4), then, same_input=True))


@pytest.mark.parametrize("disturb", [by_hand, by_age])
def test_the_turns_that_are_advised_lead_back_to_the_best(disturb: object) -> None:
    found = [retrimmed(seed, disturb) for seed in range(14)]  # type: ignore[arg-type]
    advised = [each for each in found if each.verdict == "retrim"]
    assert len(advised) >= 5
    assert all(each.reached and 1 <= each.turns <= 2 for each in advised)


def test_a_unit_at_its_best_is_not_to_be_turned(scope: Scope) -> None:
    parts = draw(5)
    at = np.array(best(parts, HERTZ).wipers)
    learned = taught(parts, at, np.random.default_rng(1))
    plan = retrim(read(scope, parts_of(parts, at), 8), learned)
    assert plan.expected_thd == pytest.approx(best(parts, HERTZ).thd, rel=0.05)
    assert all(turn.degrees < 6.0 for turn in plan.advice)


def test_a_turn_the_other_way_is_made_longer_by_the_play_of_the_screw(scope: Scope) -> None:
    parts = draw(5)
    at = np.array(best(parts, HERTZ).wipers)
    learned = taught(parts, at, np.random.default_rng(1))
    now = read(scope, parts_of(parts, at + np.array((0.06, 0.0))), 8)
    plain = retrim(now, learned).advice[0]
    assert plain.trim == "upper"
    assert plain.sense == "counter-clockwise"
    onward = retrim(now, learned, {"upper": "counter-clockwise"}).advice[0]
    reversed_ = retrim(now, learned, {"upper": "clockwise"}).advice[0]
    assert onward.turns == plain.turns
    assert 0.5 < reversed_.degrees - plain.degrees < 4.0


def test_a_unit_that_taught_nothing_is_sent_to_trimming(scope: Scope) -> None:
    other = TRUE + np.eye(28)[2] * -0.004
    found = rechecked(read(scope, other, 8), read(scope, TRUE, LOGGED), same_input=True)
    assert found.verdict == "retrim"
    assert found.advice == ()


def test_a_change_that_trims_do_not_reach_is_drift(scope: Scope) -> None:
    parts = draw(5)
    at = np.array(best(parts, HERTZ).wipers)
    learned = taught(parts, at, np.random.default_rng(1))
    true = parts_of(parts, at)
    skewed = true + np.eye(28)[1] * 0.006
    for known in (None, learned):
        now, then = read(scope, skewed, 8), read(scope, true, LOGGED)
        found = rechecked(now, then, same_input=True, learned=known)
        assert found.verdict == "drifted"


def test_a_cold_unit_is_known_by_the_drift_of_its_kind(scope: Scope) -> None:
    minutes = np.linspace(0.0, 30.0, 16)
    drift = np.eye(28)[2] * 0.0018
    kind = [
        Warming(minutes, TRUE + np.exp(-minutes / 6.0)[:, None] * drift * size)
        for size in (0.9, 1.0, 1.15)
    ]
    cold = read(scope, TRUE + drift * np.exp(-3.0 / 6.0), 8)
    then = read(scope, TRUE, LOGGED)
    found = rechecked(cold, then, same_input=True, warm_ups=kind)
    assert found.verdict == "drifted"
    assert found.warming_minutes == pytest.approx(3.0, abs=1.5)
    long_on = rechecked(cold, then, same_input=True, warm_ups=kind, minutes=29.0)
    assert long_on.warming_minutes is None  # it has been on for long: that is no warming


def test_readings_of_other_orders_are_compared_over_the_common_ones(scope: Scope) -> None:
    few = Scope(np.random.default_rng(82), orders=9)
    found = rechecked(read(few, TRUE, 4), read(scope, TRUE, 8), same_input=False)
    assert found.verdict == "holds"
