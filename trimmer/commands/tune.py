"""`trimmer tune`: guide the two trims of a unit and log the result."""

from __future__ import annotations

import argparse
import sys

from trimmer.book import Book, open_book
from trimmer.commands.chain import reference_of
from trimmer.commands.faces import JsonFace, PlainFace, converse
from trimmer.commands.measure import wanted
from trimmer.commands.opening import Opened, opened, shape_of
from trimmer.commands.words import listen
from trimmer.console import complain
from trimmer.errors import CommandError
from trimmer.guidance import Guide
from trimmer.keeping import Keeper, prior_of
from trimmer.reports import Conversation, Screwdriver, SheetNotes
from trimmer.session import Manner, Session

STILL_FRAMES = 4
"""Captures combined into a still reading."""


def run(options: argparse.Namespace) -> int:
    """Open the source, hold the session, show it by the face asked for."""
    if shape_of(options.source) == "file":
        raise CommandError(
            f"{options.source} is one capture; trimming needs one after each turn",
            "Name a folder and save a capture into it after each turn, or use `trimmer measure`.",
        )
    plain = without_screen(options)
    with open_book(options.book) as book, opened(options.source, options) as source:
        session = session_of(options, source, book, follow=options.follow or not plain)
        return hold(
            options, session, options.source, plain=plain, paced=paced(source), hand=source.bench
        )


def without_screen(options: argparse.Namespace) -> bool:
    """Say whether lines take the screen's place; where there is no terminal, say so on stderr."""
    if options.json or options.plain:
        return True
    if sys.stdin.isatty() and sys.stdout.isatty():
        return False
    complain("there is no terminal for the screen: going on in plain lines", "")
    return True


def paced(source: Opened) -> bool:
    """Say whether new captures are the person's own acts, so that nothing hangs on stdin."""
    return source.source.info.paced_by_person


def session_of(options: argparse.Namespace, source: Opened, book: Book, *, follow: bool) -> Session:
    """Build the session from the command's options."""
    notes = SheetNotes(unit=options.unit, kind=options.kind or "", notes=dict(options.note))
    keeper = Keeper(book, notes, travel_turns=options.travel, orders=options.orders)
    follows = follow and not paced(source)
    guide = Guide(travel_turns=options.travel, followed=follows, prior=prior_of(book, keeper.kind))
    asked = wanted(options, frames=STILL_FRAMES, reference=reference_of(book, options))
    manner = Manner(wanted=asked, follow=follows)
    return Session(source.source, guide, keeper, manner)


def hold(
    options: argparse.Namespace,
    session: Conversation,
    word: str,
    *,
    plain: bool,
    paced: bool = False,
    hand: Screwdriver | None = None,
    hands_off: bool = False,
) -> int:
    """Hold a session by the face asked for.

    Parameters
    ----------
    options
        The command's.
    session
        The session.
    word
        SOURCE.
    plain
        True for lines in place of the screen.
    paced
        True where new files say that a turn was made.
    hand
        What the screen's keys turn, on the simulated unit.
    hands_off
        True where a simulated hand turns: nothing is asked of stdin.
    """
    if not plain:
        from trimmer.screen import run_tune

        return run_tune(session, source=word, hand=hand, travel=options.travel)
    listen(session, end_quits=not (paced or options.follow or hands_off))
    face = JsonFace() if options.json else PlainFace(prompt=not hands_off)
    return converse(session, face)
