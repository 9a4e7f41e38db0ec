"""Kills a bench's program at a random moment and looks at what its book has."""

from __future__ import annotations

import os
import random
import signal
import sqlite3
import subprocess
import sys
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path

from tests.book import samples as s
from tests.book.test_book import same_entry
from trimmer.book import open_book


@dataclass(frozen=True)
class Kill:
    """What one killed program had said, and what its book had then."""

    acknowledged: int
    """Turns that were acknowledged before the kill."""
    kept: int
    """Turns in the book."""
    resumed: bool
    """Whether a sheet had to be taken up again, and could be."""


def kill_once(home: Path, seed: int) -> Kill:
    """Start a program that writes sheets without end, kill it (signal 9), and check its book.

    Raises
    ------
    AssertionError
        Something acknowledged is not in the book, or the book is damaged, or cannot be gone on with.
    """
    said = _run_and_kill(home, random.Random(seed))
    turns = {(words[1], int(words[2])) for words in said if words[0] == "turn"}
    finished = {words[1] for words in said if words[0] == "finished"}
    begun = {words[1] for words in said if words[0] == "begun"}
    with closing(sqlite3.connect(home / "book.sqlite")) as raw:
        assert raw.execute("PRAGMA integrity_check").fetchall() == [("ok",)]
    with open_book(home / "book.sqlite") as book:
        rows = {row.id: row for row in book.sheets()}
        assert begun <= set(rows)
        assert all(rows[sheet].finished for sheet in finished)
        kept = _kept(book, rows, turns)
        resumed = [_go_on(book, row.id) for row in book.open_sheets()]
    return Kill(len(turns), kept, bool(resumed))


def _run_and_kill(home: Path, dice: random.Random) -> list[list[str]]:
    program = subprocess.Popen(
        [
            sys.executable,
            "-m",
            "tests.book.writer",
            str(home / "book.sqlite"),
            str(home),
            "1000",
            "5",
        ],
        stdout=subprocess.PIPE,
        text=True,
    )
    assert program.stdout is not None
    said = [program.stdout.readline().split()]
    assert said[0]
    try:
        # The moment lies anywhere in the time of some thirty turns after the first line.
        program.wait(dice.uniform(0.0, 0.3))
    except subprocess.TimeoutExpired:
        os.kill(program.pid, signal.SIGKILL)
    rest, _ = program.communicate()
    assert program.returncode == -signal.SIGKILL
    # A line that was cut by the kill was not heard by anyone.
    whole = rest[: rest.rfind("\n") + 1]
    return said + [line.split() for line in whole.splitlines()]


def _kept(book, rows, acknowledged) -> int:  # type: ignore[no-untyped-def]
    """Compare every turn in the book, figure by figure, with what was written."""
    kept = 0
    for sheet in rows:
        entries = book.sheet(sheet).turns
        assert [entry.turn for entry in entries] == list(range(len(entries)))
        assert all(same_entry(e, s.entry(n, samples=500)) for n, e in enumerate(entries))
        kept += len(entries)
        missing = {turn for each, turn in acknowledged if each == sheet} - set(range(len(entries)))
        assert not missing, f"turns {missing} of {sheet} were acknowledged and are gone"
    return kept


def _go_on(book, sheet: str) -> bool:  # type: ignore[no-untyped-def]
    """Take a sheet up where it stopped and finish it."""
    resumed = book.resume(sheet)
    number = len(resumed.sheet.turns)
    assert resumed.sheet.row.verdict == "stopped"
    # The state is of the same turn as the last reading: the two are written in one.
    assert resumed.state == ({"turn": number - 1} if number else None)
    book.add_turn(sheet, s.entry(number, samples=500), state={"turn": number})
    book.finish_sheet(sheet, s.end(number))
    assert [entry.turn for entry in book.sheet(sheet).turns] == list(range(number + 1))
    return True
