"""The response of a unit to its two trims as a smooth field of parts over the trims' positions.

Positions are shares of the travel, plus clockwise, upper first. Within reach of an anchor `a` every
crest and skew part is a polynomial of third degree in the position,

    f_k(x) = phi(x - a) . w_k,    phi = 1, u, l, u^2/2, ul, l^2/2, u^3/6, u^2 l/2, u l^2/2, l^3/6,

so `w_k` holds the value, the two columns, and their curvature at the anchor. A belief about the field
is normal: a mean and a covariance of `w_k` for each part.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

FEATURES: Final = 10
VALUE: Final = 0
UPPER: Final = 1
LOWER: Final = 2


def features(at: Array) -> Array:
    """Give the features of positions relative to the anchor.

    Parameters
    ----------
    at
        Shape (.., 2), shares of the travel.

    Returns
    -------
    Array
        Shape (.., 10).
    """
    u, v = at[..., 0], at[..., 1]
    phi = np.empty((*at.shape[:-1], FEATURES))
    phi[..., 0] = 1.0
    phi[..., 1] = u
    phi[..., 2] = v
    phi[..., 3] = 0.5 * u * u
    phi[..., 4] = u * v
    phi[..., 5] = 0.5 * v * v
    phi[..., 6] = u * phi[..., 3] / 3.0
    phi[..., 7] = v * phi[..., 3]
    phi[..., 8] = u * phi[..., 5]
    phi[..., 9] = v * phi[..., 5] / 3.0
    return phi


def slopes(at: Array) -> Array:
    """Give the derivatives of `features` by the upper and by the lower position.

    Returns
    -------
    Array
        Shape (.., 2, 10).
    """
    u, v = at[..., 0], at[..., 1]
    d = np.zeros((*at.shape[:-1], 2, FEATURES))
    d[..., 0, 1] = 1.0
    d[..., 0, 3] = u
    d[..., 0, 4] = v
    d[..., 0, 6] = 0.5 * u * u
    d[..., 0, 7] = u * v
    d[..., 0, 8] = 0.5 * v * v
    d[..., 1, 2] = 1.0
    d[..., 1, 4] = u
    d[..., 1, 5] = v
    d[..., 1, 7] = d[..., 0, 6]
    d[..., 1, 8] = d[..., 0, 7]
    d[..., 1, 9] = d[..., 0, 8]
    return d


@dataclass(frozen=True, slots=True, eq=False)
class FieldBelief:
    """A normal belief about the field around an anchor."""

    anchor: Array
    """Shape (2,), position at which `mean` holds value, columns and curvature."""
    mean: Array
    """Shape (m, 10), weights for each part."""
    covariance: Array
    """Shape (m, 10, 10), covariance of each part's weights."""

    def at(self, x: Array) -> Array:
        """Give the mean of the parts at a position; shape (m,)."""
        return np.asarray(self.mean @ features(x - self.anchor))

    def columns(self, x: Array) -> Array:
        """Give the mean columns at a position, parts per travel; shape (2, m)."""
        return np.asarray(slopes(x - self.anchor) @ self.mean.T)

    def variance(self, x: Array) -> Array:
        """Give the variance of each part at a position; shape (m,)."""
        phi = features(x - self.anchor)
        return np.asarray(np.einsum("f,kfg,g->k", phi, self.covariance, phi))

    def moved_to(self, anchor: Array) -> FieldBelief:
        """Give the same belief with its weights taken at another anchor."""
        shift = shift_matrix(anchor - self.anchor)
        return FieldBelief(
            anchor=anchor.copy(),
            mean=self.mean @ shift.T,
            covariance=shift @ self.covariance @ shift.T,
        )


def derivative_weights(weights: Array) -> Array:
    """Give the weights of the field's derivatives by the upper and by the lower position.

    Parameters
    ----------
    weights
        Shape (m, 10).

    Returns
    -------
    Array
        Shape (2, m, 10), at the same anchor; third-degree terms are zero.
    """
    derived = np.zeros((2, *weights.shape))
    derived[0][:, :6] = weights[:, [1, 3, 4, 6, 7, 8]]
    derived[1][:, :6] = weights[:, [2, 4, 5, 7, 8, 9]]
    return derived


def shift_matrix(d: Array) -> Array:
    """Give the matrix that takes weights at an anchor to weights at the anchor moved by `d`."""
    u, v = float(d[0]), float(d[1])
    m = np.eye(FEATURES)
    m[0] = features(d)
    m[1:3] = slopes(d)
    m[3, [6, 7]] = u, v
    m[4, [7, 8]] = u, v
    m[5, [8, 9]] = u, v
    return m
