"""Where the trims are aimed, against a general optimiser."""

import numpy as np
import pytest
from scipy.optimize import minimize

from trimmer.guidance.aim import Aim, Box
from trimmer.guidance.field import FEATURES, FieldBelief

WIDE = Box(np.array([-1.0, -1.0]), np.array([1.0, 1.0]))


def belief(seed, doubt=0.0, angle=120.0):
    rng = np.random.default_rng(seed)
    mean = np.zeros((8, FEATURES))
    mean[0, 1], mean[1, 1] = 0.067, 0.0
    mean[0, 2], mean[1, 2] = 0.067 * np.cos(np.radians(angle)), 0.067 * np.sin(np.radians(angle))
    mean[:2, 0] = rng.uniform(-0.01, 0.01, 2)
    mean[2:, 0] = 0.001 * rng.standard_normal(6)
    mean[:, 3:6] = 0.02 * rng.standard_normal((8, 3))
    covariance = np.zeros((8, FEATURES, FEATURES))
    covariance[:, 3:6, 3:6] = doubt**2 * np.eye(3)
    return FieldBelief(np.zeros(2), mean, covariance)


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("angle", [90.0, 120.0, 145.0])
def test_the_joint_aim_is_the_least_expected_distortion(seed, angle):
    b = belief(seed, doubt=0.02, angle=angle)
    aim = Aim(b)

    def expected(x):
        return float(np.sum(b.at(x) ** 2) + np.sum(b.variance(x)))

    found = aim.joint(np.zeros(2), WIDE)
    best = minimize(
        expected, np.zeros(2), method="Nelder-Mead", options={"xatol": 1e-8, "fatol": 1e-16}
    )
    assert aim.expected(found) == pytest.approx(expected(found))
    assert expected(found) <= best.fun * (1 + 1e-4)


@pytest.mark.parametrize("seed", range(6))
def test_inside_a_box_no_point_of_the_box_is_better(seed):
    b = belief(seed)
    aim = Aim(b, caution=0.0)
    free = aim.joint(np.zeros(2), WIDE)
    box = Box(np.minimum(0.4 * free, 0.0) - 1e-6, np.maximum(0.4 * free, 0.0) + 1e-6)
    found = aim.joint(np.zeros(2), box)
    assert np.all(found >= box.low - 1e-12)
    assert np.all(found <= box.high + 1e-12)
    u, v = np.meshgrid(
        np.linspace(box.low[0], box.high[0], 41), np.linspace(box.low[1], box.high[1], 41)
    )
    least = min(aim.expected(np.array(p)) for p in zip(u.ravel(), v.ravel(), strict=True))
    assert aim.expected(found) <= least * (1 + 1e-3)


def test_doubt_about_the_bend_holds_the_aim_back():
    sure, unsure = belief(1, doubt=0.0), belief(1, doubt=0.5)
    far = np.linalg.norm(Aim(sure).joint(np.zeros(2), WIDE))
    assert np.linalg.norm(Aim(unsure).joint(np.zeros(2), WIDE)) < 0.9 * far


def test_along_one_trim_the_other_is_left_where_it_is():
    found = Aim(belief(2)).along(np.array([0.0, 0.05]), 0, WIDE)
    assert found[1] == 0.05
