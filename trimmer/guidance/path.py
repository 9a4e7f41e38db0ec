"""Where the trims have been: the most probable turns and field, from all readings together.

Unknown are the turns really made (asked for, but made by a hand) and the field. Both are found at once
by Gauss-Newton on the logarithm of their joint probability,

    sum_i |y_i - f(x_i)|^2_{R_i} + sum_k |w_k - w0_k|^2_{C_k} + sum_j (s_j - mu_j)^2 / sigma_j^2,

where `s` holds the start and the turns and `x_i` is their running sum. Parts are taken as independent
of each other given the turns, so the weights fall into one small system for each part and only the few
turns couple them (a Schur complement). With `marginal` the field is integrated out, not chosen along
with the steps: the logarithm of the determinants of those small systems is added. It keeps a start
that is not known from drifting to where the field may be anything. No reading is forgotten: one taken far away counts for less by
itself, since the belief lets the field bend in between.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trimmer.guidance.field import (
    FEATURES,
    Array,
    FieldBelief,
    derivative_weights,
    features,
    shift_matrix,
    slopes,
)


_POWERS = ((0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2), (3, 0), (2, 1), (1, 2), (0, 3))
SIZE_ROUNDS = 4
"""Rounds after which the sizes of the weights are left as learned."""


@dataclass(frozen=True, slots=True, eq=False)
class Walk:
    """Readings along a walk of the two trims."""

    parts: Array
    """Shape (n, m), what was read at each place."""
    variance: Array
    """Shape (n, m), variance of `parts`."""
    steps: Array
    """Shape (n, 2, s), how each place follows from the unknown steps: ``x_i = steps_i @ s``."""
    expected: Array
    """Shape (s,), steps as expected, shares of the travel."""
    sigma: Array
    """Shape (s,), their standard deviations."""


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """The most probable walk and the belief about the field around its last place.

    Positions of the belief are relative to the last place, wherever that is: so the parts read there
    are known as well as they were read, and only the way from there on is a matter of belief.
    """

    belief: FieldBelief
    """The field, anchor 0 at the last place; its covariance includes what is not known of the steps."""
    given_steps: Array
    """Shape (m, 10, 10), covariance of the weights were the steps known."""
    through_steps: Array
    """Shape (m, 10, s), change of the weights with each step."""
    steps: Array
    """Shape (s,), steps as really made."""
    steps_covariance: Array
    """Shape (s, s)."""
    places: Array
    """Shape (n, 2), positions of the readings, last place at 0."""
    last: Array
    """Shape (2,), the last place in the coordinates of the prior."""
    misfit: float
    """Sum of squares over variances of all that was read, believed and asked."""
    converged: bool
    """Whether the search came to rest."""


def find_walk(
    walk: Walk,
    prior: FieldBelief,
    start: Array | None = None,
    rounds: int = 12,
    *,
    marginal: bool = False,
    freedom: float | None = None,
) -> Found:
    """Find the most probable steps and field.

    Parameters
    ----------
    walk
        The readings and what was expected of the steps.
    prior
        Belief about the field before the readings.
    start
        Shape (s,), steps to start the search from; the expected ones where None.
    rounds
        Most Gauss-Newton rounds.
    marginal
        Whether to integrate the field out.
    freedom
        How surely the prior knows the size of each part's weights, as degrees of freedom; None takes
        the sizes as they are.
    """
    steps = walk.expected.copy() if start is None else start.copy()
    problem = _Problem(walk, prior, marginal, freedom)
    weights, cost = problem.weights(steps)
    converged = walk.expected.size == 0
    for round_ in range(0 if converged else rounds):
        change = problem.newton(steps, weights)
        size = 1.0
        for _ in range(6):
            tried = steps + size * change
            new_weights, new_cost = problem.weights(tried)
            if new_cost <= cost:
                break
            size *= 0.35
        else:
            break
        gained = cost - new_cost
        steps, weights, cost = tried, new_weights, new_cost
        if freedom is not None and round_ < SIZE_ROUNDS:
            problem.learn_sizes(steps, weights)
            weights, cost = problem.weights(steps)
            continue
        if gained < 1e-3:
            converged = True
            break
    return problem.found(steps, weights, converged)


class _Problem:
    """The joint problem with its fixed arrays at hand."""

    def __init__(
        self, walk: Walk, prior: FieldBelief, marginal: bool, freedom: float | None
    ) -> None:
        self.marginal = marginal
        self.freedom = freedom
        self.given = np.asarray(np.linalg.inv(prior.covariance), dtype=np.float64)
        self.walk = walk
        self.prior = prior
        self.weight = 1.0 / walk.variance
        self._rescale(np.ones((2, prior.mean.shape[0])), np.ones(prior.mean.shape[0]))

    def _rescale(self, columns: Array, bends: Array) -> None:
        """Widen the prior of each part's columns and, besides, of its curvature by these squares."""
        upper, lower = 1.0 / np.sqrt(columns)
        curved = 1.0 / np.sqrt(bends)
        by = np.ones_like(self.prior.mean)
        by[:, 1], by[:, 2] = upper, lower
        for f, (u, v) in enumerate(_POWERS[3:], start=3):
            by[:, f] = upper**u * lower**v * curved
        self.precision = self.given * by[:, :, None] * by[:, None, :]
        self.pull = np.einsum("kfg,kg->kf", self.precision, self.prior.mean)

    def learn_sizes(self, steps: Array, weights: Array) -> None:
        """Learn the sizes of columns and of curvature (one round of expectation and maximisation).

        A column is as long as it is: its size is learned from all its crest parts together, and from
        all its skew parts together. How much a part bends is learned for each part.
        """
        assert self.freedom is not None
        inverse = np.linalg.inv(self._normal(self._features(steps)))
        own = np.einsum("kff->kf", self.given)
        seen = own * ((weights - self.prior.mean) ** 2 + np.einsum("kff->kf", inverse))
        columns = np.empty((2, weights.shape[0]))
        for kind in (0, 1):
            columns[:, kind::2] = seen[kind::2, 1:3].mean(axis=0)[:, None]
        grown = np.stack([columns[0] ** u * columns[1] ** v for u, v in _POWERS[3:]], axis=1)
        bends = (seen[:, 3:] / grown).sum(axis=1)
        self._rescale(columns, (self.freedom + bends) / (self.freedom + grown.shape[1]))

    def _features(self, steps: Array) -> Array:
        return features(self.walk.steps @ steps - self.prior.anchor)

    def _normal(self, phi: Array) -> Array:
        outer = (phi[:, :, None] * phi[:, None, :]).reshape(phi.shape[0], -1)
        flat = self.weight.T @ outer
        return self.precision + flat.reshape(-1, FEATURES, FEATURES)

    def weights(self, steps: Array) -> tuple[Array, float]:
        """Give the best weights for given steps, and the cost."""
        phi = self._features(steps)
        right = (self.weight * self.walk.parts).T @ phi + self.pull
        normal = self._normal(phi)
        best = np.linalg.solve(normal, right[..., None])[..., 0]
        cost = self.misfit(steps, best)
        if self.marginal:
            cost += float(np.sum(np.linalg.slogdet(normal)[1]))
        return best, cost

    def misfit(self, steps: Array, weights: Array) -> float:
        """Give the sum of squares of the joint problem."""
        miss = self.walk.parts - self._features(steps) @ weights.T
        off = weights - self.prior.mean
        slip = (steps - self.walk.expected) / self.walk.sigma
        return float(
            np.sum(self.weight * miss * miss)
            + np.einsum("kf,kfg,kg->", off, self.precision, off)
            + slip @ slip
        )

    def _coupled(self, steps: Array, weights: Array) -> tuple[Array, Array, Array, Array]:
        """Give inverse normal matrices, their coupling to the steps, the Schur complement, D."""
        at = self.walk.steps @ steps - self.prior.anchor
        phi = features(at)
        by_place = np.einsum("iaf,kf->ika", slopes(at), weights)
        by_step = by_place @ self.walk.steps
        weighted = self.weight[..., None] * by_step
        inverse = np.asarray(np.linalg.inv(self._normal(phi)), dtype=np.float64)
        coupling = np.einsum("if,ikj->kfj", phi, weighted)
        through = inverse @ coupling
        n = steps.size
        rows = phi.shape[0] * weights.shape[0], weights.size
        direct = by_step.reshape(rows[0], n).T @ weighted.reshape(rows[0], n)
        shared = coupling.reshape(rows[1], n).T @ through.reshape(rows[1], n)
        schur = direct + np.diag(1.0 / self.walk.sigma**2) - shared
        return inverse, through, schur, weighted

    def newton(self, steps: Array, weights: Array) -> Array:
        """Give the Gauss-Newton change of the steps (weights already at their best for them)."""
        inverse, _, schur, weighted = self._coupled(steps, weights)
        phi = self._features(steps)
        miss = self.walk.parts - phi @ weights.T
        slope = np.einsum("ik,ikj->j", miss, weighted)
        slope -= (steps - self.walk.expected) / self.walk.sigma**2
        if self.marginal:
            turn = slopes(self.walk.steps @ steps - self.prior.anchor)
            held = np.einsum("ik,kfg->ifg", self.weight, inverse)
            by_place = np.einsum("if,ifg,iag->ia", phi, held, turn)
            slope -= np.einsum("ia,iaj->j", by_place, self.walk.steps)
        return np.asarray(np.linalg.solve(schur, slope))

    def found(self, steps: Array, weights: Array, converged: bool) -> Found:
        """Put the result together."""
        inverse, through, schur, _ = self._coupled(steps, weights)
        spread = np.asarray(np.linalg.inv(schur), dtype=np.float64)
        places = self.walk.steps @ steps
        shift = shift_matrix(places[-1] - self.prior.anchor)
        local = weights @ shift.T
        inverse = shift @ inverse @ shift.T
        moved = np.einsum("akf,as->kfs", derivative_weights(local), self.walk.steps[-1])
        through = moved - shift @ through
        covariance = inverse + through @ spread @ through.transpose(0, 2, 1)
        return Found(
            belief=FieldBelief(np.zeros(2), local, covariance),
            given_steps=inverse,
            through_steps=through,
            steps=steps,
            steps_covariance=spread,
            places=places - places[-1],
            last=places[-1],
            misfit=self.misfit(steps, weights),
            converged=converged,
        )
