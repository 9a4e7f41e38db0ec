"""`trimmer warmup`: watch a unit settle, and say when it is worth trimming."""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import Any

import numpy as np

from drivers import SourceInfo
from trimmer.book import Book, RecordStart, open_book
from trimmer.book.readings import reading_document
from trimmer.commands.chain import reference_of
from trimmer.commands.kinds import kind_of, minutes_noted, warm_ups_of
from trimmer.commands.measure import wanted
from trimmer.commands.opening import opened, shape_of
from trimmer.commands.watching import GivenUp, Inbox, Left, Lines, Watch
from trimmer.commands.wording import between, percent
from trimmer.console import complain
from trimmer.errors import CommandError
from trimmer.events import Event
from trimmer.guidance.warming import Warming
from trimmer.intake import Taken
from trimmer.measurement import MeasurementError, Reading, combine
from trimmer.measurement.reading import Interval
from trimmer.upkeep.drift import Usual, compared, course_document, course_of
from trimmer.upkeep.settling import Settling, settle

LEAST_WINDOW_S = 0.5
"""Captures of so long are combined into a point, at first."""
WINDOW_SHARE = 1.0 / 60.0
"""Later, of this share of the time since the beginning."""
MOST_FRAMES = 24
"""Captures combined into a point."""
SAY_S = 3.0
"""A line is printed at most this often,"""
SAY_SHARE = 0.06
"""later at this share of the time since the beginning,"""
SAY_MOST_S = 30.0
"""but at least this often."""


def run(options: argparse.Namespace) -> int:
    """Watch until it has settled, or will not, or the person ends it."""
    if shape_of(options.source) == "file":
        raise CommandError(
            f"{options.source} is one capture; a warm-up needs many",
            "Name an instrument, or a folder and save a capture into it every minute or so.",
        )
    if options.cold and options.source != "bench":
        raise CommandError(
            "--cold is for the simulated unit", "Leave it out: a real unit is as cold as it is."
        )
    lines = Lines(json=options.json, words=warmup_lines)
    with open_book(options.book) as book, opened(options.source, options) as source:
        asked = wanted(options, frames=1, reference=reference_of(book, options))
        watch = Watch(source.source, asked, Inbox(["quit"]))
        warmup = Warmup(watch, book, options)
        if source.bench is not None and options.cold:
            lines.say(cold_words())
        return shown(warmup, lines)


def cold_words() -> str:
    """Say what is different about the simulated unit."""
    from drivers.bench.assembly import TIME_SCALE

    return (
        f"The simulated unit was switched on just now; it warms {TIME_SCALE:.0f} times as fast as "
        "a real one, so this takes about a minute."
    )


def shown(warmup: Warmup, lines: Lines) -> int:
    """Show a warm-up as it goes, and how it ended."""
    lines.say(
        "Leave the unit alone; this ends by itself when it has settled. "
        "Type quit, or press Ctrl-C, to end it earlier: what was read is in the book."
    )
    status = 0
    try:
        for event in warmup.events():
            lines.show(event)
    except Left:
        pass
    except GivenUp as lost:
        complain(lost, lost.remedy)
        status = lost.exit_status
    finally:
        last = warmup.finish()
        if last is not None:
            lines.show(last)
    if not lines.json and sys.stdout.isatty():
        print("\a", end="", flush=True)
    return status


@dataclass
class Warmup:
    """One warm-up under way: its points are in the book as soon as they are taken."""

    watch: Watch
    """Where readings come from."""
    book: Book
    """Where they go."""
    options: argparse.Namespace
    """The command's."""
    minutes: list[float] = field(default_factory=list)
    """Minutes since switch-on, or since the beginning where that was not said."""
    readings: list[Reading] = field(default_factory=list)
    """A reading for each."""
    record: str = ""
    """Its id in the book, once there is a point."""
    state: Settling | None = None
    """What is known of it."""
    kind: str = ""
    """The unit's kind."""
    _earlier: list[Warming] = field(default_factory=list)

    def events(self) -> Iterator[Event]:
        """Give an event now and then, until it has settled or will not.

        Raises
        ------
        Left
            The person ended it.
        GivenUp
            The source or signal was lost for good.
        """
        offset = minutes_noted(self.options) or 0.0
        self.kind = kind_of(self.book, self.options)
        self._earlier = warm_ups_of(self.book, self.kind)
        began, said = None, -SAY_MOST_S
        while True:
            window = max(LEAST_WINDOW_S, WINDOW_SHARE * 60.0 * self._elapsed())
            point = self._point(window)
            if point is None:
                continue
            at, reading, taken_at = point
            began = at if began is None else began
            self._keep(offset + (at - began) / 60.0, reading, taken_at)
            elapsed = 60.0 * self._elapsed()
            if elapsed - said < min(SAY_MOST_S, max(SAY_S, SAY_SHARE * elapsed)):
                continue
            said = elapsed
            self.state = settle([60.0 * m for m in self.minutes], self.readings)
            if self.state.verdict != "settling":
                return
            yield warmup_event(self.state, self.record)

    def finish(self) -> Event | None:
        """Close the record and give the last event; None where nothing was read."""
        if not self.record:
            return None
        self.state = settle([60.0 * m for m in self.minutes], self.readings)
        usual = None
        document = settling_document(self.state)
        if self.state.verdict == "settled":
            course = course_of(self.minutes, self.readings)
            document["course"] = course_document(course)
            usual = compared(course, self._earlier)
        self.book.finish_record(self.record, self.state.verdict, document)
        return warmup_event(self.state, self.record, usual=usual)

    def _elapsed(self) -> float:
        """Minutes from the first point to the last."""
        return self.minutes[-1] - self.minutes[0] if self.minutes else 0.0

    def _point(self, window_s: float) -> tuple[float, Reading, datetime] | None:
        """Combine the captures of a short while; give its middle, seconds on any one clock."""
        times: list[float] = []
        taken: list[Taken] = []
        end = time.monotonic() + window_s
        while not taken or (time.monotonic() < end and len(taken) < MOST_FRAMES):
            self.watch.inbox.heard()
            frame = self.watch.frame()
            if frame is None:
                if taken:
                    break
                continue
            if any(flag.code == "stale" for flag in frame.reading.flags):
                continue
            when = frame.waveform.taken_at
            times.append(when.timestamp() if self.watch.paced else time.monotonic())
            taken.append(frame)
            if self.watch.paced:
                break
        if taken and not self.watch.paced and time.monotonic() < end:
            self.watch.inbox_pause(end - time.monotonic())
        middle = float(np.mean(times))
        try:
            whole = combine([each.reading for each in taken])
        except (ValueError, MeasurementError):
            return None
        return middle, whole, taken[-1].waveform.taken_at

    def _keep(self, minutes: float, reading: Reading, taken_at: datetime) -> None:
        if self.minutes and minutes <= self.minutes[-1]:
            minutes = float(np.nextafter(self.minutes[-1], np.inf))  # two files of one second
        if not self.record:
            self.record = self.book.begin_record(self._start(self.watch.source.info))
        self.minutes.append(minutes)
        self.readings.append(reading)
        self.book.add_point(
            self.record, taken_at, {"minutes": minutes, "reading": reading_document(reading)}
        )

    def _start(self, info: SourceInfo) -> RecordStart:
        return RecordStart(
            what="warmup",
            taken_at=datetime.now(UTC),
            unit=self.options.unit,
            kind=self.kind,
            source=info.name,
            document={"identity": info.identity, "notes": dict(self.options.note)},
        )


def settling_document(state: Settling) -> dict[str, Any]:
    """Give what is known of a warm-up as a document."""
    drift = state.drift_left
    return {
        "version": 1,
        "minutes": state.minutes,
        "thd": _interval(state.thd),
        "settled_thd": _interval(state.settled_thd),
        "minutes_left": state.minutes_left,
        "time_constant_s": state.time_constant_s,
        "time_constant_sigma_s": state.time_constant_sigma_s,
        "fast_constant_s": state.fast_constant_s,
        "settled_fundamental_hz": state.settled_fundamental_hz,
        "drift_left": None if drift is None else drift.tolist(),
        "reason": state.reason,
    }


def _interval(thd: Interval | None) -> list[float] | None:
    return None if thd is None else [thd.value, thd.sigma, thd.low, thd.high]


def warmup_event(state: Settling, record: str, *, usual: Usual | None = None) -> Event:
    """Give the `warmup` line."""
    settled = state.settled_thd
    return {
        "event": "warmup",
        "minutes": round(state.minutes, 3),
        "thd": state.thd.value,
        "thd_sigma": state.thd.sigma,
        "settled_thd": settled.value if settled else None,
        "settled_thd_sigma": settled.sigma if settled else None,
        "minutes_left": None if state.minutes_left is None else round(state.minutes_left, 3),
        "verdict": state.verdict,
        "settled_thd_low": settled.low if settled else None,
        "settled_thd_high": settled.high if settled else None,
        "time_constant_s": state.time_constant_s,
        "time_constant_sigma_s": state.time_constant_sigma_s,
        "fast_constant_s": state.fast_constant_s,
        "settled_fundamental_hz": state.settled_fundamental_hz,
        "usual": None if usual is None else usual.usual,
        "reason": state.reason,
        "record": record,
    }


def warmup_lines(event: Event) -> list[str]:
    """Write a `warmup` event as lines."""
    at = f"{_minutes(event['minutes'])}: THD {percent(event['thd'], event['thd_sigma'])}."
    if event["settled_thd"] is None:
        return [f"{at} Too early to tell."]
    settled = Interval(
        event["settled_thd"],
        event["settled_thd_sigma"],
        event["settled_thd_low"],
        event["settled_thd_high"],
    )
    to = f"{percent(settled.value, settled.sigma)} (95 % interval {between(settled)})"
    match event["verdict"]:
        case "settled":
            lines = [f"{at} SETTLED: it stays at {to}. It is worth trimming now."]
        case "unsettled":
            lines = [
                f"{at} DOES NOT SETTLE. {event['reason']}",
                "  Look for draughts, a loose lead, an unsteady supply, or a part that fails.",
            ]
        case _:
            left = _minutes(event["minutes_left"])
            lines = [f"{at} Settling to {to}; worth trimming in about {left}."]
    if event["usual"] is not None:
        usual = "as units of its kind do" if event["usual"] else "unlike other units of its kind"
        lines.append(f"  It warmed up {usual}.")
    return lines


def _minutes(minutes: float) -> str:
    if minutes < 1.5:
        return f"{60.0 * minutes:.0f} s"
    return f"{minutes:.1f} min" if minutes < 20 else f"{minutes:.0f} min"
