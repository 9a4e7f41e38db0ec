"""Which movement of one trim best explains a reading, and how well, under a belief."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from trimmer.guidance.field import Array, FieldBelief, features, slopes

_SHARES: Final = np.linspace(-1.0, 1.0, 33)
_ROUNDS: Final = 4


@dataclass(frozen=True, slots=True)
class Explained:
    """One trim's movement as an explanation of a reading."""

    way: float
    """Signed movement, share of the travel."""
    sigma: float
    """Its standard deviation, were this the explanation."""
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
    """Its standard deviation; infinite where nothing is known."""
    span: float
    """Longest movement thought of."""


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
    ways = thought.span * _SHARES
    _, surprise = _surprise(belief, parts, variance, thought, ways)
    best = float(ways[int(np.argmin(surprise))])
    step = thought.span / 16.0
    held = 1.0 / thought.sigma**2
    strength = held
    for _ in range(_ROUNDS):
        place = _place(thought.trim, np.array([best]))
        weight = 1.0 / (variance + belief.variance(place[0]))
        column = slopes(place[0])[thought.trim] @ belief.mean.T
        strength = float(column @ (weight * column)) + held
        if strength <= 0.0:
            break
        pull = float(column @ (weight * (parts - belief.at(place[0]))))
        move = (pull + held * (thought.expected - best)) / strength
        best = float(np.clip(best + np.clip(move, -step, step), -thought.span, thought.span))
    misfit, surprise = _surprise(belief, parts, variance, thought, np.array([best]))
    sigma = float("inf") if strength <= 0.0 else strength**-0.5
    return Explained(best, sigma, float(misfit[0]), float(surprise[0]))


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
    surprise: Array = misfit + np.sum(np.log(total), axis=1)
    if np.isfinite(thought.sigma):
        surprise += ((ways - thought.expected) / thought.sigma) ** 2 + 2.0 * np.log(thought.sigma)
    return misfit, surprise
