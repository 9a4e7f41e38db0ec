"""What turns made say of turns to come: the scale of a trim and the play of its screw."""

import numpy as np
import pytest

from trimmer.guidance.habit import expected_moves, habit
from trimmer.guidance.hand import hand_for
from trimmer.guidance.moves import Move, last_sense

BLIND = hand_for(0.75, followed=False)
FOLLOWED = hand_for(0.75, followed=True)


def test_a_hand_errs_as_said_on_a_single_turn_trim():
    assert BLIND.jitter * 270 == pytest.approx(1.5)
    assert FOLLOWED.jitter * 270 == pytest.approx(0.7)
    assert BLIND.sigma(0.2) == pytest.approx(np.hypot(0.2 * np.hypot(0.15, 0.05), 1.5 / 270))


def test_a_multi_turn_trim_is_set_three_and_a_half_times_finer():
    fine = hand_for(25.0, followed=False)
    assert BLIND.jitter / fine.jitter == pytest.approx(3.5, abs=0.01)
    assert BLIND.backlash / fine.backlash == pytest.approx(3.5, abs=0.01)


def test_a_reversal_is_expected_to_lose_the_play_and_a_first_turn_half_of_it():
    moves = [Move(0, 0.1), Move(0, 0.1), Move(0, -0.1), Move(1, 0.1)]
    steps = expected_moves(moves, BLIND, 0.0).steps
    play = BLIND.backlash
    assert steps == pytest.approx([0.1 - play / 2, 0.1, -0.1 + play, 0.1 - play / 2])


def test_a_dead_turn_moves_nothing_and_leaves_the_sense_as_it_was():
    moves = [Move(0, 0.1), Move(0, -0.1, dead=True), Move(0, 0.05)]
    expected = expected_moves(moves, BLIND, 0.0)
    assert expected.steps[1] == 0.0
    assert expected.steps[2] == pytest.approx(0.05)
    assert last_sense(moves, 0) == 1


def test_a_turn_into_the_stop_may_be_made_in_any_part():
    expected = expected_moves([Move(0, 0.1), Move(0, 0.1, stopped=True)], BLIND, 0.0)
    assert expected.steps[1] == pytest.approx(0.05)
    assert np.sqrt(expected.covariance[1, 1]) > 0.04


def test_a_trims_scale_is_learned_from_its_turns_and_asked_for_accordingly():
    moves = [Move(0, 0.1), Move(0, 0.1), Move(0, 0.1)]
    made = np.full(3, 0.08)
    learned = habit(moves, BLIND, 0.12, made)
    assert 0.8 < learned.scale[0] < 0.92
    assert learned.scale[1] == 1.0
    assert learned.to_ask(moves, 0, 0.05) == pytest.approx(0.05 / learned.scale[0])


def test_play_is_learned_from_reversals():
    moves = [Move(0, 0.1), Move(0, -0.05), Move(0, 0.05), Move(0, -0.05)]
    made = np.array([0.1, -0.038, 0.038, -0.038])
    learned = habit(moves, FOLLOWED, 0.0, made)
    assert learned.play[0] > FOLLOWED.backlash + 0.002
    assert learned.to_ask(moves, 0, 0.02) == pytest.approx(0.02 + learned.play[0])
    assert learned.to_ask(moves, 0, -0.02) == pytest.approx(-0.02)


def test_scales_make_the_turns_of_one_trim_err_together():
    moves = [Move(0, 0.1), Move(0, 0.1), Move(1, 0.1)]
    covariance = expected_moves(moves, BLIND, 0.12).covariance
    assert covariance[0, 1] > 0.01**2
    assert covariance[0, 2] == 0.0


def test_without_turns_a_trim_has_its_usual_ways():
    usual = habit([], BLIND, 0.12, np.zeros(0))
    assert usual.scale == (1.0, 1.0)
    assert usual.play == (BLIND.backlash, BLIND.backlash)
