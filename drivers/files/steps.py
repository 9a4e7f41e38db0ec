"""The size of a digitiser's code, found from the values: the greatest step that they all share."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

SAMPLE = 65536
"""Values looked at."""
FEWEST = 12
"""Different values needed before a common step is evidence of codes."""
MOST_CODES = 2**24
"""More codes than this over the span are print, not a digitiser."""
TOLERANCE = 0.12
"""Largest distance of a value from its code, in codes."""


def common_step(values: NDArray[np.float64]) -> float | None:
    """Find the step that all values are whole multiples apart by.

    Parameters
    ----------
    values
        Shape (N,); NaN is passed over.

    Returns
    -------
    float or None
        The step, in the unit of the values; None where none is evident.

    Notes
    -----
    Printing rounds each value, so that equal codes stay equal but steps between codes vary by one
    unit of the last digit. The smallest step between different values, or a half or a third of
    it, is taken as a first guess, and refined by least squares over all values: an error in it
    adds up over the span, and values that are no multiples do not come out near whole numbers.
    """
    finite = values[np.isfinite(values)][:SAMPLE]
    levels = np.unique(finite)
    if levels.size < FEWEST or levels.size > 0.9 * finite.size:
        return None
    steps = np.diff(levels)
    for guess in (1.0, 0.5, 1.0 / 3.0):
        if step := _refined(levels, float(steps.min()) * guess):
            return step
    return None


def _refined(levels: NDArray[np.float64], step: float) -> float | None:
    """Refine a guess over longer and longer spans, each short enough for its count to be sure."""
    span = float(levels[-1] - levels[0])
    if step <= 0.0 or span / step > MOST_CODES:
        return None
    away = levels - levels[0]
    reach = 4.0 * step
    while True:
        near = away[away <= reach]
        if near.size > 1:
            counts = np.round(near / step)
            weight = float(np.dot(counts, counts))
            if weight == 0.0:
                return None
            step = float(np.dot(counts, near)) / weight
        if reach >= span:
            break
        reach *= 2.0
    counts = np.round(away / step)
    if np.abs(away / step - counts).max() > TOLERANCE or np.any(np.diff(counts) < 1):
        return None
    return step
