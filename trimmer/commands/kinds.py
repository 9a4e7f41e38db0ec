"""What the book knows of a unit and its kind, for the commands around the trimming."""

from __future__ import annotations

import argparse

from trimmer.book import Book
from trimmer.errors import CommandError
from trimmer.guidance import Learned
from trimmer.guidance.warming import Warming
from trimmer.upkeep.drift import course_from

EARLIER = 50
"""Earlier warm-ups of a kind that are looked at."""


def kind_of(book: Book, options: argparse.Namespace) -> str:
    """Give the kind that was said, else the unit's last one, else none."""
    kind = options.kind or (book.kind_of(options.unit) if options.unit else "")
    return kind or ""


def learned_of(book: Book, unit: str) -> Learned | None:
    """Give what a unit taught last; None where it taught nothing that can be read."""
    rows = book.learned_of(unit=unit, limit=1) if unit else []
    try:
        return Learned.from_document(dict(rows[0].document)) if rows else None
    except (KeyError, ValueError):
        return None


def warm_ups_of(book: Book, kind: str) -> list[Warming]:
    """Give the courses of a kind's settled warm-ups, newest first."""
    if not kind:
        return []
    found = book.records("warmup", kind=kind, limit=EARLIER)
    return [course_from(each.document["course"]) for each in found if "course" in each.document]


def minutes_noted(options: argparse.Namespace) -> float | None:
    """Give the minutes since switch-on that the person noted; None where nothing was.

    Raises
    ------
    CommandError
        What was noted is no number of minutes.
    """
    said = dict(options.note).get("minutes")
    if said is None:
        return None
    try:
        minutes = float(said)
    except ValueError:
        minutes = -1.0
    if not 0.0 <= minutes < 1e5:
        raise CommandError(
            f"{said!r} is no number of minutes since switch-on", "Write it as `--note minutes=3`."
        )
    return minutes
