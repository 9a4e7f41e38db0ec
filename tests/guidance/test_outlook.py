"""What a turn promises, against many simulated turns."""

from dataclasses import replace

import numpy as np
import pytest

from trimmer.guidance.aim import Box
from trimmer.guidance.choice import choose
from trimmer.guidance.estimate import Estimate
from trimmer.guidance.field import FEATURES, FieldBelief
from trimmer.guidance.habit import Habit
from trimmer.guidance.hand import UNEVEN, hand_for
from trimmer.guidance.moves import Move
from trimmer.guidance.outlook import BEYOND, CLOSE_SHARE, Outlook
from trimmer.guidance.path import Found
from trimmer.guidance.record import Record
from trimmer.guidance.seen import Seen

HAND = hand_for(0.75, followed=False)
FOLLOWED = hand_for(0.75, followed=True)
FLOOR = 0.004


def setting(away, angle=120.0, doubt=0.0, hand_moves=()):
    """A straight field whose best setting is at -away, with the floor in parts of its own."""
    columns = 0.067 * np.array([[1.0, 0.0], [np.cos(np.radians(angle)), np.sin(np.radians(angle))]])
    mean = np.zeros((28, FEATURES))
    mean[:2, 1:3] = columns.T
    mean[:2, 0] = columns.T @ np.array(away)
    mean[4, 0] = FLOOR
    covariance = np.zeros((28, FEATURES, FEATURES))
    covariance[:2, 0, 0] = (0.067 * doubt) ** 2
    belief = FieldBelief(np.zeros(2), mean, covariance)
    found = Found(
        belief, covariance, np.zeros((28, FEATURES, 1)), np.zeros(1), np.zeros((1, 1)),
        np.zeros((1, 2)), np.zeros(2), 0.0, 0.0, None, 0.0, True,
    )  # fmt: skip
    parts = mean[:, 0]
    record = Record()
    record.begin(
        Seen(parts, np.full(28, 1e-10), np.zeros(28), float(np.linalg.norm(parts)), 1e-5, 1e3, 2.5)
    )
    record.moves.extend(hand_moves)
    estimate = Estimate(
        found=found,
        here=np.zeros(2),
        origin=np.zeros(2),
        box=Box(np.full(2, -1.0), np.full(2, 1.0)),
        best=-np.array(away),
        aimed=belief,
        warm_thd=None,
        floor_thd=FLOOR,
        floor_sigma=1e-5,
        habit=Habit((1.0, 1.0), (HAND.backlash, HAND.backlash)),
        known=(True, True),
    )
    return estimate, record


def test_a_setting_within_a_small_share_of_the_floor_is_there():
    near, record = setting((0.003, 0.0))
    assert Outlook(near, record, HAND, (0, 1)).is_there()
    far, record = setting((0.03, 0.0))
    assert not Outlook(far, record, HAND, (0, 1)).is_there()
    assert choose(near, record, HAND) is None


def test_what_is_not_known_of_the_best_counts_against_being_there():
    unsure, record = setting((0.003, 0.0), doubt=0.02)
    assert not Outlook(unsure, record, HAND, (0, 1)).is_there()


@pytest.mark.parametrize("away", [(0.1, 0.02), (0.05, -0.05), (0.2, 0.2)])
@pytest.mark.parametrize("angle", [90.0, 120.0, 145.0])
def test_turns_still_to_make_are_those_of_simulated_hands(away, angle):
    estimate, record = setting(away, angle)
    outlook = Outlook(estimate, record, HAND, (0, 1))
    rng = np.random.default_rng(0)
    h = outlook.h
    for trim in (0, 1):
        for way in outlook.ways(trim):
            ends = np.tile(np.array(away), (4000, 1))
            ends[:, trim] += way + outlook.noise(trim, way) * rng.standard_normal(4000)
            further = np.full(4000, np.inf)
            for other in (0, 1):
                line = -(ends @ h[other]) / h[other, other]
                sigma = np.sqrt((HAND.scatter**2 + UNEVEN**2) * line**2 + HAND.jitter**2)
                chance, rest = np.zeros(4000), np.zeros(4000)
                for _ in range(60):
                    after = ends.copy()
                    after[:, other] += line + sigma * rng.standard_normal(4000)
                    energy = np.einsum("na,ab,nb->n", after, h, after)
                    chance += (energy <= outlook.radius2) / 60
                    rest += energy / 60
                left = 1.0 + (1.0 - chance) * (BEYOND + 0.2 * np.log1p(rest / outlook.radius2))
                further = np.minimum(further, left)
            energy = np.einsum("na,ab,nb->n", ends, h, ends)
            simulated = np.mean(np.where(energy <= outlook.radius2, 0.0, further))
            assert outlook.turns_after(trim, way) == pytest.approx(simulated, abs=0.3)


def test_the_larger_way_goes_first_since_the_second_turn_mends_its_error():
    estimate, record = setting((0.25, 0.08))
    choice = choose(estimate, record, HAND)
    assert choice is not None
    assert choice.trim == 0
    assert choice.way == pytest.approx(-0.25, abs=0.06)


def test_a_turn_that_alone_gets_there_is_preferred_to_the_joint_way():
    away = np.array([0.12, 0.0]) + 0.004 * np.array([0.0, 1.0])
    estimate, record = setting(tuple(away))
    choice = choose(estimate, record, HAND)
    assert choice is not None
    assert choice.trim == 0


def test_no_turn_is_longer_than_the_model_is_good_for_or_leaves_the_travel():
    estimate, record = setting((0.7, 0.1))
    choice = choose(estimate, record, HAND)
    assert choice is not None
    assert abs(choice.way) <= 0.35
    boxed = replace(estimate, box=Box(np.array([-0.1, -1.0]), np.array([1.0, 1.0])))
    outlook = Outlook(boxed, record, HAND, (0,))
    assert min(outlook.ways(0)) >= -0.1


def test_no_turn_is_asked_for_that_a_hand_cannot_set():
    estimate, record = setting((0.004, 0.0))
    ways = Outlook(estimate, record, HAND, (0, 1)).ways(0)
    assert all(abs(w) >= HAND.jitter for w in ways)


def test_a_turn_that_makes_thd_rise_first_says_so():
    estimate, record = setting((0.2, 0.2), angle=145.0)
    choice = choose(estimate, record, HAND)
    assert choice is not None
    assert choice.rises
    assert choice.expected_thd > record.here.thd
    assert "rises first" in choice.reason


def test_expected_thd_is_that_of_simulated_hands():
    estimate, record = setting((0.2, 0.05))
    outlook = Outlook(estimate, record, HAND, (0, 1))
    rng = np.random.default_rng(1)
    made = -0.2 + outlook.noise(0, -0.2) * rng.standard_normal(20000)
    square = np.mean([np.sum(estimate.belief.at(np.array([m, 0.0])) ** 2) for m in made[:4000]])
    assert outlook.thd_after(0, -0.2) == pytest.approx(np.sqrt(square), rel=0.03)


def test_a_hand_that_tries_again_and_again_is_asked_for_less():
    fresh, record = setting((0.006, -0.006))
    assert not Outlook(fresh, record, FOLLOWED, (0, 1)).is_there()
    often = tuple(Move(i % 2, (-1) ** i * 0.01) for i in range(12))
    tired, record = setting((0.006, -0.006), hand_moves=often)
    patient = Outlook(tired, record, FOLLOWED, (0, 1))
    assert (
        patient.radius2
        > 1.5 * Outlook(fresh, setting((0.006, -0.006))[1], FOLLOWED, (0, 1)).radius2
    )
    assert choose(tired, record, FOLLOWED) is None


def test_large_turns_are_no_tries():
    moves = tuple(Move(0, 0.2) for _ in range(12))
    estimate, record = setting((0.006, -0.006), hand_moves=moves)
    assert Outlook(estimate, record, FOLLOWED, (0, 1)).tries == 0


def test_close_is_closer_than_what_counts_as_reached():
    assert CLOSE_SHARE < 0.05
