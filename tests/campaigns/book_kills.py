"""Kills programs that write sheets at hundreds of random moments (signal 9).

Run as ``python -m tests.campaigns.book_kills [KILLS] [COMMANDS]``. The first number of kills falls on
a program that writes turns as fast as it can, half of them on one book again and again; the second on
the real command, trimming the simulated unit with its own hands.
"""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path

from tests.book.kills import Kill, kill_command, kill_once


def main(kills: int = 200, commands: int = 200) -> int:
    """Run the campaign and give its exit status."""
    with tempfile.TemporaryDirectory(prefix="trimmer-kills-") as folder:
        home = Path(folder)
        # A book killed again and again grows; a new one every twenty keeps the checks short.
        names = [f"again-{n // 40}" if n % 2 else f"once-{n}" for n in range(kills)]
        _report("writer", [kill_once(home / name, n) for n, name in enumerate(names)])
        _report("command", [kill_command(home / f"command-{n}", n) for n in range(commands)])
    return 0


def _report(what: str, kills: list[Kill]) -> None:
    acknowledged = sum(kill.acknowledged for kill in kills)
    resumed = sum(kill.resumed for kill in kills)
    print(
        f"{what}: {len(kills)} kills, {acknowledged} acknowledged turns, all in the book;", end=" "
    )
    print(f"{resumed} sheets broke off, and were all taken up where they stopped", flush=True)


if __name__ == "__main__":
    raise SystemExit(main(*map(int, sys.argv[1:])))
