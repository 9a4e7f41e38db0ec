"""`trimmer demo`: the whole job on the built-in simulated unit, with a book of its own."""

from __future__ import annotations

import argparse
import secrets

from trimmer.commands.tune import hold

DEMO_UNIT = "demo unit"


def run(options: argparse.Namespace) -> int:
    """Start the simulated unit and hold a session on it; `--hands auto` turns the trims too."""
    if options.seed is None:
        options.seed = secrets.randbelow(100_000)
    options.unit = options.unit or DEMO_UNIT
    return hold(options, "bench", simulated=True, demo=True, hands_auto=options.hands == "auto")
