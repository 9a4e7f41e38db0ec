"""The guide as a session sees it: its calls, its answers, its state."""

import json
from dataclasses import replace

import numpy as np
import pytest

from tests.fleet.catalogue import prior, unit
from tests.fleet.readings import Scope
from tests.fleet.trials import tolerance
from tests.guidance.play import Play
from trimmer.guidance import Guide
from trimmer.guidance.advice import Advice, Confirm, Done


def play(kind="ladders", number=1, *, seed=0, wired=False, **settings):
    return Play(unit(kind, number, wired=wired), Guide(**settings), seed=seed)


def test_the_first_turn_is_a_small_one_of_the_worse_crests_trim():
    for number in range(8):
        p = play(number=number, seed=number)
        advice = p.begin()
        assert isinstance(advice, Advice)
        assert advice.turn == 0
        assert 0.03 <= advice.turns / 0.75 <= 0.085
        assert advice.expected_thd is None
        assert advice.floor_thd is None
        assert advice.degrees == pytest.approx(360 * advice.turns)
        assert advice.trim in advice.reason


def test_the_second_turn_is_the_other_trims_and_then_the_floor_is_stated():
    p = play(number=2)
    first = p.begin()
    second = p.step()
    third = p.step()
    assert {first.trim, second.trim} == {"upper", "lower"}
    assert isinstance(third, Advice)
    assert third.floor_thd is not None
    assert abs(third.floor_thd - p.unit.best()[1]) < 3 * third.floor_sigma
    assert third.expected_thd is not None


def test_a_known_kind_is_right_from_the_first_turn():
    p = play(number=3, wired=True, prior=prior("ladders"))
    before = p.thd
    advice = p.begin()
    assert advice.floor_thd is not None
    p.step()
    assert p.thd < before or advice.rises_first
    assert p.thd == pytest.approx(advice.expected_thd, rel=0.35)


def test_at_the_end_thd_is_at_its_best_and_the_floor_is_right():
    for number in range(6):
        p = play(number=number, seed=number)
        done = p.finish()
        best = p.unit.best()[1]
        assert done.verdict == "at-floor"
        assert p.thd <= tolerance(best)
        assert abs(done.floor_thd - best) <= max(3 * done.floor_sigma, 0.03 * best)


def test_it_is_confirmed_by_a_longer_reading_before_it_is_done():
    p = play()
    p.finish()
    assert isinstance(p.answers[-1], Done)
    assert isinstance(p.answers[-2], Confirm)
    assert 0 < p.answers[-2].sigma_thd < 0.01 * p.thd


def test_net_turns_are_what_the_wipers_made():
    p = play(number=4)
    start = np.array(p.trims.wipers)
    done = p.finish()
    made = (np.array(p.trims.wipers) - start) * 0.75
    assert [done.net_turns["upper"], done.net_turns["lower"]] == pytest.approx(made, abs=0.04)
    assert p.guide.net_turns == done.net_turns


def test_the_same_calls_give_the_same_answers():
    first, second = play(seed=3), play(seed=3)
    first.finish()
    second.finish()
    assert [repr(a) for a in first.answers] == [repr(a) for a in second.answers]


def test_a_killed_session_is_taken_up_where_it_was():
    whole, cut = play(seed=4), play(seed=4)
    whole.finish()
    cut.begin()
    while not isinstance(cut.answer, Done):
        cut.guide = Guide.from_document(json.loads(json.dumps(cut.guide.document())))
        assert cut.guide.answer == cut.answer
        assert cut.guide.turns_made == cut.answer.turn
        cut.step()
    assert repr(cut.answer) == repr(whole.answer)


def test_the_state_of_a_known_kind_goes_through_json_too():
    p = play(number=5, wired=True, prior=prior("ladders"), limit_thd=0.001)
    p.begin()
    p.step()
    again = Guide.from_document(json.loads(json.dumps(p.guide.document())))
    assert again.answer == p.answer
    assert again.floor == pytest.approx(p.guide.floor)
    assert again.columns == pytest.approx(p.guide.columns)


def test_a_state_of_another_version_is_refused():
    with pytest.raises(ValueError, match="version 7"):
        Guide.from_document({"version": 7})


@pytest.mark.parametrize("travel", [0.0, -1.0, float("inf"), float("nan")])
def test_a_travel_that_is_none_is_refused(travel):
    with pytest.raises(ValueError, match="travel"):
        Guide(travel_turns=travel)


def test_back_takes_the_last_turn_back():
    p = play(number=6)
    p.begin()
    p.step()
    before = p.trims.at
    p.step()
    trim, made = p.asked_last
    advice = p.guide.back(p.reading())
    assert advice.going_back
    assert advice.trim == ("upper", "lower")[trim]
    p.answers.append(advice)
    assert np.sign(p.asked()[1]) == -np.sign(made)
    p.step()
    assert p.trims.at == pytest.approx(before, abs=0.012)


def test_back_before_any_turn_just_asks_again():
    p = play()
    first = p.begin()
    again = p.guide.back(p.reading())
    assert isinstance(again, Advice)
    assert again.trim == first.trim


def test_skip_asks_for_the_other_trim():
    p = play(number=7)
    first = p.begin()
    second = p.guide.skip(p.reading())
    assert second.trim != first.trim
    assert second.turn == 0
    p.answers.append(second)
    p.step()
    p.step()
    while isinstance(p.answer, Confirm):
        p.step()
    if isinstance(p.answer, Advice):
        skipped = p.guide.skip(p.reading())
        assert isinstance(skipped, Advice | Confirm)
        if isinstance(skipped, Advice):
            assert skipped.trim != p.answer.trim


def test_quit_ends_it_with_what_is_known():
    p = play(number=8)
    p.begin()
    p.step()
    p.step()
    done = p.guide.quit(p.reading())
    assert done.verdict == "stopped"
    assert done.turn == 2
    assert done.floor_thd is not None
    assert {c.cause for c in done.remainder} <= {"time-symmetry", "bandwidth", "shaper", "slewing"}


def test_quit_before_the_first_reading_is_an_end_too():
    done = Guide().quit()
    assert (done.verdict, done.turn, done.floor_thd) == ("stopped", 0, None)
    assert done.remainder == ()


def test_content_with_a_limit_it_stops_there():
    p = play(number=1, seed=6, limit_thd=0.012)
    done = p.finish()
    assert done.turn <= 4
    assert p.thd < 0.0125


def test_readings_of_fewer_orders_are_compared_over_the_common_ones():
    p = play(number=2, seed=2)
    p.begin()
    p.step()
    p.scope.orders = 9
    p.step()
    p.scope.orders = 12
    done = p.finish()
    assert p.thd <= tolerance(p.unit.best()[1]) * 1.02
    assert done.verdict == "at-floor"
    assert p.guide.basis.shape == (16, 2)


def test_few_orders_are_enough_to_find_the_best():
    p = play(number=3, seed=1)
    p.scope.orders = 5
    p.finish()
    assert p.thd < 1.15 * p.unit.best()[1]


@pytest.mark.parametrize("travel", [0.75, 25.0])
def test_turns_are_turns_of_the_screw_whatever_the_travel(travel):
    source = replace(unit("ladders", 4), travel_turns=travel)
    p = Play(source, Guide(travel_turns=travel))
    first = p.begin()
    assert 0.03 * travel <= first.turns <= 0.085 * travel
    p.finish()
    assert p.thd <= tolerance(source.best()[1])


def test_the_basis_spans_the_columns_and_is_orthonormal():
    p = play(number=5)
    p.begin()
    assert p.guide.basis is None
    assert p.guide.columns is None
    assert p.guide.floor is None
    assert p.guide.learned() is None
    p.step()
    p.step()
    basis, columns = p.guide.basis, p.guide.columns
    assert basis.T @ basis == pytest.approx(np.eye(2))
    assert basis @ (basis.T @ columns.T) == pytest.approx(columns.T)


def test_best_seen_is_the_best_of_the_readings():
    p = play(number=6, seed=2)
    assert p.guide.best_seen is None
    p.begin()
    thds = [p.thd]
    while not isinstance(p.answer, Done):
        p.step()
        if len(thds) < p.guide.turns_made + 1:
            thds.append(p.thd)
    best = p.guide.best_seen
    assert best.turn == pytest.approx(int(np.argmin(thds)), abs=1)
    assert best.thd == pytest.approx(min(thds), rel=0.05)
    assert set(best.net_turns) == {"upper", "lower"}


def test_following_needs_a_turn_to_follow():
    with pytest.raises(ValueError, match="no turn"):
        Guide(followed=True).follow(Scope(np.random.default_rng(0)).read(np.zeros(28)), 0.0)


def test_every_sentence_is_one_sentence_for_the_person():
    for number in range(4):
        p = play("coupled", number, seed=number)
        p.finish()
        for answer in p.answers:
            assert answer.reason.endswith(".") or answer.reason.endswith("?")
            assert len(answer.reason) < 120
            assert "{" not in answer.reason
