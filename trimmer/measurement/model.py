"""The lines of the signal model and their exact normal equations.

The model of a record is a sum of lines ``a_i cos(w_i t) + b_i sin(w_i t)`` with
``w_i = multiple_i * w + fixed_i``: order 0 (the offset), orders 1..K of the fundamental, and
nuisance lines (hum) whose frequency does not move with the fundamental. The Gram matrix of the
basis falls apart into an even block (cosines) and an odd block (sines), because time is counted
from the middle of the record. Nothing of size N is ever built.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from trimmer.measurement.kernels import Array, dirichlet, multiples

Complex = NDArray[np.complex128]


@dataclass(frozen=True, slots=True, eq=False)
class Lines:
    """Which lines the model has: orders 0..K, then nuisance lines."""

    orders: int
    """K, the highest order of the fundamental in the model."""
    fixed: Array
    """Shape (H,), frequencies of nuisance lines, radians per sample."""

    @property
    def count(self) -> int:
        """Number of lines, the offset included."""
        return self.orders + 1 + self.fixed.size

    def kept(self, orders: int) -> NDArray[np.intp]:
        """Indices of the offset, the first `orders` orders, and the nuisance lines."""
        return np.concatenate((np.arange(orders + 1), np.arange(self.orders + 1, self.count)))

    def multiples(self) -> Array:
        """Shape (count,), derivative of each line's frequency with respect to the fundamental's."""
        return np.concatenate((np.arange(self.orders + 1.0), np.zeros(self.fixed.size)))

    def frequencies(self, w: float) -> Array:
        """Shape (count,), each line's frequency for the fundamental `w`, radians per sample."""
        return np.concatenate((np.arange(self.orders + 1.0) * w, self.fixed))


@lru_cache(maxsize=32)
def _indices(orders: int) -> tuple[NDArray[np.intp], NDArray[np.intp], Array]:
    """Give ``|l - i|``, ``l + i`` (the Toeplitz and the Hankel index) and the sign of ``l - i``."""
    k = np.arange(orders + 1)
    apart = k[:, None] - k[None, :]
    return np.abs(apart), k[:, None] + k[None, :], np.sign(apart).astype(np.float64)


@dataclass(frozen=True, slots=True, eq=False)
class Normal:
    """Normal equations of a set of lines at one fundamental frequency."""

    gram: Array
    """Shape (2, L, L), sums of products of cosines, and of sines. The offset has no sine: its place
    holds a 1 on the diagonal, so that its amplitude comes out as 0."""
    even_slope: Array
    """Shape (L, L), sums of ``cos_l * t sin_i``."""
    odd_slope: Array
    """Shape (L, L), sums of ``sin_l * t cos_i``."""
    sine_curve: Array
    """Shape (L, L), sums of ``t sin_i * t sin_j``."""
    cosine_curve: Array
    """Shape (L, L), sums of ``t cos_i * t cos_j``."""


def normal_equations(samples: int, lines: Lines, w: float) -> Normal:
    """Build the Gram matrices of `lines` at fundamental `w` (radians per sample) in closed form."""
    minus, plus = _kernels(samples, lines, w)
    (d_minus, s_minus, c_minus), (d_plus, s_plus, c_plus) = minus, plus
    gram = np.empty((2, *d_minus.shape))
    np.add(d_minus, d_plus, out=gram[0])
    np.subtract(d_minus, d_plus, out=gram[1])
    gram *= 0.5
    gram[1, 0, 0] = 1.0
    return Normal(
        gram=gram,
        # cos_l t sin_i = t [sin(w_i + w_l) + sin(w_i - w_l)] / 2; `s_minus` is taken at w_l - w_i
        even_slope=-0.5 * (s_plus - s_minus),
        odd_slope=-0.5 * (s_plus + s_minus),
        sine_curve=0.5 * (c_plus - c_minus),
        cosine_curve=-0.5 * (c_plus + c_minus),
    )


Kernels = tuple[Array, Array, Array]


def _kernels(samples: int, lines: Lines, w: float) -> tuple[Kernels, Kernels]:
    """Give the kernels at all ``w_l - w_i`` and ``w_l + w_i`` (row l, column i)."""
    k = lines.orders
    table = multiples(samples, w, 2 * k)
    near, far, sign = _indices(k)
    minus = (table[0][near], sign * table[1][near], table[2][near])
    plus = (table[0][far], table[1][far], table[2][far])
    if not lines.fixed.size:
        return minus, plus
    w_i = lines.frequencies(w)
    size = w_i.size
    whole = []
    for part, shift in ((minus, -1.0), (plus, 1.0)):
        edge = dirichlet(samples, w_i[k + 1 :, None] + shift * w_i[None, :])
        built = []
        # kernel and curvature are even in w, the slope is odd: that decides the mirrored edge
        for inner, rows, mirror in zip(part, edge, (1.0, shift, 1.0), strict=True):
            full = np.empty((size, size))
            full[: k + 1, : k + 1] = inner
            full[k + 1 :, :] = rows
            full[: k + 1, k + 1 :] = mirror * rows[:, : k + 1].T
            built.append(full)
        whole.append((built[0], built[1], built[2]))
    return whole[0], whole[1]


def cross_products(samples: int, w: Array, w_i: Array) -> Array:
    """Give the sums of products of cosines, and of sines, of two sets of lines.

    Parameters
    ----------
    samples
        N.
    w, w_i
        Shapes (A,) and (B,), or shapes that broadcast when `w` gets a last axis; radians per sample.

    Returns
    -------
    Array
        Shape (2, A, B).
    """
    minus, _, _ = dirichlet(samples, w[:, None] - w_i)
    plus, _, _ = dirichlet(samples, w[:, None] + w_i)
    products = np.empty((2, *minus.shape))
    np.add(minus, plus, out=products[0])
    np.subtract(minus, plus, out=products[1])
    products *= 0.5
    return products
