"""What single causes do to the parts: time symmetry, bandwidth, slewing. Closed forms."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from trimmer.measurement.kernels import Array
from trimmer.measurement.model import Complex

SLOWEST = 2.0 / math.sqrt(4.0 + math.pi**2)
"""Slew rate, over the largest slope of the sine, below which nothing but a triangle is left."""


def time_symmetry(orders: int) -> Array:
    """Parts of a sine shaped from a triangle, for each unit of ``rise share - 1/2``.

    Only even skew: ``s_2k = (4 / pi) 8 k / (4 k^2 - 1)^2``, so ``s_2 = 1.132``. To first order the
    leaning triangle is the even one on a bent time axis; the bend is a triangle itself, times the
    slope of the sine.

    Returns
    -------
    Array
        Shape (2 (orders - 1),).
    """
    parts = np.zeros(2 * (orders - 1))
    for order in range(2, orders + 1, 2):
        parts[2 * order - 3] = (4.0 / math.pi) * 4.0 * order / (order**2 - 1.0) ** 2
    return parts


def bandwidth(orders: int) -> Array:
    """Parts of a shaper slowed by a capacitance at its shaped node, scaled to ``s_3 = -1``.

    The node lags by ``-R C (dy/dx)^2 dx/dt``; with the shaper's slope ``dy/dx`` a cosine and the
    triangle's slope a square wave in step with it, that is ``cos |cos|``, whose order k is in
    proportion to ``1 / (k (k^2 - 4))``. It grows in proportion to frequency.
    """
    parts = np.zeros(2 * (orders - 1))
    for order in range(3, orders + 1, 2):
        parts[2 * order - 3] = -15.0 / (order * (order**2 - 4.0))
    return parts


def slewing(ratio: float, orders: int) -> Array:
    """Parts of a sine that an ideal limiter of slope lets follow only so fast.

    Parameters
    ----------
    ratio
        Slew rate over ``2 pi f A``: 1 and more is no limit.
    orders
        K.

    Returns
    -------
    Array
        Shape (2 (orders - 1),). Once the slope ``-sin`` passes the limit the output leaves the
        sine on a straight line and comes back to it where they meet; below `SLOWEST` they never do
        and the output is a triangle.
    """
    if ratio >= 1.0:
        return np.zeros(2 * (orders - 1))
    return _slewing(round(max(ratio, SLOWEST), 6), orders).copy()


@lru_cache(maxsize=512)
def _slewing(ratio: float, orders: int) -> Array:
    leaves = math.asin(ratio)
    height = math.cos(leaves)
    back = _meets(ratio, leaves, height)
    k: Array = np.arange(1.0, orders + 1.0)
    # half a period from `leaves` on: a straight line, then the sine; the other half is its negative
    line = _line_integral(k, leaves, back, height, ratio)
    sine = _sine_integral(k, back, leaves + math.pi)
    x = np.where(k % 2.0 == 1.0, line + sine, 0.0)
    z = x * np.exp(-1j * k * np.angle(x[0])) / abs(x[0])
    parts = np.empty(2 * (orders - 1))
    parts[0::2], parts[1::2] = z.real[1:], -z.imag[1:]
    return parts


def _meets(ratio: float, leaves: float, height: float) -> float:
    """Find where the line meets the sine again, by bisection."""
    low, high = 0.5 * math.pi, math.pi + leaves
    low = max(low, leaves + 1e-9)
    for _ in range(60):
        middle = 0.5 * (low + high)
        above = height - ratio * (middle - leaves) > math.cos(middle)
        low, high = (middle, high) if above else (low, middle)
    return 0.5 * (low + high)


def _line_integral(k: Array, start: float, stop: float, height: float, slope: float) -> Complex:
    """``integral (height - slope (t - start)) exp(-j k t) dt``."""

    def antiderivative(t: float) -> Complex:
        value = height - slope * (t - start)
        result: Complex = np.exp(-1j * k * t) * (1j * value / k - slope / k**2)
        return result

    return antiderivative(stop) - antiderivative(start)


def _sine_integral(k: Array, start: float, stop: float) -> Complex:
    """``integral cos(t) exp(-j k t) dt``."""
    total = np.zeros(k.size, dtype=np.complex128)
    for shift in (1.0, -1.0):
        n = k + shift
        safe = np.where(n == 0.0, 1.0, n)
        waves = 1j * (np.exp(-1j * safe * stop) - np.exp(-1j * safe * start)) / safe
        total += 0.5 * np.where(n == 0.0, stop - start, waves)
    return total
