"""Lists, filters and opens units in a book of a hundred thousand sheets.

Run as ``python -m tests.campaigns.book_large [SHEETS] [TURNS]``. The sheets are whole: readings with
their covariances, waveforms, states, ends. Each figure is the slowest of ten tries, the first of
them with a book just opened; the bar is 0.2 s by the clock. The processor's time beside it tells a
slow book from a busy machine. Two thousand units, twenty kinds, ten years.
"""

from __future__ import annotations

import os
import random
import statistics
import sys
import tempfile
import time
from collections.abc import Callable
from datetime import timedelta
from pathlib import Path
from typing import Any

import sqlalchemy as sa

from tests.book import samples as s
from trimmer.book import Book, SheetFilter, export_book, open_book
from trimmer.book import rows as r
from trimmer.book import tables as t
from trimmer.book.cards import refresh
from trimmer.book.ids import Ids
from trimmer.book.store import Row

BAR_S = 0.2
_PACKED = ("reading", "document", "advice", "remainder", "settings", "notes", "versions")


def main(sheets: int = 100_000, turns: int = 3) -> int:
    """Run the campaign and give its exit status."""
    with tempfile.TemporaryDirectory(prefix="trimmer-large-") as folder:
        path = Path(folder) / "book.sqlite"
        started = time.monotonic()
        with open_book(path) as book:
            fill(book, sheets, turns)
        took, size = time.monotonic() - started, path.stat().st_size / 1e9
        print(f"{sheets} sheets of {turns + 1} readings: {size:.2f} GB, filled in {took:.0f} s")
        return _measure(path)


def fill(book: Book, sheets: int, turns: int) -> None:
    """Fill a book as the sessions of many years would; documents are packed once and used again."""
    ids, dice = Ids(), random.Random(1)
    entries = [r.turn_row("", "", s.entry(n)).values for n in range(turns + 1)]
    store = book._store
    with store.writing() as connection:
        models = {
            t.turn: [_bound(connection, Row(t.turn, values)) for values in entries],
            t.sheet_end: [_bound(connection, r.end_row("", "", s.end(turns)))],
            t.state: [_bound(connection, book._state_row("", {"turn": 1}))],
        }
        for start in range(0, sheets, 2000):
            batch = range(start, min(start + 2000, sheets))
            _add(connection, [_sheet(ids.new(), n, sheets, dice) for n in batch], models, ids, dice)
        refresh(connection, sa.true())


def _bound(connection: sa.Connection, row: Row) -> dict[str, Any]:
    """Give a row's values as they go into the database."""
    dialect = connection.dialect
    return {
        name: row.table.c[name].type.dialect_impl(dialect).process_bind_param(value, dialect)
        if isinstance(row.table.c[name].type, sa.types.TypeDecorator)
        else value
        for name, value in row.values.items()
    }


def _sheet(new: str, number: int, sheets: int, dice: random.Random) -> dict[str, Any]:
    unit = dice.randrange(2000)
    at = s.START + timedelta(seconds=number * 10 * 365.25 * 86400 / sheets)
    return r.sheet_row(new, s.start(f"Unit {unit:04d}", f"kind {unit % 20}", at)).values


def _add(
    connection: sa.Connection,
    sheets: list[dict[str, Any]],
    models: dict[sa.Table, list[dict[str, Any]]],
    ids: Ids,
    dice: random.Random,
) -> None:
    connection.execute(t.sheet.insert(), sheets)
    for table, rows in models.items():
        parts = [
            {**row, "id": ids.new(), "sheet_id": sheet["id"], "thd": dice.uniform(0.002, 0.012)}
            for sheet in sheets
            for row in rows
            if table is not t.sheet_end or dice.random() < 0.97
        ]
        names = [column.name for column in table.columns]
        marks = ", ".join(f":{name}" for name in names)
        raw = sa.text(f"INSERT INTO {table.name} ({', '.join(names)}) VALUES ({marks})")
        connection.execute(raw, [{name: part.get(name) for name in names} for part in parts])


def _measure(path: Path) -> int:
    year = s.START + timedelta(days=3650 / 2)
    questions: dict[str, Callable[[Book], object]] = {
        "open the book": lambda book: None,
        "list the newest 50": lambda book: book.sheets(limit=50),
        "list page 1000": lambda book: book.sheets(limit=50, offset=50_000),
        "one unit": lambda book: book.sheets(SheetFilter(unit="Unit 0007")),
        "one kind, newest 50": lambda book: book.sheets(SheetFilter(kind="kind 7"), limit=50),
        "one kind, all of it": lambda book: book.sheets(SheetFilter(kind="kind 7")),
        "one month": lambda book: book.sheets(
            SheetFilter(since=year, until=year + timedelta(days=30))
        ),
        "over a limit, newest 50": lambda book: book.sheets(
            SheetFilter(limit_thd=0.0119), limit=50
        ),
        "over a rare limit": lambda book: book.sheets(SheetFilter(limit_thd=0.011999)),
        "over a limit that none is": lambda book: book.sheets(SheetFilter(limit_thd=0.5)),
        "stopped, newest 50": lambda book: book.sheets(SheetFilter(verdict="stopped"), limit=50),
        "open sheets of a unit": lambda book: book.open_sheets("Unit 0007"),
        "count a kind's": lambda book: book.count(SheetFilter(kind="kind 7")),
        "open a unit (kind, list, newest sheet whole)": _open_unit,
        "a sheet by its end": lambda book: book.sheet(_some_id(book)[-8:]),
        "a sheet by its beginning": lambda book: book.sheet(_some_id(book)[:20]),
        "all units": lambda book: book.units(),
    }
    worst = most = 0.0
    for name, question in questions.items():
        tries = [_time(path, question) for _ in range(10)]
        walls, works = [wall for wall, _ in tries], [work for _, work in tries]
        worst, most = max(worst, *walls), max(most, *works)
        print(
            f"{name:46} {max(walls):7.3f} s, median {statistics.median(walls):.3f} s, "
            f"of the processor {max(works):.3f} s"
        )
    print(f"most of the processor {most:.3f} s; load of the machine {os.getloadavg()[0]:.1f}")
    print(f"slowest {worst:.3f} s: {'passed' if worst < BAR_S else 'FAILED'}")
    everything, _ = _time(path, lambda book: book.sheets())
    print(f"(every one of the sheets in one list: {everything:.2f} s)")
    for ending in (".csv", ".json"):
        target = path.with_suffix(ending)
        took, _ = _time(path, lambda book: export_book(book, target, SheetFilter(kind="kind 7")))  # noqa: B023
        print(
            f"(one kind, exported as {ending}: {took:.1f} s, {target.stat().st_size / 1e6:.0f} MB)"
        )
        target.unlink()
    return 0 if worst < BAR_S else 1


def _open_unit(book: Book) -> None:
    assert book.kind_of("Unit 0007") == "kind 7"
    rows = book.sheets(SheetFilter(unit="Unit 0007"))
    assert len(book.sheet(rows[0].id).turns) > 0


def _some_id(book: Book) -> str:
    return book.sheets(limit=1, offset=777)[0].id


def _time(path: Path, question: Callable[[Book], object]) -> tuple[float, float]:
    """Give the seconds of the clock and of the processor that opening a book and a question took."""
    started, worked = time.perf_counter(), time.process_time()
    with open_book(path) as book:
        question(book)
        return time.perf_counter() - started, time.process_time() - worked


if __name__ == "__main__":
    raise SystemExit(main(*map(int, sys.argv[1:])))
