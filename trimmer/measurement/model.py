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

from trimmer.measurement.kernels import Array, dirichlet, dirichlet_kernel, multiples

Complex = NDArray[np.complex128]
Index = NDArray[np.intp]


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

    def kept(self, lines: Lines) -> slice | Index:
        """Places of `lines` among these: fewer orders, or only the first of the nuisance lines."""
        if lines.orders == self.orders:
            return slice(0, lines.count)
        nuisance = np.arange(self.orders + 1, self.orders + 1 + lines.fixed.size)
        return np.concatenate((np.arange(lines.orders + 1), nuisance))

    def multiples(self) -> Array:
        """Shape (count,), derivative of each line's frequency with respect to the fundamental's."""
        return np.concatenate((np.arange(self.orders + 1.0), np.zeros(self.fixed.size)))

    def frequencies(self, w: float) -> Array:
        """Shape (count,), each line's frequency for the fundamental `w`, radians per sample."""
        return np.concatenate((np.arange(self.orders + 1.0) * w, self.fixed))


@lru_cache(maxsize=32)
def _indices(orders: int) -> tuple[Index, Index, Index]:
    """Places, for orders 0..K, of ``|l - i|`` and ``l + i``, and of ``l - i`` counted from ``-K``."""
    k = np.arange(orders + 1)
    apart = k[:, None] - k[None, :]
    return np.abs(apart), k[:, None] + k[None, :], apart + orders


@dataclass(frozen=True, slots=True, eq=False)
class Normal:
    """Normal equations of a set of lines at one fundamental frequency."""

    gram: Array
    """Shape (2, L, L), sums of products of cosines, and of sines. The offset has no sine: its place
    holds a 1 on the diagonal, so that its amplitude comes out as 0."""
    slopes: tuple[Array, Array]
    """Shape (L, L) each, half of ``D'`` at ``w_l - w_i`` and at ``w_l + w_i``."""
    curves: tuple[Array, Array]
    """Shape (L, L) each, half of ``D''`` at ``w_l - w_i`` and at ``w_l + w_i``."""

    def with_derivative(self, k_cos: Array, k_sin: Array) -> tuple[Array, float]:
        """Give the products of ``d = sum t (-k_cos_i sin_i + k_sin_i cos_i)``, a model's derivative.

        From ``cos_l t sin_i = t [sin(w_i + w_l) + sin(w_i - w_l)] / 2`` and its like.

        Returns
        -------
        tuple
            With the cosines and the sines, shape (2, L); with itself.
        """
        both = np.array((k_cos, k_sin)).T
        near, far = (part @ both for part in self.slopes)
        products = np.empty((2, k_cos.size))
        np.subtract(far[:, 0], near[:, 0], out=products[0])
        np.add(far[:, 1], near[:, 1], out=products[1])
        np.negative(products[1], out=products[1])
        near, far = (part @ both for part in self.curves)
        itself = k_cos @ (far[:, 0] - near[:, 0]) - k_sin @ (far[:, 1] + near[:, 1])
        return products, float(itself)


def normal_equations(samples: int, lines: Lines, w: float) -> Normal:
    """Build the normal equations of `lines` at fundamental `w` (radians per sample) in closed form."""
    k = lines.orders
    kernel, slope, curve = multiples(samples, w, 2 * k)
    near, far, apart = _indices(k)
    half = 0.5 * kernel
    signed = np.empty(2 * k + 1)
    np.multiply(slope[: k + 1], 0.5, out=signed[k:])
    np.negative(signed[k + 1 :][::-1], out=signed[:k])
    curve = 0.5 * curve
    minus = (half.take(near), signed.take(apart), curve.take(near))
    plus = (half.take(far), (0.5 * slope).take(far), curve.take(far))
    if lines.fixed.size:
        minus, plus = _bordered(samples, lines, w, minus, plus)
    gram = np.empty((2, *minus[0].shape))
    np.add(minus[0], plus[0], out=gram[0])
    np.subtract(minus[0], plus[0], out=gram[1])
    gram[1, 0, 0] = 1.0
    return Normal(gram=gram, slopes=(minus[1], plus[1]), curves=(minus[2], plus[2]))


Halves = tuple[Array, Array, Array]


def _bordered(
    samples: int, lines: Lines, w: float, minus: Halves, plus: Halves
) -> tuple[Halves, Halves]:
    """Add the rows and columns of the nuisance lines to the halves of the kernels."""
    inner, w_i = lines.orders + 1, lines.frequencies(w)
    edges = np.stack((w_i[inner:, None] - w_i[None, :], w_i[inner:, None] + w_i[None, :]))
    rows = dirichlet(samples, edges)
    whole = []
    for part, shift in ((0, -1.0), (1, 1.0)):
        built = []
        # kernel and curvature are even in w, the slope is odd: that decides the mirrored edge
        for values, edge, mirror in zip((minus, plus)[part], rows, (1.0, shift, 1.0), strict=True):
            full = np.empty((w_i.size, w_i.size))
            full[:inner, :inner] = values
            np.multiply(edge[part], 0.5, out=full[inner:, :])
            np.multiply(full[inner:, :inner].T, mirror, out=full[:inner, inner:])
            built.append(full)
        whole.append((built[0], built[1], built[2]))
    return whole[0], whole[1]


def block_kernels(length: int, lines: Lines, w: float, orders: int) -> tuple[Array, Array]:
    """Give the Dirichlet kernel of one block at ``w_i - w_l`` and at ``w_i + w_l``.

    Returns
    -------
    tuple
        Two arrays of shape (orders, L): orders 1..`orders` against all `lines`.
    """
    rows = slice(1, orders + 1)
    near, far, _ = _indices(lines.orders)
    table, _, _ = multiples(length, w, 2 * lines.orders)
    minus, plus = table[near[rows]], table[far[rows]]
    if not lines.fixed.size:
        return minus, plus
    own = w * np.arange(1.0, orders + 1.0)[:, None]
    return (
        np.concatenate((minus, dirichlet_kernel(length, own - lines.fixed)), axis=1),
        np.concatenate((plus, dirichlet_kernel(length, own + lines.fixed)), axis=1),
    )


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
    apart = np.empty((2, w.size, w_i.shape[-1]))
    np.subtract(w[:, None], w_i, out=apart[0])
    np.add(w[:, None], w_i, out=apart[1])
    minus, plus = dirichlet_kernel(samples, apart)
    products = np.empty_like(apart)
    np.add(minus, plus, out=products[0])
    np.subtract(minus, plus, out=products[1])
    products *= 0.5
    return products
