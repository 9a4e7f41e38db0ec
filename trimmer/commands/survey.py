"""`trimmer survey`: check the set unit over its frequency range, following the dial."""

from __future__ import annotations

import argparse
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import Any

import numpy as np
from numpy.typing import NDArray

from trimmer.book import Book, RecordStart, open_book
from trimmer.book.readings import reading_document
from trimmer.commands.chain import reference_of
from trimmer.commands.dial import SimulatedDial
from trimmer.commands.kinds import kind_of, learned_of
from trimmer.commands.measure import wanted
from trimmer.commands.opening import opened, shape_of
from trimmer.commands.watching import GivenUp, Inbox, Left, Lines, Watch
from trimmer.commands.wording import percent
from trimmer.console import complain
from trimmer.errors import CommandError
from trimmer.events import Event, cause_event, reading_event
from trimmer.guidance import Learned
from trimmer.guidance.advice import Cause
from trimmer.intake import Taken
from trimmer.measurement import Reading, frames_needed
from trimmer.upkeep.dial import Stillness, Way, targets
from trimmer.upkeep.limits import Limits, overall, verdicts
from trimmer.upkeep.survey import Surveyed, surveyed

FRAMES = 4
"""Captures combined into a point,"""
MOST_FRAMES = 64
"""or so many where that may tell whether it is inside."""
DIALLING_S = 120.0
"""How long a signal that cannot be used is waited for: a new range needs a new time base."""


def run(options: argparse.Namespace) -> int:
    """Follow the dial until every point is taken, or the person ends it."""
    if shape_of(options.source) == "file":
        raise CommandError(
            f"{options.source} is one capture; a survey needs one at each frequency",
            "Name an instrument, or a folder and save a capture into it at each frequency.",
        )
    points = points_of(options)
    lines = Lines(json=options.json, words=survey_lines)
    with open_book(options.book) as book, opened(options.source, options) as source:
        limits = limits_of(book, options)
        asked = wanted(options, frames=FRAMES, reference=reference_of(book, options))
        inbox = Inbox(["quit", "skip"])
        watch = Watch(source.source, asked, inbox, signal_patience_s=DIALLING_S)
        dial = SimulatedDial(source.bench, source.bench.seed) if source.bench else None
        return shown(Survey(watch, book, options, points, limits, dial), lines)


def points_of(options: argparse.Namespace) -> list[float]:
    """Give the points asked for.

    Raises
    ------
    CommandError
        They make no range.
    """
    try:
        return targets(getattr(options, "from"), options.to, options.points)
    except ValueError as error:
        raise CommandError(
            str(error), "Give `--from` below `--to`, and 1 or more points."
        ) from error


def limits_of(book: Book, options: argparse.Namespace) -> Limits:
    """Give the limits of the command, else the kind's in the book; store them where asked."""
    said = Limits(
        options.limit_thd, options.limit_symmetry, options.limit_offset, options.limit_flatness
    )
    kind = kind_of(book, options)
    stored = book.records("limits", kind=kind, limit=1) if kind else []
    limits = said.over(Limits.from_document(stored[0].document)) if stored else said
    if options.keep_limits:
        if not kind or not limits.any:
            raise CommandError(
                "there is no kind, or no limit, to keep",
                "Add `--kind NAME` and `--limit-thd RATIO`.",
            )
        start = RecordStart("limits", datetime.now(UTC), kind=kind)
        book.add_record(start, document=limits.to_document())
    return limits


def shown(survey: Survey, lines: Lines) -> int:
    """Show a survey as it goes, and its result."""
    lines.say(
        f"Survey of {survey.way.left} points. Turn the dial to where it is asked to go and hold it; "
        "the point is taken by itself. Type skip to leave a point out, quit to end."
    )
    if not survey.limits.any:
        lines.say("No limit is set: `--limit-thd 0.01` would tell what is within 1 %.")
    status = 0
    try:
        for event in survey.events():
            lines.show(event)
    except Left:
        pass
    except GivenUp as lost:
        complain(lost, lost.remedy)
        status = lost.exit_status
    finally:
        last = survey.finish()
        if last is not None:
            lines.show(last)
    return status


@dataclass
class Survey:
    """One survey under way: its points are in the book as soon as they are taken."""

    watch: Watch
    """Where readings come from."""
    book: Book
    """Where they go."""
    options: argparse.Namespace
    """The command's."""
    points: list[float]
    """Where to take them, Hz."""
    limits: Limits
    """What the unit has to keep to."""
    dial: SimulatedDial | None = None
    """Turns by itself, on the simulated unit."""
    readings: list[Reading] = field(default_factory=list)
    """What was read, a reading for each point taken."""
    record: str = ""
    """Its id in the book, once there is a point."""

    def __post_init__(self) -> None:
        self.way = Way(self.points)
        self._still = Stillness()
        self._asked: float | None = None

    def events(self) -> Iterator[Event]:
        """Give an event for each point and each place to go.

        Raises
        ------
        Left
            The person ended it.
        GivenUp
            The source or signal was lost for good.
        """
        if self.watch.paced:  # nothing is seen before the first file
            yield self._ask(self.way.next_hz(), None)
        while self.way.left:
            if self.watch.inbox.heard() == "skip" and self._asked is not None:
                self.way.taken(self._asked)
                self._asked = None
                continue
            frame = self.watch.frame()
            if frame is None:
                continue
            hertz = frame.reading.fundamental_hz
            at = self.way.at(hertz)
            if at is not None and (self.watch.paced or not self._moves(frame)):
                point = frame if self.watch.paced else self._point()
                if point is not None:
                    yield self._keep(at, point)
                    continue
            towards = self.way.next_hz(hertz)
            if towards != self._asked:
                yield self._ask(towards, hertz)
            if self.dial is not None:
                self.dial.step()

    def finish(self) -> Event | None:
        """Close the record and give the last event; None where the book knows of nothing."""
        learned = learned_of(self.book, self.options.unit)
        found = surveyed(
            self.readings,
            self.limits,
            complete=len(self.readings) == len(self.points),
            reach=None if learned is None else reach_of(learned),
        )
        event = survey_event(found, self.options.unit, len(self.points), self.record)
        if self.record:
            self.book.finish_record(self.record, found.verdict, {"version": 1, **event})
        return event

    def _ask(self, towards: float, hertz: float | None) -> Event:
        self._asked = towards
        if self.dial is not None:
            self.dial.towards(towards)
        return {"event": "dial", "towards_hz": towards, "now_hz": hertz, "left": self.way.left}

    def _moves(self, frame: Taken) -> bool:
        reading = frame.reading
        return self._still.moved(
            time.monotonic(), reading.fundamental_hz, reading.fundamental_sigma_hz
        )

    def _point(self) -> Taken | None:
        """Read the point, longer where that may tell whether it is inside."""
        self._still.forget()
        taken = self.watch.still(FRAMES)
        limit = self.limits.thd
        if (
            taken is None
            or limit is None
            or verdicts(taken.reading, self.limits)["thd"] != ("cannot-tell")
        ):
            return taken
        sigma = abs(taken.reading.thd.value - limit) / 2.5
        more = frames_needed(taken.reading, sigma) if sigma > 0.0 else None
        if more is None or more > MOST_FRAMES:
            return taken
        return self.watch.still(FRAMES + more, sigma) or taken

    def _keep(self, at: float, taken: Taken) -> Event:
        found = verdicts(taken.reading, self.limits)
        verdict = overall(found.values())
        info = self.watch.source.info
        if not self.record:
            start = RecordStart(
                what="survey",
                taken_at=datetime.now(UTC),
                unit=self.options.unit,
                kind=kind_of(self.book, self.options),
                source=info.name,
                document={
                    "identity": info.identity,
                    "notes": dict(self.options.note),
                    "limits": self.limits.to_document(),
                    "points_hz": self.points,
                },
            )
            self.record = self.book.begin_record(start)
        waveform = taken.waveform
        document = {
            "towards_hz": at,
            "verdict": verdict,
            "verdicts": found,
            "reading": reading_document(taken.reading),
        }
        self.book.add_point(self.record, waveform.taken_at, document)
        self.readings.append(taken.reading)
        self.way.taken(at)
        self._asked = None
        return reading_event(
            None,
            waveform.taken_at,
            waveform.source,
            taken.reading,
            verdict=verdict,
            verdicts=found,
            towards_hz=at,
            notes=list(waveform.notes),
        )


def reach_of(learned: Learned) -> NDArray[np.float64]:
    """Give an orthonormal basis of what a unit's trims reach; shape (m, 2)."""
    return np.asarray(np.linalg.qr(learned.columns.T)[0])


def survey_event(found: Surveyed, unit: str, asked: int, record: str) -> Event:
    """Give the `survey` line."""
    worst, flat = found.worst_thd, found.flatness
    causes = [Cause(each.cause, each.thd, each.remedy, each.thd_sigma) for each in found.remainder]
    return {
        "event": "survey",
        "unit": unit,
        "points": found.points,
        "worst_thd": worst.value if worst else None,
        "at_hz": found.at_hz,
        "verdict": found.verdict,
        "remainder": [cause_event(cause) for cause in causes],
        "worst_thd_sigma": worst.sigma if worst else None,
        "points_asked": asked,
        "flatness": flat.value if flat else None,
        "flatness_sigma": flat.sigma if flat else None,
        "outside": list(found.outside),
        "record": record,
    }


WORDS = {"inside": "INSIDE", "outside": "OUTSIDE", "cannot-tell": "CANNOT TELL"}


def dialled(hertz: float) -> str:
    """Write a frequency as a dial does, to a few digits."""
    return f"{hertz:.4g} Hz" if hertz < 1000.0 else f"{hertz / 1000.0:.4g} kHz"


def survey_lines(event: Event) -> list[str]:
    """Write a survey's event as lines."""
    match event["event"]:
        case "dial":
            return [_dial_line(event)]
        case "reading":
            return [_point_line(event)]
        case _:
            return _result_lines(event)


def _dial_line(event: dict[str, Any]) -> str:
    towards, now, left = event["towards_hz"], event["now_hz"], event["left"]
    to_go = f"{left} point{'s' * (left > 1)} to go"
    if now is None:
        return f"TURN THE DIAL to {dialled(towards)} and save a capture ({to_go})."
    way = "UP" if towards > now else "DOWN"
    return f"TURN THE DIAL {way} to {dialled(towards)} (it stands at {dialled(now)}; {to_go})."


def _point_line(event: dict[str, Any]) -> str:
    judged = f" {WORDS[event['verdict']]}" if event["verdicts"] else ""
    broken = [name for name, verdict in event["verdicts"].items() if verdict != "inside"]
    why = f" ({', '.join(broken)})" if broken else ""
    return (
        f"{dialled(event['fundamental_hz'])}: THD {percent(event['thd'], event['thd_sigma'])}."
        f"{judged}{why}"
    )


def _result_lines(event: dict[str, Any]) -> list[str]:
    if not event["points"]:
        return ["Survey ended before a point was taken."]
    said = {
        "inside": "INSIDE its limits at every point",
        "outside": f"OUTSIDE its limits ({', '.join(event['outside'])})",
        "cannot-tell": "CANNOT TELL: no limit, points left out, or too uncertain",
    }[event["verdict"]]
    lines = [
        f"Survey of {event['points']} of {event['points_asked']} points: {said}.",
        f"  Worst THD {percent(event['worst_thd'], event['worst_thd_sigma'])} "
        f"at {dialled(event['at_hz'])}.",
    ]
    if event["flatness"] is not None:
        flat = percent(event["flatness"], event["flatness_sigma"])
        lines.append(f"  Amplitude changes by at most {flat} of that near 1 kHz.")
    lines += [
        f"  At the highest frequency: {each['cause']} {percent(each['thd'], each['thd_sigma'])}. "
        f"{each['remedy']}"
        for each in event["remainder"]
    ]
    return lines
