"""What a survey over the frequency range found."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from numpy.typing import ArrayLike

from trimmer.measurement import Remainder, diagnose
from trimmer.measurement.reading import Interval, Reading
from trimmer.measurement.thd import NORMAL_95
from trimmer.upkeep.limits import Limits, Verdict, judged, overall, verdicts

USUAL_HZ: Final = 1000.0
"""The amplitude near this frequency is what flatness is relative to (common practice, no source)."""


@dataclass(frozen=True, slots=True, eq=False)
class Surveyed:
    """The result of a survey."""

    points: int
    """Points taken."""
    worst_thd: Interval | None
    """Largest THD; None where there is no point."""
    at_hz: float | None
    """Where it was read."""
    flatness: Interval | None
    """Largest change of the amplitude, ratio to that near 1 kHz; None where there are not two points."""
    verdict: Verdict
    """All limits and all points together; cannot-tell also where points are missing or no limit is set."""
    outside: tuple[str, ...]
    """Which limits are broken: thd, symmetry, offset, flatness."""
    remainder: tuple[Remainder, ...]
    """Causes at the highest frequency, told apart by how they grow with it."""


def surveyed(
    readings: Sequence[Reading],
    limits: Limits,
    *,
    complete: bool = True,
    reach: ArrayLike | None = None,
) -> Surveyed:
    """Sum a survey up.

    Parameters
    ----------
    readings
        One at each point, trims left alone.
    limits
        What the unit has to keep to.
    complete
        False where points were left out: then nothing is called inside.
    reach
        Shape (m, r), orthonormal basis of what the trims reach; None where it is not known.
    """
    if not readings:
        return Surveyed(0, None, None, None, "cannot-tell", (), ())
    ordered = sorted(readings, key=lambda reading: reading.fundamental_hz)
    worst = max(ordered, key=lambda reading: reading.thd.value)
    found = [verdicts(reading, limits) for reading in ordered]
    flat = flatness(ordered)
    if limits.flatness is not None:
        ends = (flat.low, flat.high) if flat else (0.0, math.inf)
        found.append({"flatness": judged(*ends, limits.flatness)})
    every: list[Verdict] = [verdict for each in found for verdict in each.values()]
    if not complete:
        every.append("cannot-tell")
    broken = {name for each in found for name, verdict in each.items() if verdict == "outside"}
    return Surveyed(
        points=len(ordered),
        worst_thd=worst.thd,
        at_hz=worst.fundamental_hz,
        flatness=flat,
        verdict=overall(every),
        outside=tuple(sorted(broken)),
        remainder=diagnose(ordered, reach=reach),
    )


def flatness(readings: Sequence[Reading]) -> Interval | None:
    """Give the largest change of the amplitude over the range; None where there are not two points.

    It is relative to the amplitude at the point nearest to 1 kHz (on a log scale).
    """
    if len(readings) < 2:
        return None
    usual = min(readings, key=lambda reading: abs(math.log(reading.fundamental_hz / USUAL_HZ)))
    far = max(readings, key=lambda reading: abs(reading.amplitude / usual.amplitude - 1.0))
    ratio = far.amplitude / usual.amplitude
    change = abs(ratio - 1.0)
    sigma = ratio * math.hypot(
        far.amplitude_sigma / far.amplitude, usual.amplitude_sigma / usual.amplitude
    )
    half = NORMAL_95 * sigma
    return Interval(change, sigma, max(change - half, 0.0), change + half)
