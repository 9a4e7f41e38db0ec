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
    count = float(samples)
    near = np.abs(w) * count < _TAYLOR_BELOW
    safe = np.where(near, 1.0, w)
    sine, cosine = np.sin(0.5 * safe), np.cos(0.5 * safe)
    angle = 0.5 * count * safe
    kernel = np.sin(angle) / sine
    slope = (0.5 * count * np.cos(angle) - 0.5 * kernel * cosine) / sine
    curve = 0.25 * (1.0 - count * count) * kernel - slope * cosine / sine
    if near.any():
        second = count * (count * count - 1.0) / 12.0
        fourth = second * (3.0 * count * count - 7.0) / 20.0
        kernel = np.where(near, count - 0.5 * second * w * w, kernel)
        slope = np.where(near, -second * w + fourth * w**3 / 6.0, slope)
        curve = np.where(near, -second + 0.5 * fourth * w * w, curve)
    return kernel, slope, curve
