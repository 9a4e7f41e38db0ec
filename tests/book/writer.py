"""A bench as a program of its own: writes sheets to a book and says what was acknowledged.

Run as ``python -m tests.book.writer BOOK HOME SHEETS TURNS``. A line is said only once the call that
it is about has returned.
"""

from __future__ import annotations

import os
import sys

from tests.book import samples as s
from trimmer.book import open_book


def say(*words: object) -> None:
    """Say a line at once."""
    sys.stdout.write(" ".join(map(str, words)) + "\n")
    sys.stdout.flush()


def main(location: str, home: str, sheets: int, turns: int) -> None:
    """Write the sheets."""
    os.environ["TRIMMER_HOME"] = home
    with open_book(location or None) as book:
        for number in range(sheets):
            sheet = book.begin_sheet(s.start(f"Unit {os.getpid()}-{number}"))
            say("begun", sheet)
            for turn in range(turns + 1):
                book.add_turn(sheet, s.entry(turn, samples=500), state={"turn": turn})
                say("turn", sheet, turn)
            book.finish_sheet(sheet, s.end(turns))
            say("finished", sheet)


if __name__ == "__main__":
    main(sys.argv[1], sys.argv[2], int(sys.argv[3]), int(sys.argv[4]))
