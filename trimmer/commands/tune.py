"""`trimmer tune`: guide the two trims of a unit and log the result."""

from __future__ import annotations

import argparse
import contextlib
import sys
from collections.abc import Callable

from trimmer.commands.later import Begun, Later
from trimmer.commands.opening import shape_of
from trimmer.console import complain
from trimmer.errors import CommandError

Begin = Callable[[contextlib.ExitStack], Begun]


def run(options: argparse.Namespace) -> int:
    """Hold a session on the source, by the face asked for."""
    shape = shape_of(options.source)
    if shape == "file":
        raise CommandError(
            f"{options.source} is one capture; trimming needs one after each turn",
            "Name a folder and save a capture into it after each turn, or use `trimmer measure`.",
        )
    return hold(options, options.source, simulated=shape == "bench", paced=shape == "folder")


def without_screen(options: argparse.Namespace) -> bool:
    """Say whether lines take the screen's place; where there is no terminal, say so on stderr."""
    if options.json or options.plain:
        return True
    if sys.stdin.isatty() and sys.stdout.isatty():
        return False
    complain("there is no terminal for the screen: going on in plain lines", "")
    return True


def hold(
    options: argparse.Namespace,
    word: str,
    *,
    simulated: bool,
    paced: bool = False,
    demo: bool = False,
    hands_auto: bool = False,
) -> int:
    """Hold a session by the face asked for.

    Parameters
    ----------
    options
        The command's.
    word
        SOURCE.
    simulated
        True for the simulated unit: the screen's keys turn its trims.
    paced
        True where new files say that a turn was made.
    demo
        True for the demonstration's own book.
    hands_auto
        True where a simulated hand turns: nothing is asked of stdin.
    """
    plain = without_screen(options)

    def begin(stack: contextlib.ExitStack) -> Begun:
        from trimmer.commands import holding

        follow = options.follow or not plain
        return holding.begin(options, word, stack, follow=follow, demo=demo, hands_auto=hands_auto)

    if not plain:
        from trimmer.screen import run_tune

        session = Later(begin)
        hand = session if simulated else None
        return run_tune(session, source=word, hand=hand, travel=options.travel)
    return _lines(options, begin, end_quits=not (paced or options.follow or hands_auto))


def _lines(options: argparse.Namespace, begin: Begin, *, end_quits: bool) -> int:
    """Hold a session in lines; what cannot be opened ends the command before a line is printed."""
    from trimmer.commands.faces import JsonFace, PlainFace, converse
    from trimmer.commands.words import listen

    with contextlib.ExitStack() as stack:
        session = begin(stack).session
        listen(session, end_quits=end_quits)
        limit_thd = options.limit_thd
        face = (
            JsonFace(limit_thd=limit_thd)
            if options.json
            else PlainFace(prompt=end_quits, limit_thd=limit_thd)
        )
        return converse(session, face)
