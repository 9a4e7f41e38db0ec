"""A hand's errors, in number."""

from __future__ import annotations

import numpy as np
import pytest

from drivers.bench.hand import Hand, fineness


class Screws:
    """Takes the place of a bench and writes down what it is told."""

    def __init__(self, travel_turns: float = 0.75) -> None:
        self.travel_turns = travel_turns
        self.said: list[tuple[object, ...]] = []

    def __getattr__(self, name: str) -> object:
        return lambda *words: self.said.append((name, *words))


def hand(travel_turns: float = 0.75, seed: int = 1, **options: float) -> tuple[Hand, Screws]:
    screws = Screws(travel_turns)
    return Hand(screws, seed, **options), screws  # type: ignore[arg-type]


def made(
    asked: float, *, travel: float = 0.75, followed: bool = False, count: int = 4000
) -> np.ndarray:
    turner, _ = hand(travel)
    return np.array([turner.make("upper", asked, followed=followed)[1] for _ in range(count)])


@pytest.mark.parametrize("asked", [0.01, 0.1, -0.3])
def test_a_blind_turn_errs_by_15_percent_and_one_and_a_half_degrees(asked: float) -> None:
    turns = made(asked)
    wanted = np.hypot(0.15 * asked, 1.5 / 360.0)
    assert turns.mean() == pytest.approx(asked, abs=4 * wanted / np.sqrt(4000))
    assert turns.std() == pytest.approx(wanted, rel=0.04)


@pytest.mark.parametrize("asked", [0.01, 0.2])
def test_a_followed_turn_errs_by_3_percent_and_less_than_a_degree(asked: float) -> None:
    wanted = np.hypot(0.03 * asked, 0.7 / 360.0)
    assert made(asked, followed=True).std() == pytest.approx(wanted, rel=0.04)


def test_a_multi_turn_trim_is_set_three_and_a_half_times_finer() -> None:
    # Common practice, no source: 3 to 4 times, not the ratio of their travels.
    single = made(0.1 * 0.75).std() / 0.75
    multi = made(0.1 * 25.0, travel=25.0).std() / 25.0
    assert single / multi == pytest.approx(3.5, rel=0.06)
    assert fineness(0.75) == 1.0
    assert fineness(25.0) == pytest.approx(3.5)
    assert fineness(0.5) == 1.0
    assert 1.0 < fineness(10.0) < 3.5


def test_the_same_seed_is_the_same_hand() -> None:
    assert np.array_equal(made(0.1, count=20), made(0.1, count=20))


def test_mistakes_come_as_often_as_asked_and_never_otherwise() -> None:
    careful, _ = hand()
    assert {careful.make("lower", 0.1)[0] for _ in range(500)} == {"lower"}
    careless, _ = hand(wrong_trim=0.2, wrong_way=0.1, scatter=0.0, slack_deg=0.0)
    taken = [careless.make("lower", 0.1) for _ in range(4000)]
    assert np.mean([trim == "upper" for trim, _ in taken]) == pytest.approx(0.2, abs=0.03)
    assert np.mean([turns < 0.0 for _, turns in taken]) == pytest.approx(0.1, abs=0.02)


def test_what_it_makes_reaches_the_screw() -> None:
    turner, screws = hand()
    trim, turns = turner.make("upper", 0.1, seconds=2.0)
    assert screws.said == [("turn", trim, turns, 2.0)]


def test_a_following_hand_turns_at_its_speed_and_stops_a_reaction_late() -> None:
    late = []
    turner, screws = hand()
    for _ in range(500):
        assert turner.start("upper", -1.0) == "upper"
        assert screws.said.pop() == ("drive", "upper", pytest.approx(-15.0 / 360.0))
        turner.stop()
        word, trim, after_s = screws.said.pop()
        assert (word, trim) == ("finish", "upper")
        late.append(float(after_s))  # type: ignore[arg-type]
    assert np.mean(late) == pytest.approx(0.18, rel=0.02)
    assert np.std(late) == pytest.approx(0.018, rel=0.1)


def test_a_short_turn_is_made_slowly_and_a_long_one_no_faster_than_the_hand_can() -> None:
    turner, screws = hand()
    for turns, speed in ((0.03, 0.02), (0.5, 15.0 / 360.0), (1e-6, 0.05 * 15.0 / 360.0)):
        turner.start("upper", 1.0, turns)
        assert screws.said.pop() == ("drive", "upper", pytest.approx(speed))
        turner.stop()


def test_it_slows_down_when_told() -> None:
    turner, screws = hand()
    turner.start("lower", 1.0)
    turner.slow()
    assert screws.said[-1] == ("slow", "lower", pytest.approx(1.0 / 3.0))


def test_a_hand_that_does_not_turn_has_nothing_to_stop() -> None:
    turner, screws = hand()
    turner.stop()
    turner.slow()
    assert screws.said == []


def test_starting_anew_stops_the_turn_before() -> None:
    turner, screws = hand()
    turner.start("upper", 1.0)
    turner.start("lower", 1.0)
    assert [said[0] for said in screws.said] == ["drive", "finish", "drive"]
