"""What is not the trims' to mend: slewing, time symmetry; trimming cold; one setting for all frequencies."""

import json
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize

from drivers.bench import parts as bench_parts
from tests.fleet.catalogue import from_bench, unit
from tests.fleet.readings import Scope, reading_of
from tests.fleet.trials import run, tolerance
from tests.guidance.play import Play
from trimmer.guidance import Guide, WarmDrift, Warming, joint_setting
from trimmer.guidance.advice import Advice
from trimmer.measurement.templates import slewing

# ---- slewing ---------------------------------------------------------------------------------

FAST_HZ = 18_000.0


class FastScope(Scope):
    """Reads a unit at the top of its range."""

    def read(self, true, **how):
        """Give a reading at `FAST_HZ`."""
        return replace(super().read(true, **how), fundamental_hz=FAST_HZ)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_a_slewing_units_trims_are_not_driven_away_from_their_place(seed):
    rng = np.random.default_rng(seed)
    slow = from_bench(seed, rng, (1, 1))
    fast = from_bench(seed, np.random.default_rng(seed), (1, 1), FAST_HZ)
    right, _ = slow.best()
    blind, _ = fast.best()
    p = Play(fast, Guide(), at=(0.5, 0.5))
    p.scope = FastScope(np.random.default_rng(seed))
    done = p.finish()
    first = p.answers[0]
    assert isinstance(first, Advice)
    assert "slewing" in first.notice
    ended = np.array([q.electrical(x) for q, x in zip(fast.pots, p.trims.at, strict=True)])
    off = np.max(np.abs(ended - right))
    assert off < 0.5 * np.max(np.abs(np.array(blind) - right))
    assert "slewing" in {c.cause for c in done.remainder}


def test_a_unit_that_does_not_slew_is_not_said_to():
    for number in range(5):
        p = Play(unit("ladders", number), Guide())
        assert "slewing" not in p.begin().notice


def test_slewing_that_does_not_stay_is_not_believed_in_any_more():
    source = unit("ladders", 2)
    p = Play(source, Guide(), at=(0.4, 0.6))
    first = reading_of(source.parts(p.trims.at) + slewing(0.85, 15), 9e-5, np.zeros((28, 28)))
    p.answers.append(p.guide.observe(first))
    assert "slewing" in p.answer.notice
    document = p.guide.document()
    assert document["log"][0]["foreign"] is not None
    p.step()
    assert p.guide.document()["log"][1]["foreign"] is None
    done = p.finish()
    assert "slewing" not in {c.cause for c in done.remainder}


# ---- time symmetry ---------------------------------------------------------------------------


@pytest.mark.parametrize("number", range(4))
def test_a_leaning_triangle_stops_at_its_floor_with_its_share_named(number):
    source = unit("uneven", number)
    p = Play(source, Guide(), seed=number)
    first = p.begin()
    assert "time symmetry first" in first.notice
    done = p.finish()
    assert p.thd <= tolerance(source.best()[1])
    symmetry = next(c for c in done.remainder if c.cause == "time-symmetry")
    even_skew = p.unit.parts(p.trims.at)[1::4]
    assert symmetry.thd == pytest.approx(np.linalg.norm(even_skew), rel=0.1)
    assert "symmetry" in symmetry.remedy


# ---- trim cold, land hot ---------------------------------------------------------------------


def warm_ups(drift, count=5, seed=0):
    rng = np.random.default_rng(seed)
    minutes = np.arange(0.0, 31.0)
    gone = 1.0 - np.exp(-minutes / 6.0)
    return [
        Warming(minutes, gone[:, None] * (drift * (1 + 0.1 * rng.standard_normal()))[None])
        for _ in range(count)
    ]


def test_the_drift_to_come_is_the_median_of_earlier_warm_ups():
    drift = np.zeros(28)
    drift[2] = 1.7e-3
    some = warm_ups(drift)
    odd = Warming(some[0].minutes, -5.0 * some[0].parts)
    cold = WarmDrift.from_warm_ups([*some, odd], 0.0)
    half = WarmDrift.from_warm_ups(some, 6.0 * np.log(2.0))
    assert cold.change[2] == pytest.approx(1.7e-3, rel=0.12)
    assert half.change[2] == pytest.approx(0.85e-3, rel=0.15)
    assert half.sigma[2] > 0
    assert WarmDrift.from_warm_ups([], 0.0) is None
    late = Warming(np.array([10.0, 20.0]), np.zeros((2, 28)))
    assert WarmDrift.from_warm_ups([late], 5.0) is None


def test_a_drift_goes_through_json():
    drift = WarmDrift(np.full(28, 1e-3), np.full(28, 1e-4), 3)
    back = WarmDrift.from_document(json.loads(json.dumps(drift.to_document())))
    assert back.change == pytest.approx(drift.change)
    with pytest.raises(ValueError, match="version"):
        WarmDrift.from_document({"version": 0})


@pytest.mark.parametrize("number", range(3))
def test_trimmed_cold_a_unit_lands_at_its_best_when_warm(number):
    warm_unit = unit("ladders", number)
    change = np.zeros(28)
    change[2], change[0], change[6] = 2.5e-3, 0.8e-3, 0.4e-3

    def cold(u, v):
        return warm_unit.respond(u, v) - change

    cold_unit = replace(warm_unit, respond=cold, known_best=None, _known={})
    told = Play(cold_unit, Guide(warm=WarmDrift(change, 0.1 * np.abs(change), 4)), seed=number)
    done = told.finish()
    untold = Play(cold_unit, Guide(), seed=number)
    untold.finish()
    best = warm_unit.best()[1]
    assert warm_unit.thd(told.trims.at) <= 1.06 * best
    assert warm_unit.thd(told.trims.at) < warm_unit.thd(untold.trims.at)
    assert done.expected_thd_warm == pytest.approx(warm_unit.thd(told.trims.at), rel=0.05)
    again = Guide.from_document(json.loads(json.dumps(told.guide.document())))
    assert again.answer.expected_thd_warm == pytest.approx(done.expected_thd_warm)


# ---- one setting for the whole range ---------------------------------------------------------


@pytest.fixture(scope="module")
def trimmed():
    source = unit("ladders", 5)
    return source, run(source, 3).learned


def over_the_range(source, at=(0.45, 0.6), noise=2e-5):
    """Readings at four frequencies, with what bandwidth and stray paths add at the upper ones."""
    rng = np.random.default_rng(0)
    readings = []
    for hz, more in ((100.0, 0.0), (1000.0, 0.001), (5000.0, 0.004), (10_000.0, 0.006)):
        parts = source.parts(at).copy()
        parts[0] -= 0.7 * more
        parts[2] += more
        reading = reading_of(parts + noise * rng.standard_normal(28), noise, np.zeros((28, 28)))
        readings.append(replace(reading, fundamental_hz=hz))
    return readings


@pytest.mark.parametrize("mode", ["worst", "mean"])
def test_the_joint_setting_is_the_best_there_is(trimmed, mode):
    source, learned = trimmed
    readings = over_the_range(source)
    found = joint_setting(readings, learned, mode)

    def true_thds(x):
        moved = source.parts((0.45 + x[0], 0.6 + x[1])) - source.parts((0.45, 0.6))
        return np.array([np.linalg.norm(r.parts + moved) for r in readings])

    def value(x):
        return true_thds(x).max() if mode == "worst" else true_thds(x).mean()

    best = minimize(
        value, np.zeros(2), method="Nelder-Mead", options={"xatol": 1e-6, "fatol": 1e-9}
    )
    there = np.array([found.turns["upper"], found.turns["lower"]]) / 0.75
    assert value(there) <= 1.06 * best.fun
    assert value(there) < value(np.zeros(2))
    stated = found.worst_thd if mode == "worst" else found.mean_thd
    assert stated == pytest.approx(value(there), rel=0.08)


def test_worst_and_mean_are_each_better_at_their_own(trimmed):
    source, learned = trimmed
    readings = over_the_range(source)
    worst, mean = (joint_setting(readings, learned, mode) for mode in ("worst", "mean"))
    assert worst.worst_thd <= mean.worst_thd + 1e-6
    assert mean.mean_thd <= worst.mean_thd + 1e-6


def test_what_a_joint_setting_costs_each_frequency_is_said(trimmed):
    source, learned = trimmed
    found = joint_setting(over_the_range(source), learned, "mean")
    assert [f.fundamental_hz for f in found.frequencies] == [100.0, 1000.0, 5000.0, 10_000.0]
    for at in found.frequencies:
        assert at.cost >= -1e-5
        assert at.thd_alone <= at.thd_now + 1e-6


def test_one_frequency_alone_is_its_own_best(trimmed):
    source, learned = trimmed
    found = joint_setting(over_the_range(source)[:1], learned, "worst")
    assert found.frequencies[0].cost == pytest.approx(0.0, abs=2e-5)


def test_trims_are_not_set_to_hide_slewing_at_the_top(trimmed):
    source, learned = trimmed
    calm = over_the_range(source)
    top = source.parts((0.45, 0.6)) + slewing(0.85, 15)
    slewed = replace(
        reading_of(top, 2e-5, np.zeros((28, 28))), fundamental_hz=FAST_HZ, amplitude=2.5
    )
    without = joint_setting(calm, learned, "mean")
    with_it = joint_setting([*calm, slewed], learned, "mean")
    moved = [abs(with_it.turns[t] - without.turns[t]) for t in ("upper", "lower")]
    assert max(moved) < 0.04
    assert with_it.frequencies[-1].thd_then > 0.02


def test_no_reading_is_no_range(trimmed):
    with pytest.raises(ValueError, match="at least one"):
        joint_setting([], trimmed[1])


def test_the_bench_units_drawn_here_are_the_benchs():
    assert bench_parts.draw(1) == bench_parts.draw(1)
