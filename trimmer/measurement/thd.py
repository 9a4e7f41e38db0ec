"""Total harmonic distortion and its 95 % interval.

The square of the measured length of the parts, over their variance, is a noncentral chi-square
with ``2 (K - 1)`` degrees of freedom; its noncentrality is the true THD squared over that variance.
So noise alone makes a THD, which is taken off, and the interval comes from the confidence belt of
that distribution, ordered by likelihood ratio: it is two-sided far from zero, becomes one-sided
near it by itself, and is never empty.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from trimmer.measurement.belt_table import FREEDOMS, LARGEST, LEAST, LENGTHS
from trimmer.measurement.kernels import Array
from trimmer.measurement.reading import Interval

NORMAL_95 = 1.959963984540054
"""Half width of the central 95 % of a standard normal."""


@dataclass(frozen=True, slots=True)
class Disturbance:
    """What makes a THD where there is none."""

    noise_power: float
    """Mean addition to THD squared by noise, spread evenly over the parts."""
    systematic: tuple[float, ...] = ()
    """Further variances of single parts that averaging does not lower (non-linearity)."""
    freedom: float = math.inf
    """Degrees of freedom behind the noise's own estimate."""


def thd_of(parts: Array, covariance: Array, disturbance: Disturbance) -> Interval:
    """Give THD, noise taken off, with its standard uncertainty and 95 % interval.

    Parameters
    ----------
    parts
        Shape (2(K-1),), crest and skew parts, ratios.
    covariance
        Shape (2(K-1), 2(K-1)), of all causes together.
    disturbance
        Noise and systematic causes.

    Returns
    -------
    Interval
        `sigma` is the half width of the interval over 1.96: far from zero the ordinary standard
        uncertainty, near zero a figure of the same meaning.
    """
    square = float(parts @ parts)
    value = math.sqrt(max(square - disturbance.noise_power, 0.0))
    each = disturbance.noise_power / parts.size
    variances = each + np.asarray(disturbance.systematic or (0.0,))
    if len(disturbance.systematic) == parts.size:
        trace, trace_2 = float(variances.sum()), float((variances**2).sum())
    else:
        trace, trace_2 = disturbance.noise_power, each * disturbance.noise_power
    if trace_2 <= 0.0 or trace <= 0.0:
        return Interval(value, 0.0, value, value)
    unit, freedom = trace_2 / trace, trace * trace / trace_2  # Welch-Satterthwaite
    low, high = belt(square / unit, freedom)
    middle = math.sqrt(max(square - trace, 0.0))
    stretch = _stretch(parts, covariance, middle, unit, trace_2, disturbance.freedom)
    root = math.sqrt(unit)
    high = max(middle + stretch * (high * root - middle), value)
    low = min(max(middle - stretch * (middle - low * root), 0.0), value) if low > 0.0 else 0.0
    return Interval(value, 0.5 * (high - low) / NORMAL_95, low, high)


def _stretch(
    parts: Array, covariance: Array, middle: float, unit: float, trace_2: float, freedom: float
) -> float:
    """Widen the belt by what acts along the parts only, and for a noise known from few samples.

    Near zero the direction of the parts is itself noise, so the variance along them counts by as
    much as the length stands above it.
    """
    square = float(parts @ parts)
    along = float(parts @ covariance @ parts) / square if square > 0.0 else unit
    spread = 2.0 * trace_2 + 4.0 * middle**2 * along
    stretch = math.sqrt(spread / (2.0 * trace_2 + 4.0 * middle**2 * unit))
    return stretch * student_95(freedom) / NORMAL_95


def student_95(freedom: float) -> float:
    """Half width of the central 95 % of Student's distribution (expansion in 1/freedom, 0.2 % from 8 on).

    Abramowitz, Stegun, *Handbook of Mathematical Functions*, 26.7.5.
    """
    x, n = NORMAL_95, max(freedom, 1.0)
    if not math.isfinite(n):
        return x
    first = (x**3 + x) / 4.0
    second = (5.0 * x**5 + 16.0 * x**3 + 3.0 * x) / 96.0
    third = (3.0 * x**7 + 19.0 * x**5 + 17.0 * x**3 - 15.0 * x) / 384.0
    return x + first / n + second / n**2 + third / n**3


@lru_cache(maxsize=1)
def _table() -> tuple[Array, Array, Array, Array]:
    freedoms, lengths = np.sqrt(np.array(FREEDOMS, dtype=float)), np.array(LENGTHS, dtype=float)
    return freedoms, lengths, np.array(LEAST), np.array(LARGEST)


@lru_cache(maxsize=64)
def _ends(freedom: float) -> tuple[Array, Array, Array]:
    """Give the tabulated lengths and both ends for one number of degrees of freedom."""
    freedoms, lengths, least, largest = _table()
    at = min(max(math.sqrt(freedom), freedoms[0]), freedoms[-1])
    i = min(int(np.searchsorted(freedoms, at, side="right")), freedoms.size - 1)
    share = (at - freedoms[i - 1]) / (freedoms[i] - freedoms[i - 1])
    low = (1.0 - share) * least[i - 1] + share * least[i]
    high = (1.0 - share) * largest[i - 1] + share * largest[i]
    return lengths, low, high


def belt(y: float, freedom: float) -> tuple[float, float]:
    """Give the 95 % interval of the length behind an observed noncentral chi-square `y`.

    Parameters
    ----------
    y
        Observed square over the variance of one part.
    freedom
        Degrees of freedom, 1 to 400 (beyond, those of 400 serve).

    Returns
    -------
    tuple
        Least and largest length, in standard deviations of one part.
    """
    lengths, least, largest = _ends(round(freedom, 3))
    root = math.sqrt(max(y, 0.0))
    high = _inverse(root, y, freedom, least, lengths)
    low = _inverse(root, y, freedom, largest, lengths)
    return low, high


def _inverse(root: float, y: float, freedom: float, ends: Array, lengths: Array) -> float:
    """Find the length whose end is at `root`; beyond the table its last offset shrinks as 1/length."""
    if root < ends[-1]:
        start = int(np.count_nonzero(ends <= 0.0)) - 1  # the last of several ends at 0 is the bound
        return float(np.interp(root, ends[max(start, 0) :], lengths[max(start, 0) :]))
    middle = math.sqrt(max(y - freedom + 1.0, 0.0))
    last = float(lengths[-1]) - math.sqrt(max(float(ends[-1]) ** 2 - freedom + 1.0, 0.0))
    sign = math.copysign(NORMAL_95, last)
    return middle + sign + (last - sign) * float(lengths[-1]) / max(middle, float(lengths[-1]))
