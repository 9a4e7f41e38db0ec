"""Which movement of one trim best explains a reading, and how well, under a belief."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from trimmer.guidance.field import Array, FieldBelief, features, slopes

_SHARES: Final = np.linspace(0.0, 1.0, 33)
_ROUNDS: Final = 4
FITS: Final = 6.0
"""Standard deviations of misfit up to which a mistake can be called the explanation of a reading: where
nothing fits, the field is not known well enough to accuse a hand."""


@dataclass(frozen=True, slots=True)
class Explained:
    """One trim's movement as an explanation of a reading."""

    way: float
    """Signed movement, share of the travel."""
    sigma: float
    """Its standard deviation, were this the explanation."""
    slip: float
    """The movement less what was thought of it, in standard deviations."""
    misfit: float
    """Sum of squares over variances of what it leaves, the doubt of the field counted."""
    surprise: float
    """Minus twice the logarithm of the probability of reading and movement together, up to what all
    explanations of a reading share."""


@dataclass(frozen=True, slots=True)
class Movement:
    """What is thought of a movement before its reading."""

    trim: int
    """0 upper, 1 lower."""
    expected: float
    """Signed share of the travel."""
    sigma: float
    """Its standard deviation."""
    low: float
    """Least movement thought of."""
    high: float
    """Largest movement thought of."""


def explain(belief: FieldBelief, parts: Array, variance: Array, thought: Movement) -> Explained:
    """Find the movement of one trim that best explains a reading.

    The reading is thought to scatter about the field by its own variance and by the belief's, which
    grows with the way: a column that is not known explains anything, but nothing well.

    Parameters
    ----------
    belief
        The field, anchored at the present place (0).
    parts, variance
        Shape (m,), what was read and its variance.
    thought
        The movement, before the reading.
    """
    reach = thought.high - thought.low
    ways = thought.low + reach * _SHARES
    _, surprise = _surprise(belief, parts, variance, thought, ways)
    coarse = float(ways[int(np.argmin(surprise))])
    fine, sigma = _refined(belief, parts, variance, thought, coarse)
    misfit, surprise = _surprise(belief, parts, variance, thought, np.array([coarse, fine]))
    best = int(np.argmin(surprise))
    way = (coarse, fine)[best]
    slip = (way - thought.expected) / thought.sigma
    return Explained(way, sigma, slip, float(misfit[best]), float(surprise[best]))


def _refined(
    belief: FieldBelief, parts: Array, variance: Array, thought: Movement, coarse: float
) -> tuple[float, float]:
    """Refine a movement found on the grid by least squares; also its standard deviation.

    The doubt of the field is held at each round, so where it is all there is (a column that is not
    known) this may lead away: the caller compares.
    """
    best = coarse
    step = (thought.high - thought.low) / (_SHARES.size - 1)
    held = 1.0 / thought.sigma**2
    strength = held
    for _ in range(_ROUNDS):
        place = _place(thought.trim, np.array([best]))
        weight = 1.0 / (variance + belief.variance(place[0]))
        column = slopes(place[0])[thought.trim] @ belief.mean.T
        strength = float(column @ (weight * column)) + held
        pull = float(column @ (weight * (parts - belief.at(place[0]))))
        move = (pull + held * (thought.expected - best)) / strength
        best = float(np.clip(best + np.clip(move, -step, step), thought.low, thought.high))
    return best, strength**-0.5


def _place(trim: int, ways: Array) -> Array:
    at = np.zeros((ways.size, 2))
    at[:, trim] = ways
    return at


def _surprise(
    belief: FieldBelief, parts: Array, variance: Array, thought: Movement, ways: Array
) -> tuple[Array, Array]:
    """Misfit and surprise of each way, shape (n,) each."""
    phi = features(_place(thought.trim, ways))
    miss = parts - phi @ belief.mean.T
    size = phi.shape[0], belief.mean.shape[0]
    outer = (phi[:, :, None] * phi[:, None, :]).reshape(size[0], -1)
    total = variance + outer @ belief.covariance.reshape(size[1], -1).T
    misfit: Array = np.sum(miss**2 / total, axis=1)
    slip = (ways - thought.expected) / thought.sigma
    surprise: Array = misfit + np.sum(np.log(total), axis=1) + slip**2
    return misfit, surprise + 2.0 * np.log(thought.sigma)


def fits(misfit: float, parts: int) -> bool:
    """Tell whether an explanation leaves no more than chance might, roughly."""
    return (misfit - parts) / float(np.sqrt(2.0 * parts)) < FITS


def explain_both(
    belief: FieldBelief, parts: Array, variance: Array, start: Array
) -> tuple[Array, Array, float]:
    """Find the movement of both trims together that best explains a reading, from a start.

    Returns
    -------
    tuple
        Shape (2,), the movement; shape (2,), its standard deviations; what it leaves, as a sum of
        squares over variances.
    """
    best = start.copy()
    normal = np.eye(2)
    for _ in range(2 * _ROUNDS):
        weight = 1.0 / (variance + belief.variance(best))
        columns = belief.columns(best)
        normal = (columns * weight) @ columns.T + 1e-6 * np.eye(2)
        pull = (columns * weight) @ (parts - belief.at(best))
        move = np.linalg.solve(normal, pull)
        best = best + np.clip(move, -0.1, 0.1)
    weight = 1.0 / (variance + belief.variance(best))
    misfit = float(np.sum(weight * (parts - belief.at(best)) ** 2))
    return best, np.sqrt(np.diag(np.linalg.inv(normal))), misfit
