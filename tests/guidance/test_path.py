"""The most probable walk against the slow obvious way: one big least-squares problem."""

import numpy as np
import pytest
from scipy.optimize import least_squares, minimize

from trimmer.guidance.field import FEATURES, FieldBelief, features
from trimmer.guidance.general import general_belief
from trimmer.guidance.path import Walk, find_walk

M = 6


def small_prior(seed=0):
    rng = np.random.default_rng(seed)
    sigma = np.array([0.2, *(0.05,) * 2, *(0.04,) * 3, *(0.03,) * 4])
    mean = np.zeros((M, FEATURES))
    mean[:, 1:3] = 0.03 * rng.standard_normal((M, 2))
    return FieldBelief(np.zeros(2), mean, np.tile(np.diag(sigma**2), (M, 1, 1)))


def walk_of(true_steps, trims, asked, seed=1, sigma=1e-4):
    """Readings of a random field along a walk, the last place at 0."""
    rng = np.random.default_rng(seed)
    prior = small_prior()
    field = prior.mean + np.sqrt(np.diagonal(prior.covariance, axis1=1, axis2=2)) * (
        rng.standard_normal((M, FEATURES))
    )
    field[:, 0] *= 0.1
    n = len(true_steps)
    steps = np.zeros((n + 1, 2, n))
    for i, trim in enumerate(trims):
        steps[: i + 1, trim, i] = -1.0
    places = steps @ np.array(true_steps)
    parts = features(places) @ field.T + sigma * rng.standard_normal((n + 1, M))
    spread = np.diag((0.15 * np.abs(asked) + 0.005) ** 2)
    return Walk(parts, np.full((n + 1, M), sigma**2), steps, np.array(asked), spread), field


WALK = ([0.09, -0.13, 0.16, 0.05], [0, 1, 0, 1], [0.08, -0.15, 0.15, 0.05])


def referee(walk, prior):
    """Solve for steps and weights together, nothing taken apart."""
    n = walk.expected.size
    root = np.linalg.cholesky(np.linalg.inv(walk.spread)).T
    scale = np.sqrt(np.diagonal(prior.covariance, axis1=1, axis2=2))

    def residuals(z):
        steps, weights = z[:n], z[n:].reshape(M, FEATURES)
        phi = features(walk.steps @ steps)
        return np.concatenate(
            (
                ((walk.parts - phi @ weights.T) / np.sqrt(walk.variance)).ravel(),
                ((weights - prior.mean) / scale).ravel(),
                root @ (steps - walk.expected),
            )
        )

    start = np.concatenate((walk.expected, prior.mean.ravel()))
    found = least_squares(residuals, start, xtol=1e-14, ftol=1e-14, gtol=1e-12, max_nfev=2000)
    return found.x[:n], found.x[n:].reshape(M, FEATURES), 2 * found.cost


def test_steps_and_field_are_those_of_one_big_least_squares_problem():
    walk, _ = walk_of(*WALK)
    prior = small_prior()
    steps, weights, cost = referee(walk, prior)
    found = find_walk(walk, prior, rounds=60)
    assert found.misfit == pytest.approx(cost, rel=1e-4)
    assert found.steps == pytest.approx(steps, abs=2e-4)
    assert found.belief.mean == pytest.approx(weights, abs=2e-4)


def test_the_covariance_is_that_of_the_big_problem():
    walk, _ = walk_of(*WALK)
    prior = small_prior()
    found = find_walk(walk, prior, rounds=60)
    n = walk.expected.size
    phi = features(walk.steps @ found.steps)
    h = 1e-6
    by_step = [
        (features(walk.steps @ (found.steps + h * e)) - phi) @ found.belief.mean.T / h
        for e in np.eye(n)
    ]
    size = n + M * FEATURES
    information = np.zeros((size, size))
    information[:n, :n] += np.linalg.inv(walk.spread)
    for k in range(M):
        block = slice(n + k * FEATURES, n + (k + 1) * FEATURES)
        information[block, block] += np.linalg.inv(prior.covariance[k])
        for i in range(n + 1):
            row = np.zeros(size)
            row[:n] = [b[i, k] for b in by_step]
            row[block] = phi[i]
            information += np.outer(row, row) / walk.variance[i, k]
    covariance = np.linalg.inv(information)
    assert found.steps_covariance == pytest.approx(covariance[:n, :n], rel=2e-3, abs=1e-9)
    assert found.belief.covariance[2] == pytest.approx(
        covariance[n + 20 : n + 30, n + 20 : n + 30], rel=5e-3, abs=1e-8
    )


def test_marginal_steps_are_those_of_the_marginal_probability():
    walk, _ = walk_of([0.09, -0.13], [0, 1], [0.08, -0.15], sigma=1e-3)
    prior = small_prior()

    def cost(steps):
        phi = features(walk.steps @ steps)
        total = (steps - walk.expected) @ np.linalg.solve(walk.spread, steps - walk.expected)
        for k in range(M):
            spread = phi @ prior.covariance[k] @ phi.T + np.diag(walk.variance[:, k])
            miss = walk.parts[:, k] - phi @ prior.mean[k]
            total += miss @ np.linalg.solve(spread, miss) + np.linalg.slogdet(spread)[1]
        return total

    best = minimize(
        cost, walk.expected, method="Nelder-Mead", options={"xatol": 1e-7, "fatol": 1e-9}
    )
    found = find_walk(walk, prior, rounds=60, marginal=True)
    assert cost(found.steps) == pytest.approx(best.fun, abs=0.02)
    assert found.steps == pytest.approx(best.x, abs=1.5e-3)


def test_the_hands_errors_are_seen_through_once_the_column_is_known():
    true = [0.08, 0.08, 0.08, 0.04, -0.06]
    asked = [0.08, 0.08, 0.08, 0.055, -0.045]
    walk, _ = walk_of(true, [0] * 5, asked)
    found = find_walk(walk, small_prior(), rounds=60)
    ratio = found.steps / found.steps[0]
    assert ratio[3:] == pytest.approx([0.5, -0.75], abs=0.1)


def test_a_reading_alone_teaches_its_own_place_and_nothing_else():
    prior = general_belief(5)
    parts = np.linspace(-0.01, 0.02, 8)
    walk = Walk(
        parts[None], np.full((1, 8), 1e-8), np.zeros((1, 2, 0)), np.zeros(0), np.zeros((0, 0))
    )
    found = find_walk(walk, prior)
    assert found.belief.at(np.zeros(2)) == pytest.approx(parts, abs=1e-6)
    assert found.belief.columns(np.zeros(2)) == pytest.approx(np.zeros((2, 8)))
    assert found.converged


def test_places_are_relative_to_the_last_one():
    walk, _ = walk_of(*WALK)
    found = find_walk(walk, small_prior(), rounds=60)
    assert found.places[-1] == pytest.approx(np.zeros(2))
    assert found.places[0, 0] == pytest.approx(-(found.steps[0] + found.steps[2]))


def test_sizes_are_learned_so_that_a_column_three_times_as_long_is_no_surprise():
    rng = np.random.default_rng(4)
    prior = general_belief(15)
    scale = np.sqrt(np.diagonal(prior.covariance, axis1=1, axis2=2))
    for gain in (0.3, 1.0, 3.0):
        weights = scale * rng.standard_normal(scale.shape)
        weights[:, 1:3] *= gain
        weights[:, 3:] *= 0.3 * gain
        steps = -np.array([[[1.0], [0.0]], [[0.0], [0.0]]])
        places = steps @ np.array([0.08])
        parts = features(places) @ weights.T + 1e-4 * rng.standard_normal((2, 28))
        walk = Walk(parts, np.full((2, 28), 1e-8), steps, np.array([0.08]), np.array([[0.015**2]]))
        found = find_walk(walk, prior, marginal=True, freedom=3.0)
        assert abs(found.steps[0] - 0.08) < 0.015
        secant = (parts[1] - parts[0]) / 0.08
        columns = found.belief.columns(np.zeros(2))
        assert np.linalg.norm(columns[0]) / np.linalg.norm(secant) == pytest.approx(1, abs=0.15)
