"""What is asked of a record before it is fitted: numbers, an even time axis, not the last one again."""

from __future__ import annotations

import math
from hashlib import blake2b

import numpy as np
from numpy.typing import ArrayLike, NDArray

from trimmer.measurement.projection import Record
from trimmer.measurement.reading import Flag, MeasurementError

_LARGEST = 1e150
_SMALLEST = 1e-150
_SHORTEST_S, _LONGEST_S = 1e-15, 1e6
_FEWEST = 16
UNEVEN_SHARE = 0.1
"""An instant may be off the even grid by this share of a step."""


def as_samples(samples: ArrayLike) -> NDArray[np.float64]:
    """Take samples as a float64 vector, without a copy where they are one.

    Raises
    ------
    MeasurementError
        ``not-a-number``: they are no row of finite numbers.
    """
    try:
        values = np.asarray(samples)
        if values.dtype.kind not in "buif" or values.ndim != 1:
            raise TypeError
        values = values.astype(np.float64, copy=False)
    except (TypeError, ValueError):
        raise MeasurementError(
            "not-a-number",
            "The capture is not a single row of real numbers.",
            "Choose one channel with one value for each instant.",
        ) from None
    return values


def record_of(values: NDArray[np.float64], interval_s: float) -> Record:
    """Bring a capture to order: mean and scale taken out.

    Raises
    ------
    MeasurementError
        ``not-a-number``, ``uneven-time``, ``too-few-cycles`` or ``no-signal``.
    """
    if not (isinstance(interval_s, int | float | np.number) and _is_interval(float(interval_s))):
        raise MeasurementError(
            "uneven-time",
            f"The time between samples is given as {interval_s!r} s.",
            "Give the time between samples in seconds; `--interval` sets it for files.",
        )
    if values.size < _FEWEST:
        raise MeasurementError(
            "too-few-cycles",
            f"The capture has {values.size} samples; three cycles with three orders need more.",
            "Capture at least three cycles with at least 20 samples each.",
        )
    low, high = float(values.min()), float(values.max())
    if not (math.isfinite(low) and math.isfinite(high)):
        bad = int(values.size - np.count_nonzero(np.isfinite(values)))
        raise MeasurementError(
            "not-a-number",
            f"{bad} of {values.size} samples are not finite numbers.",
            "Lower the input or widen the range until no sample is out of range, then capture again.",
        )
    if max(-low, high) > _LARGEST:
        raise MeasurementError(
            "not-a-number",
            f"Samples reach {max(-low, high):.3g}, which no instrument delivers.",
            "Check the column and the scaling of the file.",
        )
    mean = float(values.mean())
    scale = max(high - mean, mean - low)
    if scale < _SMALLEST or scale <= 1e-13 * max(abs(high), abs(low)):
        raise no_signal(f"All {values.size} samples are {mean:.6g}.")
    return Record(values, low, high, mean, scale)


def _is_interval(interval_s: float) -> bool:
    return math.isfinite(interval_s) and _SHORTEST_S <= interval_s <= _LONGEST_S


def no_signal(seen: str) -> MeasurementError:
    """Refuse a record in which nothing repeats."""
    return MeasurementError(
        "no-signal",
        f"No periodic signal: {seen}",
        "Check the probe, the channel, the range and that the generator is on its sine output.",
    )


def check_times(times_s: ArrayLike | None, samples: int, interval_s: float) -> None:
    """Check a file's own time column for even steps.

    A column rounded to few digits is let pass: no instant is off by more than its last digit.

    Raises
    ------
    MeasurementError
        ``uneven-time``.
    """
    if times_s is None:
        return
    times = as_samples(times_s)
    if times.size != samples:
        raise _uneven(f"There are {times.size} instants for {samples} samples.")
    if samples < 2:
        return
    if not math.isfinite(float(times.min())) or not math.isfinite(float(times.max())):
        raise _uneven("The time column holds values that are not numbers.")
    step = float(times[-1] - times[0]) / (samples - 1)
    if not step > 0.0 or not math.isfinite(step):
        raise _uneven("Time does not run forward.")
    off = np.abs(times - (times[0] + step * np.arange(samples)))
    worst = float(off.max())
    digit = _last_digit(times, step)
    allowed = max(UNEVEN_SHARE * step, 1.05 * digit)  # half a digit there, half at the ends
    if worst > allowed:
        raise _uneven(
            f"Instant {int(off.argmax())} is {worst:.3g} s off an even grid of {step:.6g} s steps."
        )
    if abs(step - interval_s) > 1e-3 * interval_s + 2.0 * digit / samples:
        raise _uneven(f"The time column steps by {step:.6g} s, not by {interval_s:.6g} s.")


def _last_digit(times: NDArray[np.float64], step: float) -> float:
    """Find the decimal digit a time column was rounded to, where that is coarser than a step's tenth."""
    some = times[: min(times.size, 512)]
    for exponent in range(math.floor(math.log10(step)) + 1, math.floor(math.log10(step)) - 2, -1):
        digit = 10.0**exponent
        whole = some / digit
        if np.all(np.abs(whole - np.round(whole)) < 1e-6 * np.maximum(1.0, np.abs(whole) * 1e-6)):
            return digit
    return 0.0


def _uneven(seen: str) -> MeasurementError:
    return MeasurementError(
        "uneven-time",
        f"The time axis is uneven: {seen}",
        "Save the capture with a constant sample rate and without gaps, or give `--interval`.",
    )


def digest(samples: ArrayLike) -> bytes:
    """Give a short mark of a frame, by which the same frame is known again."""
    values = np.ascontiguousarray(np.asarray(samples, dtype=np.float64))
    return blake2b(values.view(np.uint8).data, digest_size=16).digest()


def stale_flag(values: NDArray[np.float64], previous: ArrayLike | bytes | None) -> Flag | None:
    """Flag a frame that is identical, sample for sample, to the last one."""
    if previous is None:
        return None
    if isinstance(previous, bytes):
        same = digest(values) == previous
    else:
        last = np.asarray(previous)
        same = last.shape == values.shape and bool(np.array_equal(values, last))
    if not same:
        return None
    return Flag(
        "stale",
        f"All {values.size} samples are the same as in the last capture.",
        "Check that the instrument is running and its trigger fires.",
    )
