"""Harmonics of a shaped triangle, from the static curve of the shaper alone.

A shaper without memory turns a triangle `x` into `y(x)`. With the phase `theta` of the triangle a
straight function of `x` on each ramp, the coefficients follow by parts,

    Z_k = (1 / (pi)) int y cos(k theta) .. = (j / (k pi)) * closed integral of exp(-j k theta) dy,

so a table of (x, y) along the curve is enough: no sampling in time, no aliasing.
"""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import NDArray

ORDERS: Final = 15
Vector = NDArray[np.float64]


def coefficients(x: Vector, y: Vector, peak: float, rise_share: float) -> NDArray[np.complex128]:
    """Give the complex coefficients of orders 1 to `ORDERS`, crest of the triangle at phase 0.

    Parameters
    ----------
    x
        Shape (n,), values of the triangle, ascending from ``-peak`` to ``peak``.
    y
        Shape (n,), the shaper's output at `x`.
    peak
        Peak of the triangle.
    rise_share
        Share of the period spent rising.
    """
    down = 2.0 * np.pi * (1.0 - rise_share) * (1.0 - x / peak) / 2.0
    up = -2.0 * np.pi * rise_share * (1.0 - x / peak) / 2.0
    k = np.arange(1, ORDERS + 1)
    # Along the rise y goes from low to high, along the fall back again: both ramps share dy.
    turning = _segments(k, up) - _segments(k, down)
    return (turning @ np.diff(y)) / (1j * k * np.pi)


def _segments(k: NDArray[np.int_], theta: Vector) -> NDArray[np.complex128]:
    """Mean of exp(-j k theta) over each step of the table, theta straight within the step."""
    middle = 0.5 * (theta[1:] + theta[:-1])
    half = 0.5 * np.diff(theta)
    result: NDArray[np.complex128] = np.exp(-1j * np.outer(k, middle)) * np.sinc(
        np.outer(k, half) / np.pi
    )
    return result


def crest_frame(z: NDArray[np.complex128]) -> Vector:
    """Give ``c_2, s_2, c_3, s_3, ..`` of complex coefficients of orders 1 and up."""
    k = np.arange(1, z.size + 1)
    turned = z * np.exp(-1j * k * np.angle(z[0])) / np.abs(z[0])
    parts = np.empty(2 * (z.size - 1))
    parts[0::2] = turned[1:].real
    parts[1::2] = -turned[1:].imag
    return parts
