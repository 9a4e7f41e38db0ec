"""`trimmer recheck`: hold a unit against its logged sheet."""

from __future__ import annotations

import argparse
import time
from datetime import UTC, datetime
from typing import Any

import numpy as np
from numpy.typing import NDArray

from drivers import SourceInfo, Waveform
from trimmer.book import Book, RecordStart, Sheet, SheetFilter, open_book
from trimmer.book.readings import advice_document, reading_document
from trimmer.commands.chain import reference_of
from trimmer.commands.dial import SimulatedDial
from trimmer.commands.kinds import kind_of, learned_of, minutes_noted, warm_ups_of
from trimmer.commands.measure import wanted
from trimmer.commands.opening import opened
from trimmer.commands.survey import DIALLING_S, dialled
from trimmer.commands.watching import GivenUp, Inbox, Left, Lines, Watch
from trimmer.commands.wording import percent
from trimmer.console import complain
from trimmer.errors import CommandError
from trimmer.events import Event, advice_event, reading_event
from trimmer.intake import Taken
from trimmer.measurement import MeasurementError, Reading, combine
from trimmer.upkeep.changes import changes, is_doubtful
from trimmer.upkeep.dial import Stillness, Way
from trimmer.upkeep.recheck import Recheck, rechecked

FRAMES = 4
"""Captures combined at first,"""
MORE_FRAMES = 24
"""and so many more where they may tell."""
SAME_STEP = 0.01
"""Steps between codes that differ by less, relative, are of one range."""
MOST_CODES = 20_000
"""More steps than this are no codes."""


def run(options: argparse.Namespace) -> int:
    """Read the unit at the sheet's frequency and say whether it still is as logged."""
    if not options.unit:
        raise CommandError(
            "a recheck needs the unit's name", "Add `--unit NAME`; `trimmer log list` shows them."
        )
    lines = Lines(json=options.json, words=recheck_lines)
    with open_book(options.book) as book:
        sheet, logged = logged_sheet(book, options.unit)
        with opened(options.source, options) as source:
            asked = wanted(options, frames=FRAMES, reference=reference_of(book, options))
            inbox = Inbox(["quit"])
            watch = Watch(source.source, asked, inbox, signal_patience_s=DIALLING_S)
            dial = SimulatedDial(source.bench, source.bench.seed) if source.bench else None
            try:
                taken = reading_at(watch, sheet, logged, lines, dial)
            except Left:
                return 0
            except GivenUp as lost:
                complain(lost, lost.remedy)
                return lost.exit_status
            same = same_input(source.source.info, taken.waveform, sheet)
            return told(book, options, lines, taken, sheet, logged, same=same)


def logged_sheet(book: Book, unit: str) -> tuple[Sheet, Reading]:
    """Give a unit's latest finished sheet and its final reading.

    Raises
    ------
    CommandError
        There is none.
    """
    for row in book.sheets(SheetFilter(unit=unit, finished=True), limit=50):
        sheet = book.sheet(row.id)
        if sheet.end is not None and sheet.end.reading is not None:
            return sheet, sheet.end.reading
    raise CommandError(
        f"the book has no finished sheet of a unit {unit!r}",
        "Check the name with `trimmer log list`, or trim it first with `trimmer tune`.",
    )


def same_input(info: SourceInfo, waveform: Waveform, sheet: Sheet) -> bool:
    """Say whether what the input itself adds is the same as when the sheet was made.

    That needs the same instrument, channel and range. A sheet keeps the samples of its captures, and
    the range shows in them as the step between neighbouring codes.
    """
    start = sheet.start
    if (info.identity, info.dialect) != (start.identity, start.dialect):
        return False
    if info.settings.get("channel") != start.settings.get("channel"):
        return False
    kept = [turn.waveform for turn in sheet.turns if turn.waveform is not None]
    if not kept:
        return False
    then, now = code_step(kept[-1]), code_step(waveform.samples)
    return then is not None and now is not None and abs(now / then - 1.0) < SAME_STEP


def code_step(samples: NDArray[np.float64]) -> float | None:
    """Give the step between neighbouring codes; None where the samples show none."""
    steps = np.diff(np.unique(np.round(samples, 9)))
    if steps.size < 8 or steps.size > MOST_CODES:
        return None
    return float(np.median(steps))


def reading_at(
    watch: Watch, sheet: Sheet, logged: Reading, lines: Lines, dial: SimulatedDial | None
) -> Taken:
    """Read at the sheet's frequency, once the dial is there and still; longer where that may tell.

    Raises
    ------
    MeasurementError
        One capture is all there is, and it is at another frequency.
    """
    hertz = logged.fundamental_hz
    way, still = Way([hertz]), Stillness()
    asked = False
    while True:
        watch.inbox.heard()
        if watch.source.info.finite:
            frame: Taken | None = watch.intake.frame()
        else:
            frame = watch.frame()
        if frame is None:
            continue
        now = frame.reading
        if way.at(now.fundamental_hz) is None:
            if watch.source.info.finite:
                raise MeasurementError(
                    "other-frequency",
                    f"The capture is at {dialled(now.fundamental_hz)}, the sheet at {dialled(hertz)}.",
                    "Turn the dial to the sheet's frequency and save a capture there.",
                )
            if not asked:
                asked = True
                lines.show(
                    {"event": "dial", "towards_hz": hertz, "now_hz": now.fundamental_hz, "left": 1}
                )
                if dial is not None:
                    dial.towards(hertz)
        elif watch.source.info.finite or watch.paced:
            return frame
        elif not still.moved(time.monotonic(), now.fundamental_hz, now.fundamental_sigma_hz):
            taken = longer(watch, sheet, logged)
            if taken is not None:
                return taken
        if dial is not None and asked:
            dial.step()


def longer(watch: Watch, sheet: Sheet, logged: Reading) -> Taken | None:
    """Read a unit that stands still, and on where it is doubtful whether anything changed."""
    first = watch.still(FRAMES)
    if first is None:
        return None
    same = same_input(watch.source.info, first.waveform, sheet)
    if not is_doubtful(changes(first.reading, logged, same_input=same)):
        return first
    more = watch.still(MORE_FRAMES)
    if more is None:
        return None
    return Taken(combine([first.reading, more.reading]), more.waveform)


def told(
    book: Book,
    options: argparse.Namespace,
    lines: Lines,
    taken: Taken,
    sheet: Sheet,
    logged: Reading,
    *,
    same: bool,
) -> int:
    """Judge the reading, keep it in the book, and say it."""
    kind = kind_of(book, options)
    found = rechecked(
        taken.reading,
        logged,
        same_input=same,
        learned=learned_of(book, options.unit),
        warm_ups=warm_ups_of(book, kind),
        minutes=minutes_noted(options),
        last={turn.advice.trim: turn.advice.sense for turn in sheet.turns if turn.advice},
    )
    waveform = taken.waveform
    start = RecordStart(
        what="recheck",
        taken_at=waveform.taken_at,
        unit=options.unit,
        kind=kind,
        source=waveform.source,
        sheet=sheet.row.id,
        document={
            "notes": dict(options.note),
            "reading": reading_document(taken.reading),
            "rechecked_at": datetime.now(UTC).isoformat(),
        },
    )
    event = recheck_event(found, options.unit, sheet.row.id)
    stored = {"version": 1, **event, "advice": [advice_document(a) for a in found.advice]}
    record = book.add_record(start, found.verdict, stored)
    lines.show(
        reading_event(
            None,
            waveform.taken_at,
            waveform.source,
            taken.reading,
            notes=list(waveform.notes),
        )
    )
    lines.show({**event, "record": record})
    return 0


def recheck_event(found: Recheck, unit: str, sheet: str) -> Event:
    """Give the `recheck` line."""
    thd = found.changes[0]
    advice = [advice_event(each) for each in found.advice]
    return {
        "event": "recheck",
        "unit": unit,
        "verdict": found.verdict,
        "thd": found.thd,
        "thd_logged": found.thd_logged,
        "change": thd.change,
        "change_sigma": thd.sigma,
        "advice": advice[0] if advice else None,
        "then": advice[1] if len(advice) > 1 else None,
        "changes": [
            {
                "name": each.name,
                "logged": each.logged,
                "now": each.now,
                "change": each.change,
                "change_sigma": each.sigma,
                "deviation": round(each.deviation, 2),
                "counts": each.counts,
            }
            for each in found.changes
        ],
        "warming_minutes": found.warming_minutes,
        "reason": found.reason,
        "sheet": sheet,
    }


VERDICTS = {
    "holds": "HOLDS: it still is as its sheet says.",
    "drifted": "DRIFTED: it is not as its sheet says.",
    "retrim": "RETRIM: it is worth trimming again.",
}
NAMES = {
    "thd": "THD",
    "upper-crest": "Upper crest",
    "lower-crest": "Lower crest",
    "rise-share": "Rise share",
    "shape": "All parts together",
    "level": "Level",
    "offset": "Offset",
}


def recheck_lines(event: Event) -> list[str]:
    """Write a recheck's event as lines."""
    match event["event"]:
        case "dial":
            return [
                f"TURN THE DIAL to {dialled(event['towards_hz'])}, where the sheet was made "
                f"(it stands at {dialled(event['now_hz'])})."
            ]
        case "reading":
            thd = percent(event["thd"], event["thd_sigma"])
            return [f"{dialled(event['fundamental_hz'])}: THD {thd}."]
        case _:
            return _result_lines(event)


def _result_lines(event: dict[str, Any]) -> list[str]:
    lines = [f"{event['unit']} {VERDICTS[event['verdict']]} {event['reason']}"]
    lines += [_change_line(each) for each in event["changes"]]
    if event["warming_minutes"] is not None:
        lines.append(
            f"  So look units of its kind {event['warming_minutes']:.1f} min after switch-on."
        )
    turns = [turn for turn in (event["advice"], event["then"]) if turn is not None]
    for word, turn in zip(("", "Then t"), turns, strict=False):
        order = (
            f"urn the {turn['trim']} trim {turn['sense']} by {turn['turns']:.3f} turns "
            f"({turn['degrees']:.0f} degrees); THD to expect {percent(turn['expected_thd'])}."
        )
        lines.append(f"{word or 'T'}{order}")
    if event["verdict"] == "retrim":
        lines.append("`trimmer tune` guides the turns and logs a new sheet.")
    return lines


def _change_line(each: dict[str, Any]) -> str:
    volts = each["name"] in ("level", "offset")

    def shown(value: float, sigma: float | None = None) -> str:
        return f"{value:.4g} V" if volts else percent(value, sigma)

    was = (
        "" if each["logged"] is None else f" was {shown(each['logged'])}, is {shown(each['now'])},"
    )
    told = "" if each["counts"] else " (set by its knobs: does not count)"
    by = f"{each['change']:+.4f} V" if volts else percent(each["change"], each["change_sigma"])
    return f"  {NAMES[each['name']]}:{was} changed by {by}, {each['deviation']:+.1f} sigma{told}."
