"""Whole sessions on every fleet, a few of each; the campaigns run the same code at full size."""

import numpy as np
import pytest

from drivers.bench import parts as bench_parts
from drivers.bench.unit import period
from tests.fleet.catalogue import BENCH, OWN, SIMULATED, from_bench, unit
from tests.fleet.circuits import Pair, parts
from tests.fleet.other_ways import WAYS, try_way
from tests.fleet.tally import MODES, tally, trials_of
from tests.fleet.trials import tolerance
from trimmer.guidance import Guide
from trimmer.guidance.advice import Advice, Confirm, Done
from trimmer.measurement import measure

# Small numbers scatter: a median of 18 trials is let off half a turn, a 95th percentile one.


@pytest.mark.parametrize("mode", MODES, ids=lambda m: m.name)
def test_the_best_is_reached_in_few_turns_on_a_circuit_simulators_units(mode):
    trials = [t for kind in SIMULATED for t in trials_of(kind, mode, range(3))]
    counted = tally(trials)
    assert counted.never == 0
    assert counted.median <= mode.median + 0.5
    assert counted.late <= mode.late + 1
    assert counted.done <= mode.done + 1
    assert counted.missed <= 1


@pytest.mark.parametrize("kind", [*OWN, *BENCH])
def test_no_fleet_is_left_unreached(kind):
    counted = tally(trials_of(kind, MODES[0], range(4)))
    assert counted.never == 0
    assert counted.late <= 12


def test_the_floors_stated_hold_the_true_ones():
    trials = [t for kind in SIMULATED for t in trials_of(kind, MODES[0], range(100, 106))]
    counted = tally(trials)
    assert counted.held >= 0.85
    assert counted.half_width <= 0.1


def test_a_hand_that_does_not_feel_the_stop_gets_there_too():
    trials = [
        t
        for kind in ("ladders", "pair")
        for t in trials_of(kind, MODES[0], range(5), feels_stop=False)
    ]
    assert tally(trials).never == 0


def test_it_takes_a_fraction_of_the_turns_of_the_bench_habit():
    numbers = range(4)
    guide = tally([t for k in SIMULATED for t in trials_of(k, MODES[0], numbers)])
    habit = WAYS["one trim at a time, halving"]
    other = tally(
        [try_way(habit, unit(k, n), n, followed=False) for k in SIMULATED for n in numbers]
    )
    assert 2 * guide.median <= other.median


def test_the_fleets_differential_pair_has_the_distortion_of_the_closed_form():
    # Best drive and degeneration, THD .002628952535 over all orders, from v/V_T = ln((1+x)/(1-x)) + r x;
    # 15 orders leave a little out. Meyer, Sansen, Lui, Peeters, IEEE J. Solid-State Circuits, June 1976.
    best = Pair(0.5, 6.871957936, 0.0, 2.560713013, np.eye(2), 0.0)
    assert np.linalg.norm(parts(best, 0.5, 0.5)) == pytest.approx(0.0025, rel=0.01)
    without = Pair(0.5, 2.804213575, 0.0, 0.0, np.eye(2), 0.0)
    c = parts(without, 0.5, 0.5)[0::2]
    assert c[1] == pytest.approx(-0.00198624, abs=5e-5)  # a table of 281 levels
    assert c[3] == pytest.approx(0.01120228, abs=2e-5)
    assert c[5] == pytest.approx(0.00553742, abs=2e-5)


@pytest.mark.parametrize("seed", [11, 12, 13])
def test_from_true_waveforms_through_the_measurement_to_the_best(seed):
    """The whole way: the unit's wave, eight bits with noise, the fit, the guide, a hand's scatter."""
    drawn = bench_parts.draw(seed)
    source = from_bench(seed, np.random.default_rng(seed), (1, 1))
    rng = np.random.default_rng(seed)
    at = rng.uniform(0.25, 0.75, 2)
    step, hertz, count = 1e-6, 1003.7, 10_000

    def reading(frames=1):
        wave = period(drawn, (float(at[0]), float(at[1])), 1000.0)
        wave = wave - wave.mean()
        phase = (rng.random() + np.arange(count * frames) * step * hertz) % 1.0
        volts = np.interp(phase * wave.size, np.arange(wave.size + 1), np.append(wave, wave[0]))
        code = 2.4 * np.max(np.abs(wave)) / 255.0
        return measure(code * np.rint(volts / code + 0.5 * rng.standard_normal(phase.size)), step)

    guide = Guide()
    answer = guide.observe(reading())
    turns = 0
    while not isinstance(answer, Done) and turns < 20:
        if isinstance(answer, Confirm):
            answer = guide.observe(reading(8), longer=True)
            continue
        assert isinstance(answer, Advice)
        sense = 1.0 if answer.sense == "clockwise" else -1.0
        made = sense * answer.turns / 0.75 * (1.0 + 0.15 * rng.standard_normal())
        trim = 0 if answer.trim == "upper" else 1
        at[trim] = min(max(at[trim] + made, 0.0), 1.0)
        turns += 1
        answer = guide.observe(reading())
    assert isinstance(answer, Done)
    wipers = float(at[0]), float(at[1])
    assert np.linalg.norm(source.respond(*wipers)) <= tolerance(source.best()[1])
