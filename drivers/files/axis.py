"""The interval between samples: from the time column, from what the file states, or from the person.

A time column is printed with so many digits. With too few, its steps are uneven although the
samples are not; the interval then comes from the two ends, whose rounding is shared by all steps:
it is known to one unit of the last digit printed over the number of steps.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.contract import UnusableCapture
from drivers.files.cells import Convention, last_place

EVEN = 1e-3
"""Steps whose points stay within this part of an interval from a straight line are even."""
SINGLE = 2.0**-24
"""Relative rounding of times that went through single precision."""
ASK = "State the time between samples with `--interval SECONDS`."


@dataclass(frozen=True, slots=True, eq=False)
class Axis:
    """The time axis of a capture."""

    interval_s: float
    """Seconds between samples."""
    times_s: NDArray[np.float64] | None
    """Shape (N,), the file's times from the first on, where they are fine enough to be checked."""
    notes: tuple[str, ...] = ()
    """Where the interval comes from."""


@dataclass(frozen=True, slots=True)
class Print:
    """How finely times are printed."""

    place: int
    """Decimal exponent of the last digit, the finest seen."""
    significant: int
    """Significant digits, the most seen."""

    def steps_s(self, times: NDArray[np.float64], factor: float) -> NDArray[np.float64]:
        """Give the step of the printed digits at each time, seconds.

        A fixed count of decimals gives the same step everywhere; a fixed count of significant
        digits gives coarser ones at larger times. The larger of the two readings covers both.
        """
        size = np.abs(times) / factor
        with np.errstate(divide="ignore"):
            magnitude = np.floor(np.log10(np.where(size > 0, size, 1e-300)))
        floating = 10.0 ** (magnitude + 1 - self.significant)
        return np.maximum(10.0**self.place, floating) * factor


def printed(cells: list[str], convention: Convention) -> Print:
    """Find how finely a sample of time cells is printed."""
    places = [place for cell in cells if (place := last_place(cell, convention))]
    if not places:
        return Print(-300, 17)
    return Print(min(place for place, _ in places), max(digits for _, digits in places))


def from_times(
    times: NDArray[np.float64],
    fineness: Print,
    factor: float,
    stated_s: float | None,
) -> Axis:
    """Settle the interval by a time column.

    Parameters
    ----------
    times
        Shape (N,), seconds.
    fineness
        How finely the column is printed.
    factor
        Seconds in the column's own unit.
    stated_s
        The interval that the header states.

    Raises
    ------
    UnusableCapture
        Times are missing, stand still or run backwards.
    """
    _check(times)
    steps = times.size - 1
    interval = float(times[-1] - times[0]) / steps
    straight = times[0] + interval * np.arange(times.size)
    off = np.abs(times - straight)
    slack = _slack(times, fineness, factor)
    doubt = float(max(slack[0], slack[-1])) / steps
    notes = []
    if off.max() <= EVEN * interval:
        kept: NDArray[np.float64] | None = times - times[0]
    elif np.all(off <= np.maximum(slack, max(slack[0], slack[-1]))):
        kept = None
        notes.append(
            f"times are printed with too few digits for steps of {interval:.4g} s: "
            "interval taken from the first and the last"
        )
    else:
        kept = times - times[0]
    if stated_s is not None and abs(stated_s - interval) <= max(2 * doubt, 1e-9 * interval):
        return Axis(stated_s, kept, tuple(notes))
    if stated_s is not None and abs(stated_s - interval) > 1e-3 * interval:
        notes.append(
            f"the header states an interval of {stated_s:.6g} s, the time column has "
            f"{interval:.6g} s: the time column was followed"
        )
    return Axis(_round_within(interval, doubt), kept, tuple(notes))


def _check(times: NDArray[np.float64]) -> None:
    if times.size < 2:
        raise UnusableCapture("the file holds a single row", "Save more points of the waveform.")
    if not np.all(np.isfinite(times)):
        row = int(np.flatnonzero(~np.isfinite(times))[0])
        raise UnusableCapture(
            f"the time of row {row + 1} of {times.size} is missing",
            "Save the capture again, or remove the time column and state `--interval SECONDS`.",
        )
    back = np.flatnonzero(np.diff(times) < 0)
    if back.size:
        raise UnusableCapture(
            f"time runs backwards after row {int(back[0]) + 1} of {times.size} "
            f"({back.size} times in all): several captures in one file",
            "Save one capture, one segment, to a file.",
        )
    if times[-1] <= times[0]:
        raise UnusableCapture("the time column stands still", ASK)


def _slack(times: NDArray[np.float64], fineness: Print, factor: float) -> NDArray[np.float64]:
    """Give how far printing and storing may move each time from a straight line, seconds."""
    steps = fineness.steps_s(times, factor)
    largest = float(np.abs(times).max())
    single = np.all(np.abs(times.astype(np.float32) - times) <= 0.51 * steps)
    stored = math.ulp(largest) + (2 * SINGLE * largest if single else 0.0)
    return np.asarray(1.001 * steps + stored)


def _round_within(value: float, doubt: float) -> float:
    """Give the shortest decimal within the doubt: samplers step by round numbers."""
    for digits in range(1, 16):
        short = float(f"{value:.{digits - 1}e}")
        if abs(short - value) <= doubt:
            return short
    return value
