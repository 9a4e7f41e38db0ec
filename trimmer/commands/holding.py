"""Builds a session from a command's options, on an open source and an open book."""

from __future__ import annotations

import argparse
import contextlib

from trimmer.book import Book, open_book
from trimmer.commands.chain import reference_of
from trimmer.commands.hands import HandsOn
from trimmer.commands.later import Begun
from trimmer.commands.measure import wanted
from trimmer.commands.opening import Opened, opened
from trimmer.errors import CommandError
from trimmer.guidance import Guide
from trimmer.keeping import Keeper, prior_of
from trimmer.measurement import Reading
from trimmer.reports import SheetNotes
from trimmer.session import Manner, Session

STILL_FRAMES = 4
"""Captures combined into a still reading."""


def session_of(options: argparse.Namespace, source: Opened, book: Book, *, follow: bool) -> Session:
    """Build the session from the command's options."""
    notes = SheetNotes(unit=options.unit, kind=options.kind or "", notes=dict(options.note))
    keeper = Keeper(book, notes, travel_turns=options.travel, orders=options.orders)
    follows = follow and not source.source.info.paced_by_person
    guide, before = None, None
    if options.resume:
        guide, before = taken_up(book, options.resume, keeper)
    if guide is None:
        prior = prior_of(book, keeper.kind)
        guide = Guide(travel_turns=options.travel, followed=follows, prior=prior)
    asked = wanted(options, frames=STILL_FRAMES, reference=reference_of(book, options))
    manner = Manner(wanted=asked, follow=follows)
    return Session(source.source, guide, keeper, manner, before)


def taken_up(book: Book, name: str, keeper: Keeper) -> tuple[Guide | None, Reading | None]:
    """Take up a sheet that broke off, as far as it went.

    Returns
    -------
    guide
        As it stood; None where the sheet broke off before the guide knew anything.
    before
        The last reading in the sheet.

    Raises
    ------
    CommandError
        The sheet was finished.
    """
    resumed = book.resume(name)
    row, turns = resumed.sheet.row, resumed.sheet.turns
    if row.finished and row.verdict != "stopped":
        raise CommandError(
            f"sheet {row.id} is finished: {row.verdict}", "Begin a new one without `--resume`."
        )
    keeper.take_up(resumed)
    if resumed.state is None or not turns:
        return None, None
    guide = Guide.from_document(resumed.state)
    if turns[-1].turn > guide.turns_made:  # broke off after the reading, before the next advice
        guide.observe(turns[-1].reading)
    return guide, turns[-1].reading


def begin(
    options: argparse.Namespace,
    word: str,
    stack: contextlib.ExitStack,
    *,
    follow: bool,
    demo: bool = False,
    hands_auto: bool = False,
) -> Begun:
    """Open book and source and build the session.

    Parameters
    ----------
    options
        The command's.
    word
        SOURCE.
    stack
        Closes what is opened here.
    follow
        True to watch the hand while it turns.
    demo
        True for the demonstration's own book.
    hands_auto
        True where a simulated hand turns the trims.
    """
    book = stack.enter_context(open_book(options.book, demo=demo))
    source = stack.enter_context(opened(word, options))
    session = session_of(options, source, book, follow=follow)
    if hands_auto and source.bench is not None:
        turned = stack.enter_context(HandsOn(session, source.bench, seed=options.seed))
        return Begun(turned, source.bench)
    return Begun(session, source.bench)
