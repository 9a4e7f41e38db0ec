"""The floor: what is left at the best setting, with the doubt about it."""

import numpy as np
import pytest

from trimmer.guidance.field import FEATURES, FieldBelief
from trimmer.guidance.floor import WIDER, floor_at, usual_left
from trimmer.guidance.path import Found
from trimmer.guidance.seen import Seen


def found_with(parts, sigma=0.0, columns=None, bend=0.0):
    m = parts.size
    mean = np.zeros((m, FEATURES))
    mean[:, 0] = parts
    mean[:, 1:3] = np.eye(m)[:, :2] if columns is None else columns
    covariance = np.zeros((m, FEATURES, FEATURES))
    covariance[:, 0, 0] = sigma**2
    covariance[:, 3, 3] = bend**2
    belief = FieldBelief(np.zeros(2), mean, covariance)
    return Found(
        belief=belief,
        given_steps=covariance,
        through_steps=np.zeros((m, FEATURES, 1)),
        steps=np.zeros(1),
        steps_covariance=np.zeros((1, 1)),
        places=np.zeros((1, 2)),
        last=np.zeros(2),
        misfit=0.0,
        cost=0.0,
        sizes=None,
        strain=0.0,
        converged=True,
    )


def seen(m, sigma, fixed=0.0):
    return Seen(np.zeros(m), np.full(m, sigma**2), np.full(m, fixed**2), 0.01, 1e-4, 1000.0, 2.5)


def test_the_floor_of_a_sure_field_is_the_length_of_its_parts():
    parts = np.zeros(28)
    parts[4], parts[8] = 0.003, 0.004
    floor, sigma = floor_at(found_with(parts), np.zeros(2), seen(28, 1e-6))
    assert floor == pytest.approx(0.005, rel=1e-4)
    assert sigma < 1e-6


def test_noise_is_taken_off_and_the_interval_holds_the_truth():
    rng = np.random.default_rng(0)
    truth = np.zeros(28)
    truth[4], truth[6] = 0.0006, 0.0008
    sigma = 1e-4
    floors, held = [], 0
    for _ in range(2000):
        floor, spread = floor_at(
            found_with(truth + sigma * rng.standard_normal(28), sigma), np.zeros(2), seen(28, sigma)
        )
        floors.append(floor)
        held += abs(floor - 0.001) <= 1.96 * spread
    assert np.mean(floors) == pytest.approx(0.001, rel=0.02)
    assert 0.95 <= held / 2000 <= 0.99  # 95 %, and the margin that is put on top


def test_what_lies_along_the_columns_does_not_add_doubt():
    parts = np.zeros(28)
    parts[0], parts[6] = 0.004, 0.003
    doubtful = found_with(parts, sigma=0.0)
    doubtful.given_steps[0, 0, 0] = 1e-3**2
    _, sigma = floor_at(doubtful, np.zeros(2), seen(28, 1e-6))
    assert sigma < 1e-5


def test_the_digitisers_own_error_stays_however_much_is_read():
    parts = np.zeros(28)
    parts[6] = 0.004
    _, sigma = floor_at(found_with(parts), np.zeros(2), seen(28, 1e-6, fixed=2e-4))
    assert sigma == pytest.approx(WIDER * 2e-4, rel=0.01)


def test_parts_expected_only_by_a_doubtful_bend_count_for_less():
    parts = np.zeros(28)
    parts[6] = 0.01
    best = np.array([0.3, 0.0])
    sure, _ = floor_at(found_with(parts), best, seen(28, 1e-5))
    doubted, sigma = floor_at(found_with(parts, bend=0.3), best, seen(28, 1e-5))
    assert doubted < 0.6 * sure
    assert sigma > 1e-3


def test_usual_sizes_fall_with_the_order_where_symmetry_makes_them():
    left = usual_left(15)
    assert left.size == 28
    assert left[1] == 0.02
    assert left[1] / left[5] == pytest.approx(4.0)
