"""Kills a bench's program at a random moment and looks at what its book has."""

from __future__ import annotations

import json
import os
import random
import signal
import sqlite3
import subprocess
import sys
from contextlib import closing
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from tests.book import samples as s
from tests.book.test_book import same_entry
from trimmer.book import Book, SheetRow, open_book
from trimmer.guidance import Guide


@dataclass(frozen=True)
class Kill:
    """What one killed program had said, and what its book had then."""

    acknowledged: int
    """Turns that were acknowledged before the kill."""
    kept: int
    """Turns in the book."""
    resumed: bool
    """Whether a sheet had to be taken up again, and could be."""


def kill_command(home: Path, seed: int) -> Kill:
    """Start the real command with its own hands, kill it, and check that its book has what it said.

    Raises
    ------
    AssertionError
        A reading that was said is not in the book, or the sheet cannot be taken up.
    """
    dice = random.Random(seed)
    program = subprocess.Popen(
        [sys.executable, "-m", "trimmer", "demo", "--hands", "auto", "--json", "--seed", str(seed)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env={**os.environ, "TRIMMER_HOME": str(home)},
    )
    assert program.stdout is not None
    said = [program.stdout.readline()]
    try:
        program.wait(dice.uniform(0.0, 1.5))
    except subprocess.TimeoutExpired:
        program.kill()
    rest, trouble = program.communicate()
    assert said[0], f"the command said nothing but: {trouble}"
    events = [json.loads(line) for line in said + rest[: rest.rfind("\n") + 1].splitlines()]
    with open_book(demo=True, location=home / "demo-book.sqlite") as book:
        return _compare(book, [event for event in events if event["event"] == "reading"])


def _compare(book: Book, said: list[dict[str, Any]]) -> Kill:
    (row,) = book.sheets()
    resumed = book.resume(row.id)
    kept = {entry.taken_at.isoformat(): entry for entry in resumed.sheet.turns}
    for event in said:
        entry = kept[datetime.fromisoformat(event["taken_at"]).astimezone(UTC).isoformat()]
        assert (entry.turn, entry.reading.thd.value) == (event["turn"], event["thd"])
    if not row.finished:
        guide = Guide.from_document(resumed.state) if resumed.state is not None else None
        made, heard = guide.turns_made if guide else 0, max(event["turn"] for event in said)
        assert made >= heard - 1, f"the guide's state is of turn {made}, the reading of {heard}"
        book.add_turn(row.id, s.entry(row.turns + 1))
    return Kill(len(said), len(kept), not row.finished)


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


def _kept(book: Book, rows: dict[str, SheetRow], acknowledged: set[tuple[str, int]]) -> int:
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


def _go_on(book: Book, sheet: str) -> bool:
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
