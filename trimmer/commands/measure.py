"""`trimmer measure`: one reading of each source."""

from __future__ import annotations

import argparse
import contextlib
import sys

from drivers import SourceError, UnusableCapture, clean
from trimmer.book import Book, open_book
from trimmer.commands.chain import reference_of, store
from trimmer.commands.opening import opened
from trimmer.commands.wording import limit_fields, limit_lines, reading_lines
from trimmer.console import SIGNAL_UNUSABLE, SOURCE_FAILED, complain
from trimmer.errors import CommandError
from trimmer.events import line, reading_event
from trimmer.intake import Intake, Wanted
from trimmer.measurement import MeasurementError, Reference


def run(options: argparse.Namespace) -> int:
    """Read each source in order; one that fails is said, and the others are still read.

    Returns
    -------
    int
        0, or the status of the first source that failed.
    """
    if options.store and (not options.reference or len(options.sources) != 1):
        raise CommandError(
            "--store needs one source and a name for it", "Add `--reference NAME`, with one SOURCE."
        )
    with contextlib.ExitStack() as stack:
        book = stack.enter_context(open_book(options.book)) if options.reference else None
        reference = reference_of(book, options) if book and not options.store else None
        status = 0
        for word in options.sources:
            failed = _one(word, options, book, reference)
            status = status or failed
    return status


def wanted(options: argparse.Namespace, frames: int, reference: Reference | None = None) -> Wanted:
    """Give what the command's options ask of a reading."""
    points = options.until_sigma
    return Wanted(
        orders=options.orders,
        frames=frames,
        until_sigma=None if points is None else points / 100.0,
        reference=reference,
    )


def _one(
    word: str, options: argparse.Namespace, book: Book | None, reference: Reference | None
) -> int:
    try:
        with opened(word, options) as source:
            taken = Intake(source.source, wanted(options, frames=4, reference=reference)).still()
    except (MeasurementError, UnusableCapture) as error:
        complain(f"{clean(word)}: {error}", error.remedy)
        return SIGNAL_UNUSABLE
    except SourceError as error:
        complain(f"{clean(word)}: {error}", error.remedy)
        return SOURCE_FAILED
    waveform = taken.waveform
    if book is not None and options.store:
        store(book, options.reference, waveform.taken_at, waveform.source, taken.reading)
    if options.json:
        event = reading_event(
            None, waveform.taken_at, waveform.source, taken.reading, notes=list(waveform.notes)
        )
        event |= limit_fields(taken.reading, options.limit_thd)
        print(line(event), flush=True)
        return 0
    for text in reading_lines(waveform.source, taken.reading, waveform.notes):
        print(text)
    for text in limit_lines(taken.reading, options.limit_thd):
        print(text)
    sys.stdout.flush()
    return 0
