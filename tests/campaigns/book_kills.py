"""Kills a program that writes sheets at two hundred random moments (signal 9).

Run as ``python -m tests.campaigns.book_kills [KILLS]``. Half the kills fall on one book, one after
another; half each on a book of its own.
"""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path

from tests.book.kills import kill_once


def main(kills: int = 200) -> int:
    """Run the campaign and give its exit status."""
    acknowledged = resumed = 0
    with tempfile.TemporaryDirectory(prefix="trimmer-kills-") as folder:
        for seed in range(kills):
            # A book killed again and again grows; a new one every twenty keeps the checks short.
            name = f"again-{seed // 40}" if seed % 2 else f"once-{seed}"
            kill = kill_once(Path(folder) / name, seed)
            acknowledged += kill.acknowledged
            resumed += kill.resumed
    print(f"{kills} kills: {acknowledged} acknowledged turns, all in the book, bit for bit;")
    print(f"{resumed} sheets that broke off, all taken up where they stopped and finished")
    return 0


if __name__ == "__main__":
    raise SystemExit(main(*map(int, sys.argv[1:])))
