"""One period for the eye: the fitted shape, and the samples folded over it."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from trimmer.measurement.figures import shape_at
from trimmer.measurement.kernels import Array
from trimmer.measurement.reading import Reading


def phases(points: int) -> Array:
    """Give `points` phases over one period from the positive crest, radians, shape (points,)."""
    if points < 1:
        raise ValueError("a picture needs at least one point")
    grid: Array = np.arange(float(points)) * (2.0 * math.pi / points)
    return grid


def shape_of(reading: Reading, points: int) -> tuple[Array, Array]:
    """Give the fitted shape over one period.

    Returns
    -------
    tuple
        Phase from the positive crest (radians, shape (points,)), and the shape in units of the
        fundamental's peak, offset left out; the ideal sine is ``cos(theta)``.
    """
    theta = phases(points)
    return theta, shape_at(reading.parts, theta)


def fold(
    samples: ArrayLike, interval_s: float, reading: Reading, points: int
) -> tuple[Array, Array]:
    """Fold measured samples over one period: their mean in each of `points` phase bins.

    Parameters
    ----------
    samples
        Shape (N,), beginning at the first sample of the frame that was read last.
    interval_s
        Seconds between samples.
    reading
        The reading of that frame (it holds frequency, phase, offset and amplitude).
    points
        Phase bins over the period.

    Returns
    -------
    tuple
        Phase of each bin's centre (radians from the positive crest, shape (points,)), and the mean
        of the samples in it in units of the fundamental's peak, offset left out; NaN where no
        sample fell.
    """
    theta = phases(points)
    values = np.asarray(samples, dtype=np.float64)
    turns = reading.phase / (2.0 * math.pi) + reading.fundamental_hz * interval_s * np.arange(
        values.size
    )
    bins = np.floor(points * turns + 0.5).astype(np.int64) % points
    held = np.bincount(bins, minlength=points).astype(np.float64)
    total = np.bincount(bins, weights=values - reading.offset, minlength=points)
    mean = np.full(points, np.nan)
    np.divide(total, held * reading.amplitude, out=mean, where=held > 0.0)
    return theta, mean
