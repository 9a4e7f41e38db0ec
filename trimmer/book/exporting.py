"""Exports: every row of the book as JSON without loss, or the sheets' figures as a table.

The JSON is one array, one row of the book a line, so that it can be read by any JSON reader, and
also a line at a time, however long. The first row says what follows.
"""

from __future__ import annotations

import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, TextIO

import sqlalchemy as sa

import trimmer
from trimmer.book import queries as q
from trimmer.book import tables as t
from trimmer.book.book import Book
from trimmer.book.columns import dumps, stamp
from trimmer.book.entries import SheetFilter
from trimmer.book.migrate import applied
from trimmer.book.summaries import sheets_in_short
from trimmer.book.tabled import write_table
from trimmer.book.waveforms import unpack_samples
from trimmer.errors import BookError

FORM = 1
"""Number of the form of the export; a form is never changed, only followed by the next."""

_AT_ONCE = 200
_PARTS = (t.turn, t.state, t.sheet_end, t.correction, t.learned)


def export_book(book: Book, path: Path, which: SheetFilter | None = None) -> int:
    """Write sheets to a file, as its name says, and count them.

    Parameters
    ----------
    book
        The book.
    path
        ``.json`` takes all that belongs to the sheets; without a filter also every record and
        reference. ``.csv`` takes their figures.
    which
        The sheets to take; None for all.

    Raises
    ------
    BookError
        The book or the file failed. A file that was there before is then as it was.
    """
    ending = path.suffix.lower()
    if ending not in (".json", ".csv"):
        raise BookError(
            f"{path} ends in neither .json nor .csv.", "Name the export so that it does."
        )
    with _replaced(path) as file:
        if ending == ".csv":
            return book.examine(lambda connection: _write_table(connection, file, which))
        return write_rows(book, file, which)


@contextmanager
def _replaced(path: Path) -> Iterator[TextIO]:
    """Give a file that takes the place of `path` once it is complete and on the disk."""
    try:
        handle, name = tempfile.mkstemp(dir=path.absolute().parent, prefix=f".{path.name}.")
    except OSError as error:
        raise BookError(f"{path} cannot be written: {error.strerror}.") from error
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="") as file:
            yield file
            file.flush()
            os.fsync(file.fileno())
        os.chmod(name, 0o666 & ~_mask())
        os.replace(name, path)
    except OSError as error:
        raise BookError(
            f"{path} cannot be written: {error.strerror}.", "Check the space left on that disk."
        ) from error
    finally:
        with suppress(FileNotFoundError):
            os.unlink(name)


def _mask() -> int:
    mask = os.umask(0o077)
    os.umask(mask)
    return mask


def _write_table(connection: sa.Connection, to: TextIO, which: SheetFilter | None) -> int:
    _begin_anew(to)
    return write_table(sheets_in_short(connection, which or SheetFilter()), to)


def _begin_anew(to: TextIO) -> None:
    """Empty the file: a question to a server that went away half-way is put again elsewhere."""
    if to.seekable():
        to.seek(0)
        to.truncate()


def write_rows(book: Book, to: TextIO, which: SheetFilter | None = None) -> int:
    """Write rows as JSON and count the sheets among them; all from one moment of the book."""
    return book.examine(lambda connection: _write_rows(connection, to, which))


def _write_rows(connection: sa.Connection, to: TextIO, which: SheetFilter | None) -> int:
    head = {
        "row": "book",
        "form": FORM,
        "program": trimmer.__version__,
        "exported_at": stamp(datetime.now(UTC)),
        "steps": sorted(applied(connection)),
    }
    _begin_anew(to)
    to.write("[\n" + dumps(head))
    number = 0
    for table, row in _rows(connection, which):
        number += table is t.sheet
        to.write(",\n" + dumps({"row": table.name, **spoken(table, row)}))
    to.write("\n]\n")
    return number


def spoken(table: sa.Table, row: sa.RowMapping) -> dict[str, Any]:
    """Give a row as JSON says it: instants as text, a waveform as its samples."""
    said = dict(row)
    for column in table.columns:
        if isinstance(said[column.name], datetime):
            said[column.name] = stamp(said[column.name])
    if table is t.turn and said["waveform"] is not None:
        said["waveform"] = unpack_samples(bytes(said["waveform"])).tolist()
    return said


def _rows(
    connection: sa.Connection, which: SheetFilter | None
) -> Iterator[tuple[sa.Table, sa.RowMapping]]:
    chosen = list(connection.scalars(_chosen(which)))
    for start in range(0, len(chosen), _AT_ONCE):
        ids = chosen[start : start + _AT_ONCE]
        yield from _each(connection, t.sheet, t.sheet.c.id.in_(ids))
        for table in _PARTS:
            yield from _each(connection, table, table.c.sheet_id.in_(ids))
    yield from _records(connection, which, chosen)
    if which is None:
        yield from _each(connection, t.reference, sa.true())


def _chosen(which: SheetFilter | None) -> sa.Select[str]:
    cards = q.sheets(which or SheetFilter(), None, 0).subquery()
    return sa.select(cards.c.sheet_id).order_by(cards.c.sheet_id)


def _records(
    connection: sa.Connection, which: SheetFilter | None, chosen: list[str]
) -> Iterator[tuple[sa.Table, sa.RowMapping]]:
    """Give the records of the sheets chosen, and those of no sheet that unit and kind let through."""
    record, sheets = t.record.c, set(chosen)
    loose: list[sa.ColumnElement[bool]] = [record.sheet_id.is_(None)]
    if which is not None and which.unit is not None:
        loose.append(record.unit == which.unit)
    if which is not None and which.kind is not None:
        loose.append(record.kind == which.kind)
    for _, row in _each(
        connection, t.record, sa.or_(record.sheet_id.is_not(None), sa.and_(*loose))
    ):
        if row["sheet_id"] is not None and row["sheet_id"] not in sheets:
            continue
        yield t.record, row
        for table in (t.record_point, t.record_end):
            yield from _each(connection, table, table.c.record_id == row["id"])


def _each(
    connection: sa.Connection, table: sa.Table, condition: sa.ColumnElement[bool]
) -> Iterator[tuple[sa.Table, sa.RowMapping]]:
    for row in connection.execute(
        sa.select(table).where(condition).order_by(table.c.id)
    ).mappings():
        yield table, row
