"""A kind's page: the spread over its units, its drift, the turns it takes."""

from __future__ import annotations

import numpy as np

from trimmer.book import Book, Sheet, SheetFilter
from trimmer.errors import CommandError
from trimmer.report.page import Array, Course, Page, Row, Section
from trimmer.report.words import CAUTIONS, UNCERTAINTY, percent, plural, shown
from trimmer.upkeep.drift import course_from

MOST_UNITS = 40
"""Units that stand on the page, those trimmed last."""


def kind_page(book: Book, kind: str) -> Page:
    """Gather a kind's page.

    Raises
    ------
    CommandError
        The book has no finished sheet of this kind.
    """
    sheets = _latest_of_each(book, kind)
    if not sheets:
        raise CommandError(
            f"the book has no finished sheet of a kind {kind!r}",
            "Check the name with `trimmer log list`, or trim a unit with `trimmer tune --kind NAME`.",
        )
    ends = [sheet.end.reading.thd for sheet in sheets if sheet.end and sheet.end.reading]
    values = np.array([thd.value for thd in ends])
    found = np.array([sheet.turns[0].reading.thd.value for sheet in sheets if sheet.turns])
    turns = tuple(sheet.row.turns for sheet in sheets)
    return Page(
        title=f"Kind {shown(kind)}",
        subtitle=f"{plural(len(sheets), 'unit')}, the latest sheet of each",
        result=f"THD {percent(float(np.median(values)))}, median",
        facts=(
            ("Units", str(len(sheets))),
            ("Latest sheet", sheets[0].row.id),
        ),
        figures=(
            *_spread("THD as found", found),
            *_spread("THD once trimmed", values),
            ("Turns needed", f"{np.median(turns):.0f} (median), {max(turns)} at most"),
        ),
        sections=(*_drift_section(book, kind), Section("What the figures mean", UNCERTAINTY)),
        cautions=CAUTIONS,
        units=Course(
            x=np.arange(float(len(ends))),
            value=values,
            low=np.array([thd.low for thd in ends]),
            high=np.array([thd.high for thd in ends]),
            labels=tuple(shown(sheet.row.unit, 12) for sheet in sheets),
        ),
        needed=turns,
        drift=_drift(book, kind),
    )


def _latest_of_each(book: Book, kind: str) -> list[Sheet]:
    """Give the latest finished sheet of each unit, newest first."""
    seen: dict[str, Sheet] = {}
    for row in book.sheets(SheetFilter(kind=kind, finished=True), limit=20 * MOST_UNITS):
        if row.unit in seen or row.thd is None or len(seen) >= MOST_UNITS:
            continue
        sheet = book.sheet(row.id)
        if sheet.end is not None and sheet.end.reading is not None:
            seen[row.unit] = sheet
    return list(seen.values())


def _spread(name: str, values: Array) -> tuple[Row, ...]:
    if not values.size:
        return ((name, "not known"),)
    low, middle, high = (percent(float(v)) for v in np.quantile(values, [0.0, 0.5, 1.0]))
    return ((f"{name}, median", middle), ("least to largest", f"{low} to {high}"))


def _drift(book: Book, kind: str) -> Course | None:
    """Give how far the parts of the kind's units are from warm, by minutes: median and range."""
    courses = [
        course_from(record.document["course"])
        for record in book.records("warmup", kind=kind, limit=50)
        if "course" in record.document
    ]
    if not courses:
        return None
    minutes = np.linspace(0.0, max(float(each.minutes[-1]) for each in courses), 60)
    away = np.array(
        [
            np.interp(minutes, each.minutes, np.linalg.norm(each.parts - each.parts[-1], axis=1))
            for each in courses
        ]
    )
    return Course(minutes, np.median(away, axis=0), away.min(axis=0), away.max(axis=0))


def _drift_section(book: Book, kind: str) -> tuple[Section, ...]:
    drift = _drift(book, kind)
    if drift is None:
        return ()
    near = np.flatnonzero(drift.value <= 1e-4)
    count = len(book.records("warmup", kind=kind, limit=50))
    when = f"{drift.x[near[0]]:.3g} minutes" if near.size else "not within the warm-ups seen"
    lines = (
        f"{plural(count, 'warm-up')} in the book; the parts start {percent(float(drift.value[0]))} "
        f"from their warm values and come within 0.01 % after {when}.",
    )
    return (Section("Drift", lines),)
