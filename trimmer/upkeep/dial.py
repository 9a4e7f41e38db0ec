"""The way over the frequency range: where the dial should go next, and whether it stands still there."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Final

import numpy as np

FROM_HZ: Final = 47.0
"""Lower end of the range of such units (common practice, no source)."""
TO_HZ: Final = 18_000.0
"""Upper end of the range of such units (common practice, no source)."""
POINTS: Final = 7
"""Points of a survey."""
NEAR: Final = 0.12
"""A point counts as reached this near to it, relative: dials are coarse."""
NEAR_STEP: Final = 0.3
"""And no nearer to the next point than this share of the step."""
STILL_FRAMES: Final = 3
"""Frames that must agree."""
STILL_S: Final = 0.4
"""Time over which they must."""
STILL: Final = 0.002
"""Change of the frequency that counts as none, relative: such oscillators wander a little."""


def targets(low_hz: float, high_hz: float, count: int) -> list[float]:
    """Give the points of a survey, even on a log scale, rounded to three digits.

    Raises
    ------
    ValueError
        The range is empty or there is no point.
    """
    if not 0.0 < low_hz <= high_hz < math.inf:
        raise ValueError(f"a range goes from low to high, not from {low_hz:g} to {high_hz:g} Hz")
    if count < 1 or (count > 1 and low_hz == high_hz):
        raise ValueError(f"{count} points do not fit between {low_hz:g} and {high_hz:g} Hz")
    if count == 1:
        return [math.sqrt(low_hz * high_hz)]
    return [float(f"{hertz:.3g}") for hertz in np.geomspace(low_hz, high_hz, count)]


class Way:
    """Which points of a survey are still to be taken, and in which order to ask for them.

    The dial is led from the end that is nearer to where it stands to the other; a point that is passed
    and held out of turn is taken too.

    Parameters
    ----------
    points_hz
        Ascending.
    """

    def __init__(self, points_hz: Sequence[float]) -> None:
        self._left = list(points_hz)
        self._down: bool | None = None
        steps = np.diff(np.log(points_hz))
        self._near = min([NEAR, *(NEAR_STEP * float(step) for step in steps)])

    @property
    def left(self) -> int:
        """How many points are still to be taken."""
        return len(self._left)

    def next_hz(self, now_hz: float | None = None) -> float:
        """Give the point to go to.

        Parameters
        ----------
        now_hz
            Where the dial stands at first, if known: decides from which end to go.
        """
        if self._down is None and now_hz is not None:
            from_low = abs(math.log(now_hz / self._left[0]))
            self._down = abs(math.log(now_hz / self._left[-1])) < from_low
        return self._left[-1] if self._down else self._left[0]

    def at(self, hertz: float) -> float | None:
        """Give the point that a frequency is near to and that is still to be taken."""
        if not self._left or not hertz > 0.0:
            return None
        nearest = min(self._left, key=lambda point: abs(math.log(hertz / point)))
        return nearest if abs(math.log(hertz / nearest)) <= self._near else None

    def taken(self, point_hz: float) -> None:
        """Take a point off the list."""
        self._left.remove(point_hz)


class Stillness:
    """Whether the dial stands still, from the frequencies of the last frames."""

    def __init__(self) -> None:
        self._seen: list[tuple[float, float, float]] = []

    def moved(self, time_s: float, hertz: float, sigma_hz: float) -> bool:
        """Take a frequency with its standard uncertainty; False once it has stood still."""
        self._seen.append((time_s, hertz, sigma_hz))
        while len(self._seen) > STILL_FRAMES and time_s - self._seen[1][0] >= STILL_S:
            self._seen.pop(0)
        if len(self._seen) < STILL_FRAMES or time_s - self._seen[0][0] < STILL_S:
            return True
        values = [hertz for _, hertz, _ in self._seen]
        slack = max(STILL * hertz, 5.0 * max(sigma for *_, sigma in self._seen))
        return max(values) - min(values) > slack

    def forget(self) -> None:
        """Begin anew."""
        self._seen.clear()
