"""Which movement of one trim best explains a reading, and how well, under a belief."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from trimmer.guidance.field import Array, FieldBelief, features, slopes

_SHARES: Final = np.linspace(-1.0, 1.0, 33)


@dataclass(frozen=True, slots=True)
class Explained:
    """One trim's movement as an explanation of a reading."""

    way: float
    """Signed movement, share of the travel."""
    sigma: float
    """Its standard deviation, were this the explanation."""
    surprise: float
    """Minus twice the logarithm of the reading's probability, up to what all explanations share."""


def explain(
    belief: FieldBelief, parts: Array, variance: Array, trim: int, span: float
) -> Explained:
    """Find the movement of one trim that best explains a reading.

    The reading is thought to scatter about the field by its own variance and by the belief's, which
    grows with the way: a column that is not known explains anything, but nothing well.

    Parameters
    ----------
    belief
        The field, anchored at the present place (0).
    parts, variance
        Shape (m,), what was read and its variance.
    trim
        0 upper, 1 lower.
    span
        Longest movement thought of, share of the travel.
    """
    ways = span * _SHARES
    at = np.zeros((ways.size, 2))
    at[:, trim] = ways
    best = float(ways[int(np.argmin(_surprise(belief, parts, variance, at)))])
    step = span / 16.0
    spread = 0.0
    for _ in range(4):
        place = np.zeros(2)
        place[trim] = best
        weight = 1.0 / (variance + belief.variance(place))
        column = slopes(place)[trim] @ belief.mean.T
        strength = float(column @ (weight * column))
        if strength <= 0.0:
            break
        spread = 1.0 / strength
        move = float(column @ (weight * (parts - belief.at(place)))) / strength
        best = float(np.clip(best + np.clip(move, -step, step), -span, span))
    place = np.zeros((1, 2))
    place[0, trim] = best
    surprise = float(_surprise(belief, parts, variance, place)[0])
    return Explained(best, float(np.sqrt(spread)), surprise)


def _surprise(belief: FieldBelief, parts: Array, variance: Array, at: Array) -> Array:
    phi = features(at)
    miss = parts - phi @ belief.mean.T
    size = phi.shape[0], belief.mean.shape[0]
    outer = (phi[:, :, None] * phi[:, None, :]).reshape(size[0], -1)
    total = variance + outer @ belief.covariance.reshape(size[1], -1).T
    result: Array = np.sum(miss**2 / total + np.log(total), axis=1)
    return result
