"""What of a reading follows the temperature: frequency, amplitude, crest and skew parts, by moments."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from trimmer.measurement.reading import Reading

Array = NDArray[np.float64]

DRIFT_LOG: Final = 0.01
"""Usual size of the drift of frequency and amplitude over a warm-up, relative."""
DRIFT_CREST: Final = 0.002
"""Usual size of the drift of the second and third crest part over a warm-up, ratio."""
DECAY: Final = 1.5
"""Power by which it falls with the order, as the trims' own effect does."""
SKEW_SHARE: Final = 0.15
"""Drift of a skew part over that of the crest part."""
GROUPS: Final = 4
"""Frequency, amplitude, crest parts and skew parts drift each by a size of their own."""


@dataclass(frozen=True, slots=True, eq=False)
class Channels:
    """Everything that drifts, at n moments, in C channels."""

    times_s: Array
    """Shape (n,), seconds since the first."""
    values: Array
    """Shape (n, C): log frequency, log amplitude, then the parts."""
    variance: Array
    """Shape (n, C), random variance of `values`."""
    usual: Array
    """Shape (C,), usual size of the drift."""
    group: NDArray[np.intp]
    """Shape (C,), which channels share a size of drift."""

    @property
    def parts(self) -> Array:
        """Shape (n, C-2), crest and skew parts alone."""
        return self.values[:, 2:]


def channels_of(times_s: Sequence[float], readings: Sequence[Reading]) -> Channels:
    """Stack readings of one warm-up over their common orders.

    Raises
    ------
    ValueError
        The lengths differ, there is no reading, or the times do not ascend.
    """
    if len(times_s) != len(readings) or not readings:
        raise ValueError("as many times as readings, and at least one")
    times = np.asarray(times_s, dtype=np.float64)
    if np.any(np.diff(times) < 0.0):
        raise ValueError("the times of a warm-up must ascend")
    orders = min(reading.orders for reading in readings)
    size = 2 * (orders - 1)
    values = np.array([_values(reading, size) for reading in readings])
    variance = np.array([_variances(reading, size) for reading in readings])
    variance = np.maximum(variance, 1e-24)
    return Channels(
        times_s=times - times[0],
        values=values,
        variance=variance * _scatter(times, values, variance),
        usual=usual_drift(orders),
        group=np.array([0, 1] + [2, 3] * (orders - 1)),
    )


def _values(reading: Reading, size: int) -> list[float]:
    return [np.log(reading.fundamental_hz), np.log(reading.amplitude), *reading.parts[:size]]


def _variances(reading: Reading, size: int) -> list[float]:
    relative = (
        reading.fundamental_sigma_hz / reading.fundamental_hz,
        reading.amplitude_sigma / reading.amplitude,
    )
    return [*np.square(relative), *np.diag(reading.random_covariance)[:size]]


def usual_drift(orders: int) -> Array:
    """Give the usual size of each channel's drift; shape (2 + 2(orders-1),)."""
    crest = DRIFT_CREST * np.minimum(1.0, 3.0 / np.arange(2, orders + 1)) ** DECAY
    parts = np.column_stack((crest, SKEW_SHARE * crest)).ravel()
    return np.concatenate(((DRIFT_LOG, DRIFT_LOG), parts))


def _scatter(times: Array, values: Array, variance: Array) -> Array:
    """Give the factor by which each channel scatters more than stated, at least 1; shape (C,).

    Each moment is held against the straight line through its two neighbours, which drift leaves
    alone; the median over the moments is blind to single jumps.
    """
    if len(times) < 5:
        return np.ones(values.shape[1])
    before, here, after = times[:-2], times[1:-1], times[2:]
    share = ((here - before) / np.maximum(after - before, 1e-12))[:, None]
    off = values[1:-1] - (1.0 - share) * values[:-2] - share * values[2:]
    stated = variance[1:-1] + (1.0 - share) ** 2 * variance[:-2] + share**2 * variance[2:]
    factor = np.median(off**2 / stated, axis=0) / 0.4549  # median of a chi-square of one degree
    return np.asarray(np.maximum(factor, 1.0))
