"""What a source of waveforms is: its captures, its description, its errors."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import datetime
from typing import Literal, Protocol, Self, runtime_checkable

import numpy as np
from numpy.typing import NDArray

Coupling = Literal["DC", "AC", "unknown"]

_CONTROL = dict.fromkeys((*range(32), *range(127, 160)), "�")


def clean(text: str, limit: int = 200) -> str:
    """Make text from outside safe to show: no control characters, bounded length.

    Parameters
    ----------
    text
        An identification, a file name, a column header, an exception's words.
    limit
        Characters kept; what is cut is marked by an ellipsis.
    """
    shown = text.strip().translate(_CONTROL)
    return shown if len(shown) <= limit else shown[: limit - 1] + "\N{HORIZONTAL ELLIPSIS}"


class SourceError(Exception):
    """A source could not do its part.

    Every leaf carries a `remedy`: one imperative sentence for the person at the bench. The
    message says what happened, with the numbers.
    """

    default_remedy = "Check the source and its connection, then try again."

    def __init__(self, message: str, remedy: str | None = None) -> None:
        super().__init__(message)
        self.remedy = remedy if remedy is not None else self.default_remedy


class SourceNotFound(SourceError):
    """There is no such device, file, folder or address."""

    default_remedy = "Check the name of the source; `trimmer sources` lists what answers."


class SourceLost(SourceError):
    """The link broke while in use: unplugged, reset, rebooted. Worth waiting for."""

    default_remedy = "Check the cable and that the instrument is on; the session goes on by itself."


class SourceTimeout(SourceError):
    """No complete answer within the stated time. Worth waiting for."""

    default_remedy = "Check that the trigger runs and the instrument is not waiting for a key."


class SourceBusy(SourceError):
    """Another program holds the device."""

    default_remedy = "Close the other program that uses this device, then try again."


class SourceRefused(SourceError):
    """The source answered, but not with what it must answer: error queue, wrong block, bad format."""

    default_remedy = "Check the dialect and the channel; `--dialect` and `--channel` decide them."


class UnusableCapture(SourceError):
    """The source delivered, but what it delivered is no plain waveform (peak detect, no numbers)."""

    default_remedy = "Save or set a plain sampled waveform: one value for each instant."


@dataclass(frozen=True, slots=True)
class SourceInfo:
    """What a source is, in words that are safe to show (already cleaned)."""

    name: str
    """The SOURCE word this was opened from."""
    identity: str
    """Who answers: an identification string, a file name, a device name."""
    dialect: str | None = None
    """The waveform dialect spoken, where there is one."""
    paced_by_person: bool = False
    """True where each capture is an act of the person (a watched folder): a new one means *moved*."""
    finite: bool = False
    """True where there is a last capture (a file)."""
    settings: dict[str, str] = field(default_factory=dict)
    """Range, rate, coupling and the like, for the log."""


@dataclass(frozen=True, slots=True)
class CaptureRequest:
    """What the session would like of the next capture. A source does what it can."""

    timeout_s: float = 5.0
    """Longest wait, always finite."""
    samples: int | None = None
    """Samples wanted; None leaves it to the source."""
    average: int = 1
    """Triggered frames the instrument may average, where that gives true bits."""
    fundamental_hz: float | None = None
    """The fundamental as last seen, for choosing record length and rate."""
    fresh_after: float | None = None
    """`time.monotonic()` seconds: nothing sampled before this instant may be returned."""


@dataclass(frozen=True, slots=True, eq=False)
class Waveform:
    """One capture: evenly sampled values and what is known of how they were digitised."""

    samples: NDArray[np.float64]
    """Shape (N,), volts where `has_volts`, else fractions of full scale. Read-only."""
    interval_s: float
    """Seconds between samples."""
    taken_at: datetime
    """When the capture was taken, with time zone."""
    source: str
    """Cleaned name of the source or file."""
    has_volts: bool = True
    """False where the scale of the values is not known in volts."""
    times_s: NDArray[np.float64] | None = None
    """Shape (N,), the file's own time column where it has one, for the check of even steps."""
    bits: int | None = None
    """Bits of the codes, where known."""
    code: float | None = None
    """Size of one code in the unit of `samples`, where known."""
    low_rail: float | None = None
    """Value of the lowest code, where known."""
    high_rail: float | None = None
    """Value of the highest code, where known."""
    clipped: int = 0
    """Samples the source itself marked as clipped or out of range."""
    coupling: Coupling = "unknown"
    """How the input is coupled."""
    averaged: int = 1
    """Triggered frames averaged into this one by the source."""
    age_s: float = 0.0
    """Seconds between the last sample taken and the hand-over."""
    notes: tuple[str, ...] = ()
    """What the source wants said of this capture (shape detected, column taken, ...), cleaned."""

    def __post_init__(self) -> None:
        values = np.array(self.samples, dtype=np.float64, copy=True)
        if values.ndim != 1:
            raise ValueError(f"samples must be one-dimensional, not {values.shape}")
        values.flags.writeable = False
        object.__setattr__(self, "samples", values)
        if self.times_s is not None:
            times = np.array(self.times_s, dtype=np.float64, copy=True)
            times.flags.writeable = False
            object.__setattr__(self, "times_s", times)


@runtime_checkable
class WaveformSource(Protocol):
    """A source of waveforms. Owned by one thread; closed twice without harm; every wait finite."""

    @property
    def info(self) -> SourceInfo:
        """What this source is."""
        ...

    def capture(self, request: CaptureRequest = ...) -> Waveform:
        """Take the next capture.

        Raises
        ------
        SourceError
            One of its leaves, within `request.timeout_s` plus one second.
        """
        ...

    def close(self) -> None:
        """Give the device back. Safe to call twice."""
        ...

    def __enter__(self) -> Self: ...

    def __exit__(self, *exc: object) -> None: ...
