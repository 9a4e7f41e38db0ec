"""A trim's scale is its own: the same field under another measure of how far a trim has gone.

Two units of a kind shape a wave alike, but their tracks are wound unevenly, and how far a hand turned
is known to some per cent only. So a field learned on one unit is known up to a smooth change of each
trim's scale, ``x = s z + a z^2 / 2 + b z^3 / 6``. Under it the weights at the anchor become

    J' = s J,   Q' = s^2 Q + a J,   C' = s^3 C + 3 s a Q + b J

along a trim, with the products of both trims' factors in the mixed terms. Fields are compared in the
scale in which neither curvature has a component along the column itself.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trimmer.guidance.field import FEATURES, Array

_COLUMN = (1, 2)
_BEND = (3, 5)
_THIRD = (6, 9)


@dataclass(frozen=True, slots=True)
class Warp:
    """A change of one trim's scale."""

    scale: float
    """s; negative where the trim works the other way round."""
    bend: float = 0.0
    """a."""
    third: float = 0.0
    """b."""


def warp_matrix(upper: Warp, lower: Warp) -> Array:
    """Give the matrix that takes weights to those in the new scale: ``w' = M w``; shape (10, 10)."""
    m = np.eye(FEATURES)
    for trim, warp in enumerate((upper, lower)):
        column, bend, third = _COLUMN[trim], _BEND[trim], _THIRD[trim]
        m[column, column] = warp.scale
        m[bend, [column, bend]] = warp.bend, warp.scale**2
        m[third, [column, bend, third]] = (
            warp.third,
            3.0 * warp.scale * warp.bend,
            warp.scale**3,
        )
    m[4, 4] = upper.scale * lower.scale
    m[7, [4, 7]] = upper.bend * lower.scale, upper.scale**2 * lower.scale
    m[8, [4, 8]] = lower.bend * upper.scale, lower.scale**2 * upper.scale
    return m


def to_plain(weights: Array, template: Array) -> tuple[Warp, Warp]:
    """Give the warps that bring a field to the plain scale of a template.

    Parameters
    ----------
    weights
        Shape (m, 10), the field.
    template
        Shape (m, 10), the field whose columns set the scale.
    """
    return _to_plain(weights, template, 0), _to_plain(weights, template, 1)


def _to_plain(weights: Array, template: Array, trim: int) -> Warp:
    column = weights[:, _COLUMN[trim]]
    square = float(column @ column)
    if square == 0.0:
        return Warp(1.0)
    scale = float(column @ template[:, _COLUMN[trim]]) / square
    along = float(column @ weights[:, _BEND[trim]]) / square
    third = float(column @ weights[:, _THIRD[trim]]) / square
    bend = -(scale**2) * along
    return Warp(scale, bend, -(scale**3 * third + 3.0 * scale * bend * along))


def own_bend(weights: Array, trim: int) -> float:
    """Give the curvature along the column over the column: how a trim's effect changes per travel."""
    column = weights[:, _COLUMN[trim]]
    square = float(column @ column)
    return float(column @ weights[:, _BEND[trim]]) / square if square > 0.0 else 0.0
