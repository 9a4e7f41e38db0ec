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
from trimmer.guidance import Guide
from trimmer.keeping import Keeper, prior_of
from trimmer.reports import SheetNotes
from trimmer.session import Manner, Session

STILL_FRAMES = 4
"""Captures combined into a still reading."""


def session_of(options: argparse.Namespace, source: Opened, book: Book, *, follow: bool) -> Session:
    """Build the session from the command's options."""
    notes = SheetNotes(unit=options.unit, kind=options.kind or "", notes=dict(options.note))
    keeper = Keeper(book, notes, travel_turns=options.travel, orders=options.orders)
    follows = follow and not source.source.info.paced_by_person
    guide = Guide(travel_turns=options.travel, followed=follows, prior=prior_of(book, keeper.kind))
    asked = wanted(options, frames=STILL_FRAMES, reference=reference_of(book, options))
    manner = Manner(wanted=asked, follow=follows)
    return Session(source.source, guide, keeper, manner)


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
