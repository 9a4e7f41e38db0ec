"""What is known at the moment: the reports of a session taken up one after another, without Textual."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import assert_never

import numpy as np
from numpy.typing import NDArray

from trimmer.guidance.advice import Advice, Follow
from trimmer.measurement.reading import Reading
from trimmer.reports import (
    Advised,
    Awaiting,
    Failed,
    Finished,
    Followed,
    Measured,
    Opened,
    Report,
    Told,
)
from trimmer.screen.pictures.course import Floor, Step
from trimmer.screen.pictures.parts import Split, split
from trimmer.screen.pictures.wave import Trace


@dataclass(frozen=True, slots=True, eq=False)
class View:
    """The session as it stands; each report makes the next one."""

    source: str = ""
    """SOURCE word."""
    opened: Opened | None = None
    """Who answered, and the sheet."""
    advice: Advice | None = None
    """The turn asked for; None while one is being worked out."""
    follows: bool = False
    """Whether the hand is watched."""
    word: Follow | None = None
    """The last live word of this turn."""
    awaiting: Awaiting | None = None
    """What the session waits for besides the turn."""
    reading: Reading | None = None
    """The newest reading, still or live."""
    read_at: float | None = None
    """When its last sample was taken, on the caller's monotonic clock, seconds."""
    notes: tuple[str, ...] = ()
    """The source's remarks on its last still capture."""
    steps: tuple[Step, ...] = ()
    """THD after each turn."""
    floor: Floor | None = None
    """THD that no turn removes."""
    reach: NDArray[np.float64] | None = None
    """Shape (m, 2(K-1)), orthonormal rows: what the trims reach."""
    trace: Trace | None = None
    """The newest capture as it is drawn."""
    parts: Split | None = None
    """The newest reading's parts, split into what the trims reach and what they do not."""
    finished: Finished | None = None
    """The end, where it came."""
    failed: Failed | None = None
    """The failure, where it came."""

    @property
    def over(self) -> bool:
        """Whether the session has ended."""
        return self.finished is not None or self.failed is not None


def take(view: View, report: Report, now: float) -> View:
    """Take up a report.

    Parameters
    ----------
    view
        What was known.
    report
        What the session says.
    now
        The caller's monotonic clock, seconds.
    """
    match report:
        case Opened():
            return replace(view, opened=report, source=report.source, awaiting=None)
        case Measured():
            return _measured(view, report, now)
        case Advised():
            return _advised(view, report)
        case Followed():
            return replace(
                view,
                word=report.word,
                reading=report.reading,
                trace=_trace(report),
                parts=_split(report.reading, view.reach),
                read_at=now - report.age_s,
                awaiting=None,
            )
        case Awaiting():
            return replace(view, awaiting=report)
        case Told():
            return replace(view, notes=(*view.notes, f"{report.message} {report.remedy}"))
        case Finished():
            return _finished(view, report)
        case Failed():
            return replace(view, failed=report, awaiting=None)
        case _:
            assert_never(report)


def _measured(view: View, report: Measured, now: float) -> View:
    """Take up a still reading: one step for each number of turns, the newest counts."""
    thd = report.reading.thd
    step = Step(report.turn, thd.value, thd.sigma)
    kept = tuple(old for old in view.steps if old.turn < step.turn)
    return replace(
        view,
        reading=report.reading,
        trace=_trace(report),
        parts=_split(report.reading, view.reach),
        read_at=now,
        notes=report.notes,
        steps=(*kept, step),
        advice=None,
        word=None,
        awaiting=None,
    )


def _advised(view: View, report: Advised) -> View:
    advice = report.advice
    floor = view.floor
    if advice.floor_thd is not None:
        floor = Floor(advice.floor_thd, advice.floor_sigma or 0.0)
    reach = view.reach if report.reach is None else report.reach
    return replace(
        view,
        advice=advice,
        follows=report.follows,
        floor=floor,
        reach=reach,
        parts=_split(view.reading, reach),
        word=None,
        awaiting=None,
    )


def _finished(view: View, report: Finished) -> View:
    done = report.done
    floor = view.floor
    if done.floor_thd is not None:
        floor = Floor(done.floor_thd, done.floor_sigma or 0.0)
    return replace(view, finished=report, floor=floor, advice=None, word=None, awaiting=None)


def _split(reading: Reading | None, reach: NDArray[np.float64] | None) -> Split | None:
    return None if reading is None else split(reading.parts, reading.covariance, reach)


def _trace(report: Measured | Followed) -> Trace:
    period = 1.0 / (report.reading.fundamental_hz * report.interval_s)
    return Trace(report.reading.parts, report.waveform, period)
