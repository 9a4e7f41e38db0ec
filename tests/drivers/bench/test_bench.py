"""The bench as a whole: the same seed again, screws in time, warming, the true best."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize

from drivers.bench import DIALECTS, Bench, parse_turn
from drivers.bench.hand import Hand
from drivers.bench.parts import WARM_C, draw
from drivers.bench.unit import period, thd
from tests.drivers.bench.talker import Talker


class Clock:
    """Time that passes when told."""

    def __init__(self) -> None:
        self.now = 1000.0

    def __call__(self) -> float:
        return self.now


def frames(seed: int, count: int = 3) -> list[bytes]:
    with Bench(seed) as bench, Talker(bench) as talker:
        talker.say(":WAVeform:POINts:MODE RAW")
        taken = []
        for _ in range(count):
            talker.say(":DIGitize")
            taken.append(talker.block(":WAVeform:DATA?")[0])
        Hand(bench, seed).make("upper", 0.05)
        talker.say(":DIGitize")
        return [*taken, talker.block(":WAVeform:DATA?")[0]]


def test_the_same_seed_gives_the_same_unit_hand_and_noise() -> None:
    one, same, other = frames(6), frames(6), frames(7)
    assert one == same
    assert one != other
    assert len(set(one)) == len(one)


def test_a_bench_without_a_seed_says_which_it_took() -> None:
    with Bench() as bench, Bench(bench.seed) as again:
        assert again.position("upper") == bench.position("upper")
        assert again.thd() == bench.thd()


def test_the_trims_start_in_the_middle_of_their_travel_and_off_the_best() -> None:
    starts, ratios = [], []
    for seed in range(12):
        with Bench(seed) as bench:
            starts += [bench.position("upper"), bench.position("lower")]
            ratios.append(bench.thd() / bench.best()[0])
    assert min(starts) >= 0.2
    assert max(starts) <= 0.8
    assert np.ptp(starts) > 0.35
    assert np.median(ratios) > 2.0


@pytest.mark.parametrize(("seed", "hertz"), [(1, 1e3), (2, 1e3), (3, 120.0), (4, 9e3)])
def test_the_best_is_the_one_another_optimiser_finds(seed: int, hertz: float) -> None:
    parts = draw(seed)
    with Bench(seed, frequency_hz=hertz) as bench:
        least, upper, lower = bench.best()
        dial = bench.plant._dial_hz
    found = minimize(
        lambda w: thd(period(parts, (w[0], w[1]), dial)), (0.4, 0.6), method="Nelder-Mead",
        bounds=[(0.0, 1.0)] * 2, options={"xatol": 1e-6, "fatol": 1e-10},
    )  # fmt: skip
    assert least == pytest.approx(found.fun, abs=2e-8)
    wipers = (parts.upper_track.electrical(upper), parts.lower_track.electrical(lower))
    assert wipers == pytest.approx(tuple(found.x), abs=1e-3)


def test_a_best_past_the_end_stop_is_the_best_at_the_stop() -> None:
    weak = replace(draw(1), triangle_v=1.18 * 3.9)
    with Bench(1, parts=weak) as bench:
        least, upper, lower = bench.best()
        ends = {0.0, 1.0}
        assert {round(upper, 9), round(lower, 9)} & ends
    grid = np.linspace(0.0, 1.0, 11)
    dial = bench.plant._dial_hz
    assert least <= min(thd(period(weak, (u, w), dial)) for u in grid for w in grid) + 1e-9


def test_turning_to_the_best_gives_the_best() -> None:
    with Bench(8) as bench:
        least, upper, lower = bench.best()
        for trim, goal in (("upper", upper), ("lower", lower)):
            for _ in range(4):  # the backlash takes its part of each reversal
                bench.turn(trim, (goal - bench.position(trim)) * bench.travel_turns)
        assert bench.thd() == pytest.approx(least, rel=0.02)


def test_clockwise_is_not_the_same_sense_on_every_unit() -> None:
    senses = {(draw(s).upper_track.reverse, draw(s).lower_track.reverse) for s in range(20)}
    assert len(senses) == 4


def test_a_slow_turn_is_seen_while_it_is_made() -> None:
    clock = Clock()
    with Bench(9, clock=clock, start=(0.5, 0.5)) as bench:
        bench.turn("upper", 0.15, seconds=2.0)
        places = []
        for _ in range(5):
            places.append(bench.position("upper"))
            clock.now += 0.5
        steps = np.diff(places)
        assert np.all(steps > 0.0)
        assert steps[1:] == pytest.approx(steps[-1], rel=1e-6)  # the first lost some play
        assert bench.position("upper") == places[-1]


def test_a_driven_screw_runs_into_its_stop() -> None:
    clock = Clock()
    with Bench(9, clock=clock) as bench:
        assert not bench.at_stop("lower")
        bench.drive("lower", 0.1)
        bench.slow("lower", 0.5)
        clock.now += 30.0
        assert bench.at_stop("lower")
        assert bench.position("lower") == 1.0
        bench.finish("lower")


def test_a_long_travel_takes_more_turns() -> None:
    with (
        Bench(9, start=(0.5, 0.5)) as single,
        Bench(9, travel_turns=25.0, start=(0.5, 0.5)) as multi,
    ):
        single.turn("upper", 0.1)
        multi.turn("upper", 0.1 * 25.0 / 0.75)
        assert multi.position("upper") == pytest.approx(single.position("upper"))


def test_a_cold_unit_warms_up_and_its_readings_drift() -> None:
    clock = Clock()
    with Bench(10, cold=True, clock=clock, time_scale=60.0) as bench:
        cold_thd, cold_hz, cold_c = bench.thd(), bench.frequency_hz, bench.plant.temperature_c()
        clock.now += 6.0  # six minutes: about one time constant
        half_c = bench.plant.temperature_c()
        clock.now += 600.0
        assert WARM_C - cold_c == pytest.approx(bench.plant.parts.warming.rise_k)
        assert 0.5 < (half_c - cold_c) / (WARM_C - cold_c) < 0.75
        assert bench.plant.temperature_c() == pytest.approx(WARM_C, abs=1e-6)
        assert abs(bench.thd() - cold_thd) > 1e-4
        assert 1e-4 < abs(bench.frequency_hz / cold_hz - 1.0) < 1e-2
    with Bench(10) as warm:
        assert warm.plant.temperature_c() == WARM_C


def test_the_cold_best_and_the_warm_best_lie_apart_together() -> None:
    with Bench(10, cold=True, clock=Clock()) as bench:
        _, upper, lower = bench.best()
        _, warm_upper, warm_lower = bench.best(warm=True)
        parts = bench.plant.parts
        moved = [
            track.electrical(warm) - track.electrical(cold)
            for track, warm, cold in (
                (parts.upper_track, warm_upper, upper),
                (parts.lower_track, warm_lower, lower),
            )
        ]
        assert moved[0] * moved[1] > 0.0
        assert 0.01 < abs(moved[0]) < 0.08


def test_the_dial_moves_the_wave_and_the_time_axis_with_it() -> None:
    with Bench(11) as bench:
        for hertz in (47.0, 1e3, 18e3):
            bench.set_frequency(hertz)
            assert bench.frequency_hz == pytest.approx(hertz, rel=0.03)
            settings = bench.instrument.settings
            cycles = bench.frequency_hz * settings.interval_s * settings.points
            assert 5.0 < cycles < 17.0
        with pytest.raises(ValueError, match="dial goes from"):
            bench.set_frequency(1e6)


def test_the_default_range_is_used_well_and_the_noise_is_half_a_code_or_more() -> None:
    with Bench(12) as bench, Talker(bench) as talker:
        talker.say(":WAVeform:POINts:MODE RAW", ":DIGitize")
        codes = np.frombuffer(talker.block(":WAVeform:DATA?")[0], np.uint8).astype(float)
        assert 0.75 < np.ptp(codes) / 256 < 0.85
        t = np.arange(codes.size) * 1e-6 * bench.frequency_hz * 2.0 * np.pi
        waves = [f(k * t) for k in range(1, 41) for f in (np.cos, np.sin)]
        basis = np.array([np.ones_like(t), *waves]).T
        left = codes - basis @ np.linalg.lstsq(basis, codes, rcond=None)[0]
        assert np.std(left) >= np.hypot(0.5, 1 / np.sqrt(12))
        assert np.std(left) < 0.75


def test_what_is_read_off_the_socket_is_the_units_own_distortion() -> None:
    # 400 averaged frames of words, a plain least-squares fit: within the converter's own bend.
    with Bench(13, nonlinearity_codes=0.0) as bench, Talker(bench) as talker:
        talker.say(
            ":ACQuire:TYPE AVERage;COUNt 256",
            ":WAVeform:FORMat WORD",
            ":WAVeform:POINts:MODE RAW",
            ":DIGitize",
        )
        words = np.frombuffer(talker.block(":WAVeform:DATA?")[0], ">u2").astype(float)
        t = np.arange(words.size) * 1e-6 * bench.frequency_hz * 2.0 * np.pi
        basis = np.array(
            [np.ones_like(t)] + [f(k * t) for k in range(1, 31) for f in (np.cos, np.sin)]
        ).T
        fit = np.linalg.lstsq(basis, words, rcond=None)[0]
        size = np.hypot(fit[1::2], fit[2::2])
        assert np.linalg.norm(size[1:15]) / size[0] == pytest.approx(bench.thd(), abs=5e-5)


@pytest.mark.parametrize(
    ("line", "turn"),
    [
        ("upper 0.06", ("upper", 0.06)),
        ("lower -0.02\n", ("lower", -0.02)),
        ("  Upper   +1e-2 ", ("upper", 0.01)),
    ],
)
def test_turns_are_read_from_lines(line: str, turn: tuple[str, float]) -> None:
    assert parse_turn(line) == turn


@pytest.mark.parametrize(
    ("line", "says"),
    [
        ("", "a trim and its screw turns"), ("upper", "a trim and its screw turns"),
        ("upper 1 2", "a trim and its screw turns"), ("middle 0.1", "`upper` or `lower`"),
        ("upper much", "not a number"), ("upper nan", "cannot be made"), ("lower inf", "cannot be made"),
        ("upper -1e9", "cannot be made"),
    ],
)  # fmt: skip
def test_lines_that_are_no_turns_are_refused_with_a_reason(line: str, says: str) -> None:
    with pytest.raises(ValueError, match=says):
        parse_turn(line)


def test_names_and_numbers_that_make_no_sense_are_refused() -> None:
    with pytest.raises(ValueError, match="ten-field-code"):
        Bench(1, dialect="morse")
    with pytest.raises(ValueError, match="0 or more"):
        Bench(-1)
    with pytest.raises(ValueError, match="positive number of turns"):
        Bench(1, travel_turns=-1.0)
    with Bench(1) as bench, pytest.raises(ValueError, match="`upper` or `lower`"):
        bench.turn("middle", 0.1)


def test_there_are_nine_dialects() -> None:
    assert len(DIALECTS) == 9
