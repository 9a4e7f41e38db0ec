"""From a source to readings: one frame, or as many as a wanted uncertainty needs."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from drivers import CaptureRequest, UnusableCapture, Waveform, WaveformSource
from trimmer.measurement import MeasurementError, Reading, combine, frames_needed, measure
from trimmer.measurement.reading import Digitiser, Flag
from trimmer.measurement.reference import Reference

MOST_FRAMES = 400
"""Frames after which averaging is given up: 400 frames gain a factor of 20."""


@dataclass(frozen=True, slots=True)
class Wanted:
    """What is asked of each reading."""

    orders: int = 15
    """K, the highest order reported."""
    frames: int = 1
    """Frames combined into a still reading."""
    until_sigma: float | None = None
    """Standard uncertainty of THD to reach, ratio; None takes `frames` and no more."""
    mains_hz: float | None = None
    """Mains frequency where known; None looks for 50 and 60 Hz."""
    reference: Reference | None = None
    """A clean source seen through the same input."""


@dataclass(frozen=True, slots=True, eq=False)
class Taken:
    """A reading with the last capture behind it."""

    reading: Reading
    """The reading."""
    waveform: Waveform
    """The last capture it was made from."""


def digitiser_of(waveform: Waveform) -> Digitiser:
    """Tell the measurement what the source knows of its digitiser."""
    return Digitiser(
        bits=waveform.bits,
        code=waveform.code,
        low_rail=waveform.low_rail,
        high_rail=waveform.high_rail,
        clipped=waveform.clipped,
        ac_coupled=waveform.coupling == "AC",
        has_volts=waveform.has_volts,
        averaged=waveform.averaged,
    )


class Intake:
    """Readings from one source. Owned by the thread that owns the source."""

    def __init__(self, source: WaveformSource, wanted: Wanted) -> None:
        self.source = source
        self.wanted = wanted
        self._fundamental_hz: float | None = None
        self._last: NDArray[np.float64] | None = None

    def frame(self, *, timeout_s: float = 5.0, fresh_after: float | None = None) -> Taken:
        """Take one capture and read it.

        Raises
        ------
        SourceError
            The source failed.
        MeasurementError
            The capture cannot be used.
        """
        waveform = self.source.capture(
            CaptureRequest(
                timeout_s=timeout_s,
                fundamental_hz=self._fundamental_hz,
                fresh_after=fresh_after,
            )
        )
        return Taken(self.read(waveform), waveform)

    def read(self, waveform: Waveform) -> Reading:
        """Read one capture; the fundamental found is the hint for the next."""
        previous, self._last = self._last, waveform.samples
        try:
            reading = measure(
                waveform.samples,
                waveform.interval_s,
                orders=self.wanted.orders,
                digitiser=digitiser_of(waveform),
                hint_hz=self._fundamental_hz,
                times_s=waveform.times_s,
                mains_hz=self.wanted.mains_hz,
                previous_samples=previous,
                reference=self.wanted.reference,
            )
        except MeasurementError:
            self._fundamental_hz = None
            raise
        self._fundamental_hz = reading.fundamental_hz
        return reading

    def still(
        self,
        *,
        frames: int | None = None,
        sigma: float | None = None,
        fresh_after: float | None = None,
        stop: Callable[[], bool] = lambda: False,
    ) -> Taken:
        """Combine captures of a unit that nobody touches.

        Parameters
        ----------
        frames
            At least so many captures; None takes the number wanted.
        sigma
            Standard uncertainty of THD to reach (ratio); None takes the one wanted, if any.
        fresh_after
            `time.monotonic()` seconds before which nothing may have been sampled.
        stop
            Asked between captures; True gives what was taken so far.

        Notes
        -----
        A stale frame (same samples as the one before) is taken again, not counted.
        """
        least = max(1, frames if frames is not None else self.wanted.frames)
        goal = sigma if sigma is not None else self.wanted.until_sigma
        if self.source.info.finite or self.source.info.paced_by_person:
            taken_once = self.frame(fresh_after=fresh_after)
            return Taken(_owning_up(taken_once.reading, goal), taken_once.waveform)
        taken = [self.frame(fresh_after=fresh_after)]
        whole = taken[0].reading
        stale = 0
        while not stop():
            enough = len(taken) >= least and (goal is None or _averaged_down(whole, goal))
            if enough or len(taken) >= MOST_FRAMES:
                break
            following = self.frame()
            if any(flag.code == "stale" for flag in following.reading.flags) and stale < 5:
                stale += 1
                time.sleep(0.02)
                continue
            taken.append(following)
            if len(taken) >= least and (len(taken) < 16 or len(taken) % 8 == 0):
                whole = combine([item.reading for item in taken])
        if len(taken) > 1:
            whole = combine([item.reading for item in taken])
        return Taken(_owning_up(whole, goal), taken[-1].waveform)


def _averaged_down(reading: Reading, goal: float) -> bool:
    """Say whether more captures would not help towards a wanted uncertainty of THD.

    What is the same in every capture (the digitiser's non-linearity) does not average out; where that
    alone is more than what is wanted, the random part is still brought down to it.
    """
    return frames_needed(reading, goal) == 0 or reading.random_thd_sigma <= goal


def _owning_up(reading: Reading, goal: float | None) -> Reading:
    """Flag a wanted uncertainty that was not reached."""
    if goal is None or reading.thd.sigma <= goal:
        return reading
    flag = Flag(
        "short-of-sigma",
        f"THD is known to {100 * reading.thd.sigma:.4f} points, not to the {100 * goal:.4f} wanted: "
        f"{100 * reading.random_thd_sigma:.4f} points after {reading.frames} captures are noise, "
        "the rest is the digitiser's own error.",
        "Use more of its range or more bits, or store a reference of a clean source.",
    )
    return replace(reading, flags=(*reading.flags, flag))


def picture(waveform: Waveform, reading: Reading, most: int = 4000) -> NDArray[np.float64]:
    """Give the samples a screen can draw: a few periods, at most `most` samples, as taken."""
    period = 1.0 / (reading.fundamental_hz * waveform.interval_s)
    wanted = int(min(waveform.samples.size, max(most, math.ceil(2.0 * period))))
    return waveform.samples[:wanted]


def signal_at_fault(error: Exception) -> bool:
    """Say whether the signal (exit status 3) rather than the source (4) is the matter."""
    return isinstance(error, MeasurementError | UnusableCapture)
