"""The drift of a kind: what its earlier warm-ups say of the next one."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from trimmer.guidance.warming import WarmDrift, Warming
from trimmer.measurement.reading import Reading
from trimmer.upkeep.channels import Array

KEPT: Final = 32
"""Moments of a course that are kept: closer at first, when more happens."""
ODD: Final = 3.0
"""Deviation over what is usual, root mean square over the parts, from which on a drift is odd."""
LEAST_SPREAD: Final = 1e-4
"""Spread over units below which none is believed, ratio."""


def course_of(minutes: Sequence[float], readings: Sequence[Reading]) -> Warming:
    """Thin a settled warm-up out to the moments that tell its course.

    Parameters
    ----------
    minutes
        Minutes since switch-on, ascending.
    readings
        As many readings.

    Raises
    ------
    ValueError
        The lengths differ or there are fewer than two.
    """
    if len(minutes) != len(readings) or len(readings) < 2:
        raise ValueError("a course needs two readings, and a time for each")
    size = min(reading.parts.size for reading in readings)
    since = np.asarray(minutes, dtype=np.float64)
    wanted = np.linspace(0.0, 1.0, KEPT) ** 2 * (since[-1] - since[0]) + since[0]
    rows = np.unique(np.searchsorted(since, wanted - 1e-9).clip(0, len(since) - 1))
    groups = np.split(np.arange(len(since)), rows[1:])
    parts = [np.mean([readings[i].parts[:size] for i in group], axis=0) for group in groups]
    return Warming(np.array([since[group].mean() for group in groups]), np.array(parts))


def course_document(course: Warming) -> dict[str, Any]:
    """Give a JSON-able document."""
    return {"minutes": course.minutes.tolist(), "parts": course.parts.tolist()}


def course_from(document: Mapping[str, Any]) -> Warming:
    """Read it back; raises ValueError where it is not such a document."""
    minutes = np.array(document["minutes"], dtype=np.float64)
    parts = np.array(document["parts"], dtype=np.float64)
    if minutes.ndim != 1 or parts.ndim != 2 or len(minutes) != len(parts):
        raise ValueError("a course of parts needs a row for each minute")
    return Warming(minutes, parts)


@dataclass(frozen=True, slots=True, eq=False)
class Usual:
    """A warm-up held against the earlier ones of its kind."""

    usual: bool
    """Whether it drifted as they did."""
    deviation: float
    """How far it was off, in what is usual; about 1 for a usual unit."""
    warm_ups: int
    """Earlier warm-ups."""


def compared(course: Warming, earlier: Sequence[Warming]) -> Usual | None:
    """Hold a warm-up against earlier ones of its kind; None where none covers it."""
    start = float(course.minutes[0])
    drift = WarmDrift.from_warm_ups(list(earlier), start)
    if drift is None:
        return None
    size = min(drift.change.size, course.parts.shape[1])
    own = course.parts[-1, :size] - course.parts[0, :size]
    deviation = _off(own - drift.change[:size], drift.sigma[:size])
    return Usual(deviation <= ODD, deviation, drift.warm_ups)


def _off(off: Array, sigma: Array) -> float:
    return float(np.sqrt(np.mean((off / np.hypot(sigma, LEAST_SPREAD)) ** 2)))
