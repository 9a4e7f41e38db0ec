"""Screws and tracks."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.bench.pot import Screw, Track

shares = st.floats(0.0, 1.0)
tracks = st.builds(
    Track, bow=st.floats(-0.05, 0.05), ripple=st.floats(-0.03, 0.03), reverse=st.booleans()
)


@given(tracks, shares)
def test_a_track_can_be_gone_back(track: Track, at: float) -> None:
    assert track.mechanical(track.electrical(at)) == pytest.approx(at, abs=1e-9)


@given(tracks, shares, shares)
def test_a_track_never_runs_back(track: Track, one: float, other: float) -> None:
    rise = track.electrical(max(one, other)) - track.electrical(min(one, other))
    assert rise <= 1e-15 if track.reverse else rise >= -1e-15


@pytest.mark.parametrize("reverse", [False, True])
def test_a_track_ends_at_its_ends(reverse: bool) -> None:
    track = Track(0.03, 0.01, reverse)
    ends = (track.electrical(0.0), track.electrical(1.0))
    assert ends == pytest.approx((1.0, 0.0) if reverse else (0.0, 1.0), abs=1e-12)


def test_a_track_that_stands_still_is_refused() -> None:
    with pytest.raises(ValueError, match="uneven"):
        Track(bow=0.4)


def test_a_turn_moves_the_wiper_by_its_share_of_the_travel() -> None:
    screw = Screw(0.5, backlash=0.0, travel_turns=0.75)
    screw.turn(0.075, 0.0)
    assert screw.position(0.0) == pytest.approx(0.6)


def test_a_reversal_loses_the_backlash() -> None:
    screw = Screw(0.5, backlash=0.02, travel_turns=1.0)
    screw.turn(0.1, 0.0)
    assert screw.position(0.0) == pytest.approx(0.59)  # half the play was still open
    screw.turn(-0.015, 0.0)
    assert screw.position(0.0) == pytest.approx(0.59)
    screw.turn(-0.015, 0.0)
    assert screw.position(0.0) == pytest.approx(0.58)
    screw.turn(-0.1, 0.0)
    assert screw.position(0.0) == pytest.approx(0.48)


def test_the_end_stops_hold_and_are_felt() -> None:
    screw = Screw(0.9, backlash=0.02, travel_turns=0.75)
    assert not screw.at_stop(0.0)
    screw.turn(5.0, 0.0)
    assert screw.position(0.0) == 1.0
    assert screw.at_stop(0.0)
    screw.turn(-0.015, 0.0)
    assert not screw.at_stop(0.0)
    screw.turn(-5.0, 0.0)
    assert screw.position(0.0) == 0.0
    assert screw.at_stop(0.0)


@given(st.lists(st.floats(-0.5, 0.5), max_size=20), shares)
def test_no_sequence_of_turns_leaves_the_travel(turns: list[float], at: float) -> None:
    screw = Screw(at, backlash=0.015, travel_turns=0.75)
    for turn in turns:
        screw.turn(turn, 0.0)
        assert 0.0 <= screw.position(0.0) <= 1.0


@given(st.lists(st.floats(-0.2, 0.2), min_size=1, max_size=6), st.integers(1, 7))
def test_a_turn_made_slowly_ends_where_a_quick_one_does(turns: list[float], looks: int) -> None:
    quick = Screw(0.5, backlash=0.01, travel_turns=1.0)
    slow = Screw(0.5, backlash=0.01, travel_turns=1.0)
    now = 0.0
    for turn in turns:
        quick.turn(turn, now)
        slow.turn(turn, now, 2.0)
        for look in range(looks):
            slow.position(now + 2.0 * look / looks)
        now += 2.5
        assert slow.position(now) == pytest.approx(quick.position(now), abs=1e-12)


def test_half_way_through_a_slow_turn_half_of_it_is_made() -> None:
    screw = Screw(0.5, backlash=0.0, travel_turns=1.0)
    screw.turn(0.2, 10.0, 4.0)
    assert screw.position(12.0) == pytest.approx(0.6)
    assert screw.position(99.0) == pytest.approx(0.7)


def test_a_screw_driven_on_stops_when_told_a_moment_later() -> None:
    screw = Screw(0.2, backlash=0.0, travel_turns=1.0)
    screw.drive(0.1, 0.0)
    screw.finish(2.0, 0.5)
    assert screw.position(2.0) == pytest.approx(0.4)
    assert screw.position(9.0) == pytest.approx(0.45)
    screw.drive(-0.1, 10.0)
    screw.slow(0.5, 11.0)
    screw.drive(0.0, 13.0)
    assert screw.position(20.0) == pytest.approx(0.25)


def test_finishing_a_screw_that_stands_changes_nothing_later() -> None:
    screw = Screw(0.2, backlash=0.0, travel_turns=1.0)
    screw.finish(0.0, 0.1)
    screw.turn(0.1, 1.0, 1.0)
    assert screw.position(5.0) == pytest.approx(0.3)


@pytest.mark.parametrize("broken", [float("nan"), float("inf")])
def test_turns_that_cannot_be_made_are_refused(broken: float) -> None:
    screw = Screw(0.2, backlash=0.0, travel_turns=1.0)
    with pytest.raises(ValueError, match="cannot be made"):
        screw.turn(broken, 0.0)
    with pytest.raises(ValueError, match="cannot be made"):
        screw.drive(broken, 0.0)


def test_screws_that_make_no_sense_are_refused() -> None:
    with pytest.raises(ValueError, match="between 0 and 1"):
        Screw(1.2, backlash=0.0, travel_turns=1.0)
    with pytest.raises(ValueError, match="backlash"):
        Screw(0.2, backlash=0.7, travel_turns=1.0)
    with pytest.raises(ValueError, match="positive number"):
        Screw(0.2, backlash=0.0, travel_turns=0.0)
