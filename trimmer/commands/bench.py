"""`trimmer bench`: the simulated unit alone, as an SCPI instrument on the loopback address."""

from __future__ import annotations

import argparse
import sys
import time

from trimmer.console import complain
from trimmer.errors import CommandError


def run(options: argparse.Namespace) -> int:
    """Serve until interrupted; lines on stdin turn the trims."""
    from drivers.bench import Bench, parse_turn

    try:
        bench = Bench(
            options.seed,
            dialect=options.dialect,
            fault=options.fault,
            port=options.port,
            travel_turns=options.travel,
        )
    except ValueError as error:
        raise CommandError(str(error), "Choose one of the names given.") from error
    except OSError as error:
        raise CommandError(
            f"port {options.port} cannot be opened: {error.strerror}",
            "Choose another port; 0 takes any free one.",
        ) from error
    with bench:
        print(f"{bench.resource}  (trims: upper 0.06, lower -0.02; plus is clockwise)", flush=True)
        for text in sys.stdin:
            if not text.strip():
                continue
            try:
                trim, turns = parse_turn(text)
                bench.turn(trim, turns)
            except ValueError as error:
                complain(error, "Write a trim and its screw turns, such as: upper 0.06")
            else:
                print(f"{trim} {turns:+.4f}", flush=True)  # tells a script that it is done
        while True:  # the end of stdin leaves the instrument running, as a power switch would
            time.sleep(3600.0)
