"""Where the trims have been: the most probable turns and field, from all readings together.

Unknown are the turns really made (asked for, but made by a hand) and the field. Both are found at once
by Gauss-Newton on the logarithm of their joint probability,

    sum_i |y_i - f(x_i)|^2_{R_i} + sum_k |w_k - w0_k|^2_{C_k} + |s - mu|^2_S,

where `s` holds the start and the turns and `x_i` is their running sum. Parts are taken as independent
of each other given the turns, so the weights fall into one small system for each part and only the few
turns couple them (a Schur complement). With `marginal` the field is integrated out, not chosen along
with the steps: the logarithm of the determinants of those small systems is added. It keeps a start
that is not known from drifting to where the field may be anything. No reading is forgotten: one taken
far away counts for less by itself, since the belief lets the field bend in between.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

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

_POWERS: Final = np.array(
    [(0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2), (3, 0), (2, 1), (1, 2), (0, 3)],
    dtype=np.float64,
)
"""Powers of the upper and of the lower position in each feature."""
RESTS: Final = 0.02
"""The search rests once a round lowers the cost by less than this."""
SIZE_ROUNDS: Final = 3
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
    spread: Array
    """Shape (s, s), their covariance."""


@dataclass(frozen=True, slots=True, eq=False)
class Sizes:
    """How much larger than the prior says the weights of the field are, squared."""

    columns: Array
    """Shape (m, 2)."""
    bends: Array
    """Shape (m,), of the curvature besides what larger columns bring with them."""


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
    cost: float
    """Minus twice the logarithm of the probability of it all, up to a constant; comparable between
    searches with the same prior and readings."""
    sizes: Sizes | None
    """Sizes of the weights where they were learned."""
    strain: float
    """Sum of squares over variances of the steps against what was expected of them."""
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
    sizes: Sizes | None = None,
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
    sizes
        Sizes learned before, to start from.
    """
    problem = _Problem(walk, prior, marginal)
    learning = 0 if freedom is None else SIZE_ROUNDS
    if freedom is not None and sizes is not None and sizes.bends.size == prior.mean.shape[0]:
        problem.take_sizes(sizes, freedom)
        learning = 1
    now = problem.at(walk.expected.copy() if start is None else start.copy())
    converged = walk.expected.size == 0
    for round_ in range(0 if converged else rounds):
        if freedom is not None and round_ < learning:
            problem.take_sizes(problem.sizes_of(now, freedom), freedom)
            now = problem.at(now.steps)
        better = problem.better(now)
        if better is None:
            break
        gained = now.cost - better.cost
        now = better
        if gained < RESTS and round_ >= learning:
            converged = True
            break
    return problem.found(now, converged)


@dataclass(frozen=True, slots=True, eq=False)
class _Trial:
    """The joint problem at some steps, the field at its best for them."""

    steps: Array
    phi: Array
    """Shape (n, 10), features of the places."""
    inverse: Array
    """Shape (m, 10, 10), covariance of the weights given the steps."""
    weights: Array
    """Shape (m, 10)."""
    miss: Array
    """Shape (n, m), what the field does not explain of the readings."""
    misfit: float
    """Sum of squares."""
    cost: float
    """The same, with the determinants where the field is integrated out."""


class _Problem:
    """The joint problem with its fixed arrays at hand."""

    def __init__(self, walk: Walk, prior: FieldBelief, marginal: bool) -> None:
        self.marginal = marginal
        self.walk = walk
        self.prior = prior
        self.weight = 1.0 / walk.variance
        self.held = np.asarray(np.linalg.inv(walk.spread), dtype=np.float64)
        self.weighted_parts = self.weight * walk.parts
        self.given = np.asarray(np.linalg.inv(prior.covariance), dtype=np.float64)
        self.precision = self.given
        self.sizes: Sizes | None = None
        self.sizes_cost = 0.0
        self.pull = np.einsum("kfg,kg->kf", self.given, prior.mean)

    def at(self, steps: Array) -> _Trial:
        """Solve for the field at given steps."""
        phi = features(self.walk.steps @ steps - self.prior.anchor)
        outer = (phi[:, :, None] * phi[:, None, :]).reshape(phi.shape[0], -1)
        normal = self.precision + (self.weight.T @ outer).reshape(-1, FEATURES, FEATURES)
        inverse = np.asarray(np.linalg.inv(normal), dtype=np.float64)
        right = self.weighted_parts.T @ phi + self.pull
        weights = (inverse @ right[..., None])[..., 0]
        miss = self.walk.parts - phi @ weights.T
        off = weights - self.prior.mean
        misfit = float(
            np.sum(self.weight * miss * miss)
            + np.sum(off * (self.precision @ off[..., None])[..., 0])
        ) + self._strain(steps)
        cost = misfit
        if self.marginal:
            cost += float(np.sum(np.linalg.slogdet(normal)[1])) + self.sizes_cost
        return _Trial(steps, phi, inverse, weights, miss, misfit, cost)

    def _strain(self, steps: Array) -> float:
        slip = steps - self.walk.expected
        return float(slip @ self.held @ slip)

    def sizes_of(self, now: _Trial, freedom: float) -> Sizes:
        """Give the sizes of columns and of curvature (one round of expectation and maximisation).

        A column is as long as it is: its size is learned from all its crest parts together, and from
        all its skew parts together. How much a part bends is learned for each part.
        """
        own = np.einsum("kff->kf", self.given)
        seen = own * ((now.weights - self.prior.mean) ** 2 + np.einsum("kff->kf", now.inverse))
        columns = np.empty((seen.shape[0], 2))
        for kind in (0, 1):
            columns[kind::2] = seen[kind::2, 1:3].mean(axis=0)
        grown = np.exp(np.log(columns) @ _POWERS[3:].T)
        bends = (freedom + np.sum(seen[:, 3:] / grown, axis=1)) / (freedom + grown.shape[1])
        return Sizes(columns, bends)

    def take_sizes(self, sizes: Sizes, freedom: float) -> None:
        """Widen the prior to some sizes."""
        columns, bends = sizes.columns, sizes.bends
        grown = np.exp(np.log(columns) @ _POWERS[3:].T)
        by = np.ones_like(self.prior.mean)
        by[:, 1:3] = 1.0 / np.sqrt(columns)
        by[:, 3:] = 1.0 / np.sqrt(grown * bends[:, None])
        # What the prior's own normalisation and the prior on the sizes add to the cost.
        self.sizes = sizes
        self.sizes_cost = -2.0 * float(np.sum(np.log(by)))
        self.sizes_cost += freedom * float(np.sum(1.0 / bends + np.log(bends)))
        self.precision = self.given * by[:, :, None] * by[:, None, :]
        self.pull = np.einsum("kfg,kg->kf", self.precision, self.prior.mean)

    def better(self, now: _Trial) -> _Trial | None:
        """Make one Gauss-Newton step, shortened until it lowers the cost; None where none does."""
        change = self._newton(now)
        for shorter in (1.0, 0.35, 0.1, 0.02):
            tried = self.at(now.steps + shorter * change)
            if tried.cost <= now.cost:
                return tried
        return None

    def _coupled(self, now: _Trial) -> tuple[Array, Array, Array, Array]:
        """Give slopes, how the weights follow the steps, the Schur complement, weighted slopes."""
        turn = slopes(self.walk.steps @ now.steps - self.prior.anchor)
        by_step = (turn @ now.weights.T).transpose(0, 2, 1) @ self.walk.steps
        weighted = self.weight[..., None] * by_step
        coupling = np.tensordot(now.phi, weighted, axes=(0, 0)).transpose(1, 0, 2)
        through = now.inverse @ coupling
        n = now.steps.size
        places, weights = now.miss.size, now.weights.size
        direct = by_step.reshape(places, n).T @ weighted.reshape(places, n)
        shared = coupling.reshape(weights, n).T @ through.reshape(weights, n)
        return turn, through, direct + self.held - shared, weighted

    def _newton(self, now: _Trial) -> Array:
        """Give the Gauss-Newton change of the steps."""
        turn, _, schur, weighted = self._coupled(now)
        n = now.steps.size
        slope = now.miss.reshape(-1) @ weighted.reshape(-1, n)
        slope -= self.held @ (now.steps - self.walk.expected)
        if self.marginal:
            # Half the slope of the log determinants: phi' A^-1 dphi / R, summed over parts.
            flat = now.inverse.reshape(now.inverse.shape[0], -1)
            held = (self.weight @ flat).reshape(-1, FEATURES, FEATURES)
            by_place = turn @ (held @ now.phi[..., None])
            slope -= by_place.reshape(-1) @ self.walk.steps.reshape(-1, n)
        return np.asarray(np.linalg.solve(schur, slope))

    def found(self, now: _Trial, converged: bool) -> Found:
        """Put the result together."""
        _, through, schur, _ = self._coupled(now)
        spread = np.asarray(np.linalg.inv(schur), dtype=np.float64)
        places = self.walk.steps @ now.steps
        shift = shift_matrix(places[-1] - self.prior.anchor)
        local = now.weights @ shift.T
        inverse = shift @ now.inverse @ shift.T
        moved = np.einsum("akf,as->kfs", derivative_weights(local), self.walk.steps[-1])
        through = moved - shift @ through
        covariance = inverse + through @ spread @ through.transpose(0, 2, 1)
        return Found(
            belief=FieldBelief(np.zeros(2), local, covariance),
            given_steps=inverse,
            through_steps=through,
            steps=now.steps,
            steps_covariance=spread,
            places=places - places[-1],
            last=places[-1],
            misfit=now.misfit,
            cost=now.cost,
            strain=self._strain(now.steps),
            sizes=self.sizes,
            converged=converged,
        )
