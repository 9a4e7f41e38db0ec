"""`trimmer demo`: the whole job on the built-in simulated unit, with a book of its own."""

from __future__ import annotations

import argparse
import secrets

from trimmer.book import open_book
from trimmer.commands.hands import HandsOn
from trimmer.commands.opening import opened
from trimmer.commands.tune import hold, session_of, without_screen

DEMO_UNIT = "demo unit"


def run(options: argparse.Namespace) -> int:
    """Start the simulated unit and hold a session on it; `--hands auto` turns the trims too."""
    plain = without_screen(options)
    auto = options.hands == "auto"
    if options.seed is None:
        options.seed = secrets.randbelow(100_000)
    options.unit = options.unit or DEMO_UNIT
    with open_book(options.book, demo=True) as book, opened("bench", options) as source:
        assert source.bench is not None
        session = session_of(options, source, book, follow=options.follow or not plain)
        if not auto:
            return hold(options, session, "bench", plain=plain, hand=source.bench)
        with HandsOn(session, source.bench, seed=options.seed) as turned:
            return hold(options, turned, "bench", plain=plain, hand=source.bench, hands_off=True)
