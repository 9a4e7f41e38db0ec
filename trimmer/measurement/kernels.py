"""Closed forms for sums over a record: what two sampled cosines have in common.

Time is counted in samples from the middle of the record, ``t = n - (N - 1) / 2``. Then every sum
of a product of one even and one odd function vanishes, and all others follow from the Dirichlet
kernel and its derivatives::

    D(w)   = sum_n cos(w t)       = sin(N w / 2) / sin(w / 2)
    D'(w)  = -sum_n t sin(w t)
    D''(w) = -sum_n t^2 cos(w t)

Multiplying ``D sin(w/2) = sin(N w / 2)`` out and differentiating twice gives both derivatives
without a series.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_TAYLOR_BELOW = 1e-3
"""Below this |N w| the closed forms cancel and the Taylor series is exact to double precision."""


def dirichlet(samples: int, w: Array) -> tuple[Array, Array, Array]:
    """Give the Dirichlet kernel and its first two derivatives.

    Parameters
    ----------
    samples
        N, number of samples.
    w
        Angular frequencies in radians per sample, any shape, below 2 pi in size.

    Returns
    -------
    tuple
        ``D``, ``D'``, ``D''``, each of the shape of `w`.
    """
    near = np.abs(w) * samples < _TAYLOR_BELOW
    if not near.any():
        return _closed(float(samples), w)
    kernel, slope, curve = _closed(float(samples), np.where(near, 1.0, w))
    taylor = _taylor(float(samples), w)
    return (
        np.where(near, taylor[0], kernel),
        np.where(near, taylor[1], slope),
        np.where(near, taylor[2], curve),
    )


def dirichlet_kernel(samples: int, w: Array) -> Array:
    """Give the Dirichlet kernel alone, any shape of `w`."""
    half = 0.5 * w
    near = np.abs(w) * samples < _TAYLOR_BELOW
    if not near.any():
        kernel: Array = np.sin(samples * half) / np.sin(half)
        return kernel
    kernel = np.sin(samples * half) / np.sin(np.where(near, 1.0, half))
    return np.where(near, samples - 0.5 * _second(float(samples)) * w * w, kernel)


def multiples(samples: int, w: float, most: int) -> tuple[Array, Array, Array]:
    """Give the kernels at ``0, w, 2 w, .., most w``, each of shape (most + 1,); ``w`` not near 0."""
    kernel, slope, curve = (np.empty(most + 1) for _ in range(3))
    kernel[0], slope[0], curve[0] = samples, 0.0, -_second(float(samples))
    kernel[1:], slope[1:], curve[1:] = _closed(float(samples), w * np.arange(1.0, most + 1.0))
    return kernel, slope, curve


def _closed(count: float, w: Array) -> tuple[Array, Array, Array]:
    half = 0.5 * w
    over_sine = 1.0 / np.sin(half)
    cotangent = np.cos(half) * over_sine
    angle = count * half
    kernel = np.sin(angle) * over_sine
    slope = (0.5 * count) * np.cos(angle) * over_sine - 0.5 * kernel * cotangent
    curve = 0.25 * (1.0 - count * count) * kernel - slope * cotangent
    return kernel, slope, curve


def _second(count: float) -> float:
    """Sum of ``t^2``."""
    return count * (count * count - 1.0) / 12.0


def _taylor(count: float, w: Array) -> tuple[Array, Array, Array]:
    second = _second(count)
    fourth = second * (3.0 * count * count - 7.0) / 20.0
    return (
        count - 0.5 * second * w * w,
        -second * w + fourth * w**3 / 6.0,
        -second + 0.5 * fourth * w * w,
    )
