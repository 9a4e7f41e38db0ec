"""The slow, obvious crest frame: Fourier coefficients of an exact number of periods.

The referee of the project's own fit, which needs no whole number of periods.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

ORDERS = 15
"""Highest order taken, K."""


def harmonics(
    volts: NDArray[np.float64], periods: int = 1, orders: int = ORDERS
) -> NDArray[np.complex128]:
    """Give X_0 .. X_K of ``x = Re sum X_k exp(j k w t)`` from samples over whole periods.

    Parameters
    ----------
    volts
        Shape (n,), evenly over `periods` periods, the last sample one interval before their end.
    periods
        How many.
    orders
        K.
    """
    spectrum = np.fft.rfft(volts) / len(volts)
    taken = 2.0 * spectrum[: orders * periods + 1 : periods]
    taken[0] /= 2.0
    return taken


def crest_parts(
    volts: NDArray[np.float64], periods: int = 1, orders: int = ORDERS
) -> NDArray[np.float64]:
    """Give ``[c_2, s_2, .., c_K, s_K]``, shape (2(K-1),), with the time origin at the crest.

    ``Z_k = X_k exp(-j k arg X_1) / |X_1| = c_k - j s_k``.
    """
    x = harmonics(volts, periods, orders)
    k = np.arange(2, orders + 1)
    z = x[2:] * np.exp(-1j * k * np.angle(x[1])) / np.abs(x[1])
    return np.column_stack([z.real, -z.imag]).ravel()


def thd(parts: NDArray[np.float64]) -> float:
    """Total harmonic distortion relative to the fundamental: the length of the parts."""
    return float(np.linalg.norm(parts))
