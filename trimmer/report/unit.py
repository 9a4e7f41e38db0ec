"""A unit's page, gathered from its latest sheet, survey, recheck and warm-up in the book."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np

from trimmer.book import Book, Record, Sheet, SheetFilter
from trimmer.book.readings import from_document
from trimmer.errors import CommandError
from trimmer.measurement import fold, shape_of
from trimmer.measurement.reading import Reading
from trimmer.report.page import Course, Page, Parts, Row, Section, Wave
from trimmer.report.words import (
    CAUSES,
    CAUTIONS,
    UNCERTAINTY,
    VERDICTS,
    between,
    hertz,
    moment,
    percent,
    plural,
    shown,
    turned,
)

POINTS = 720
"""Points of the drawn period."""
FOLDED = 180
"""Points into which the samples are folded."""
MOST_NOTES = 8
"""Notes that stand on the page."""


def unit_page(book: Book, unit: str) -> Page:
    """Gather a unit's page.

    Raises
    ------
    CommandError
        The book has no sheet of it with a reading.
    """
    sheet, reading = latest(book, unit)
    start, name = sheet.start, shown(unit)
    kind = f", {shown(start.kind)}" if start.kind else ""
    survey = _newest(book.records("survey", unit=unit, limit=1))
    return Page(
        title=f"{name}{kind}",
        subtitle=f"Sine trims, sheet of {moment(start.taken_at)}",
        result=f"THD {percent(reading.thd.value, reading.thd.sigma)}",
        facts=_facts(sheet, reading),
        figures=_figures(sheet, reading),
        sections=tuple(_sections(book, unit, sheet, survey)),
        cautions=CAUTIONS,
        wave=_wave(sheet, reading),
        parts=_parts(reading),
        turns=_turns(sheet),
        survey=_survey_course(survey),
    )


def latest(book: Book, unit: str) -> tuple[Sheet, Reading]:
    """Give a unit's latest sheet that has a reading, finished ones first."""
    for finished in (True, False):
        for row in book.sheets(SheetFilter(unit=unit, finished=finished), limit=20):
            sheet = book.sheet(row.id)
            reading = sheet.end.reading if sheet.end else None
            if reading is None and sheet.turns:
                reading = sheet.turns[-1].reading
            if reading is not None:
                return sheet, reading
    raise CommandError(
        f"the book has no sheet of a unit {unit!r}",
        "Check the name with `trimmer log list`, or trim it first with `trimmer tune`.",
    )


def _newest(records: list[Record]) -> Record | None:
    return records[0] if records else None


def _facts(sheet: Sheet, reading: Reading) -> tuple[Row, ...]:
    start = sheet.start
    rows = [
        ("Unit", shown(sheet.row.unit)),
        ("Kind", shown(start.kind or "not said")),
        ("Read by", shown(start.identity or start.source, 44)),
        (
            "Travel of the trims",
            f"{start.travel_turns:g} turns" if start.travel_turns else "not said",
        ),
        ("Captures", f"{reading.frames} of {reading.samples // max(reading.frames, 1)} samples"),
    ]
    notes = list(start.notes.items())[:MOST_NOTES]
    rows += [(shown(key, 24), shown(value, 44)) for key, value in notes]
    return (*rows, ("Sheet", sheet.row.id))


def _figures(sheet: Sheet, reading: Reading) -> tuple[Row, ...]:
    crests = reading.crests
    rows = [
        ("THD", percent(reading.thd.value, reading.thd.sigma)),
        ("95 % interval", between(reading.thd)),
        ("Frequency", hertz(reading.fundamental_hz)),
        ("Upper crest too pointed by", percent(crests.upper, crests.upper_sigma)),
        ("Lower crest too pointed by", percent(crests.lower, crests.lower_sigma)),
        ("Rise share", percent(reading.rise_share, reading.rise_share_sigma)),
    ]
    if reading.has_volts:
        rows.append(("Amplitude", f"{reading.amplitude:.4g} V peak"))
        if not reading.ac_coupled:
            rows.append(("Offset", f"{1000.0 * reading.offset:.1f} mV"))
    done = sheet.end.done if sheet.end else None
    if done is not None and done.floor_thd is not None:
        rows.append(("No turn can better", percent(done.floor_thd, done.floor_sigma)))
    return tuple(rows)


def _sections(book: Book, unit: str, sheet: Sheet, survey: Record | None) -> list[Section]:
    found = [_trimming(sheet)]
    if sheet.end is not None and sheet.end.done.remainder:
        left = [
            f"{CAUSES.get(each.cause, each.cause).capitalize()}: "
            f"{percent(each.thd, each.thd_sigma)}. {each.remedy}"
            for each in sheet.end.done.remainder[:4]
        ]
        found.append(Section("What is left, and why", tuple(left)))
    if survey is not None and survey.document:
        found.append(_survey(survey))
    recheck = _newest(book.records("recheck", unit=unit, limit=1))
    if recheck is not None and recheck.document:
        found.append(_recheck(recheck))
    warmup = _newest(book.records("warmup", unit=unit, limit=1))
    if warmup is not None and warmup.document:
        found.append(_warmup(warmup))
    found.append(Section("What the figures mean", UNCERTAINTY))
    return found


def _trimming(sheet: Sheet) -> Section:
    done = sheet.end.done if sheet.end else None
    first = sheet.turns[0].reading.thd if sheet.turns else None
    lines = [VERDICTS.get(sheet.row.verdict, sheet.row.verdict)]
    if first is not None:
        lines.append(
            f"As found: {percent(first.value, first.sigma)}; {plural(sheet.row.turns, 'turn')} made."
        )
    if done is not None and done.net_turns:
        net = ", ".join(turned(trim, turns) for trim, turns in done.net_turns.items())
        lines.append(f"From there to here: {net}.")
    if done is not None and done.expected_thd_warm is not None:
        lines.append(f"Expected once warm: {percent(done.expected_thd_warm)}.")
    return Section("Trimming", tuple(lines))


def _survey(record: Record) -> Section:
    end = record.document
    worst = percent(end.get("worst_thd"), end.get("worst_thd_sigma"))
    said = VERDICTS.get(str(record.verdict), "")
    if end.get("outside"):
        said = f"{said} Broken: {', '.join(map(str, end['outside']))}."
    line = f"{plural(int(end.get('points', 0)), 'point')}; worst THD {worst} at {hertz(end.get('at_hz'))}."
    return Section(f"Survey of {moment(record.start.taken_at)}", (said, line))


def _recheck(record: Record) -> Section:
    end = record.document
    thd, change = percent(end.get("thd")), percent(end.get("change"), end.get("change_sigma"))
    said = VERDICTS.get(str(record.verdict), "")
    return Section(
        f"Recheck of {moment(record.start.taken_at)}",
        (f"{said} THD {thd}, changed by {change} against sheet {record.start.sheet}.",),
    )


def _warmup(record: Record) -> Section:
    end = record.document
    thd = end.get("settled_thd")
    lines = [VERDICTS.get(str(record.verdict), "")]
    if record.verdict == "settled" and thd:
        lines[0] = (
            f"It settled within {end.get('minutes', 0.0):.3g} minutes, to {percent(thd[0], thd[1])}."
        )
    return Section(f"Warm-up of {moment(record.start.taken_at)}", tuple(lines))


def _wave(sheet: Sheet, reading: Reading) -> Wave:
    theta, shape = shape_of(reading, POINTS)
    last = sheet.turns[-1] if sheet.turns else None
    at, samples = np.zeros(0), np.zeros(0)
    if last is not None and last.waveform is not None and last.interval_s:
        at, folded = fold(last.waveform, last.interval_s, last.reading, FOLDED)
        seen = np.isfinite(folded)
        at, samples = at[seen], folded[seen]
    return Wave(theta, shape, at, samples)


def _parts(reading: Reading) -> Parts:
    sigma = np.sqrt(np.maximum(np.diag(reading.covariance), 0.0))
    return Parts(
        orders=np.arange(2.0, reading.orders + 1.0),
        crest=reading.crest_parts,
        crest_sigma=sigma[0::2],
        skew=reading.skew_parts,
        skew_sigma=sigma[1::2],
    )


def _turns(sheet: Sheet) -> Course | None:
    if not sheet.turns:
        return None
    thds = [entry.reading.thd for entry in sheet.turns]
    done = sheet.end.done if sheet.end else None
    return Course(
        x=np.array([float(entry.turn) for entry in sheet.turns]),
        value=np.array([thd.value for thd in thds]),
        low=np.array([thd.low for thd in thds]),
        high=np.array([thd.high for thd in thds]),
        limit=done.floor_thd if done else None,
    )


def _survey_course(record: Record | None) -> Course | None:
    if record is None or not record.points:
        return None
    readings = sorted(
        (from_document(point.document["reading"]) for point in record.points),
        key=lambda reading: reading.fundamental_hz,
    )
    limits: Mapping[str, Any] = record.start.document.get("limits", {})
    limit = limits.get("thd")
    return Course(
        x=np.array([reading.fundamental_hz for reading in readings]),
        value=np.array([reading.thd.value for reading in readings]),
        low=np.array([reading.thd.low for reading in readings]),
        high=np.array([reading.thd.high for reading in readings]),
        limit=float(limit) if limit is not None and math.isfinite(limit) else None,
    )
