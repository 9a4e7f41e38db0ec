"""One database of the book: adds rows, each batch in one transaction, and keeps the cards."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import sqlalchemy as sa
from sqlalchemy.dialects import postgresql, sqlite

from trimmer.book import tables as t
from trimmer.book.cards import refresh
from trimmer.book.columns import dumps
from trimmer.book.entries import Merged
from trimmer.book.faults import BookBehind, guarded, legible
from trimmer.book.migrate import applied, check, migrate
from trimmer.errors import BookError


@dataclass(frozen=True, slots=True)
class Row:
    """A row to be added to a record table."""

    table: sa.Table
    """Where it belongs."""
    values: dict[str, Any]
    """Its columns; ``id`` among them."""

    @property
    def owner(self) -> str:
        """The sheet or record the row is a part of, itself where it stands alone."""
        values = self.values
        if self.table is t.record:
            return str(values["id"])
        return str(values.get("sheet_id") or values.get("record_id") or values["id"])


class Store:
    """One database, SQLite or PostgreSQL. Safe from any thread."""

    def __init__(self, engine: sa.Engine, shown: str) -> None:
        self.engine = engine
        self.shown = shown

    def prepare(self, *, writes: bool = True) -> None:
        """Bring the schema up to date, or only check it.

        Raises
        ------
        BookError
            The database cannot be opened, is newer than this program, or is not a book.
        BookBehind
            It is older than this program, and was only to be checked.
        """
        with guarded(self.shown):
            if writes:
                migrate(self.engine, self.shown)
                with self.writing():
                    pass  # takes the write lock once: a book that may only be read says so now
                return
            with self.engine.connect() as connection:
                if check(applied(connection), self.shown):
                    raise BookBehind(
                        f"The book {self.shown} is of an older version.",
                        "Open it once where it may be written, so that it is brought up to date.",
                    )

    @contextmanager
    def reading(self) -> Iterator[sa.Connection]:
        """Give a connection that sees one moment of the book; complaints become `BookError`."""
        with (
            guarded(self.shown),
            legible(f"An entry of the book {self.shown}"),
            self.engine.connect() as connection,
        ):
            if self.engine.dialect.name == "postgresql":
                # SQLite's transactions see one moment by themselves.
                connection.execution_options(isolation_level="REPEATABLE READ")
            yield connection

    def add(self, rows: Sequence[Row], *, waits: bool = False) -> int:
        """Add rows in one transaction; kept for good when this returns.

        Parameters
        ----------
        rows
            Parents before children. Those already there are left alone.
        waits
            Also note them as waiting for a server.

        Returns
        -------
        int
            How many were new.

        Raises
        ------
        BookError
            Nothing was added.
        """
        with guarded(self.shown), self.writing() as connection:
            return insert(connection, rows, waits=waits)

    def merge(self, batches: Iterable[Sequence[Row]], *, waits: bool = False) -> Merged:
        """Add rows from elsewhere, all of them or none.

        Raises
        ------
        BookError
            A row says something else than the one the book has under its id, refers to one that is
            not there, or the database failed. Nothing was added.
        """
        sheets = rows = new = 0
        with guarded(self.shown), self.writing() as connection:
            for batch in batches:
                new += insert(connection, unknown(connection, batch), waits=waits)
                sheets += sum(row.table is t.sheet for row in batch)
                rows += len(batch)
        return Merged(sheets, rows, new)

    @contextmanager
    def writing(self) -> Iterator[sa.Connection]:
        """Give a connection in a transaction that holds the write lock; complaints come as they are."""
        with self.engine.connect() as bare:
            connection = bare.execution_options(book_writes=True)
            with connection.begin():
                yield connection

    def close(self) -> None:
        """Close every connection. Safe to call twice."""
        self.engine.dispose()


_CARD_PARTS = (t.sheet, t.turn, t.sheet_end, t.correction)
_AT_ONCE = 500


def insert(connection: sa.Connection, rows: Sequence[Row], *, waits: bool = False) -> int:
    """Add the rows that are not there yet, and renew the cards of the sheets they touch."""
    added = 0
    for table in t.RECORDS:  # parents before children, whatever the order given
        values = [row.values for row in rows if row.table is table]
        if values:
            added += max(0, connection.execute(unless_there(connection, table), values).rowcount)
    touched = sorted({row.owner for row in rows if row.table in _CARD_PARTS})
    for start in range(0, len(touched), _AT_ONCE):
        refresh(connection, t.sheet.c.id.in_(touched[start : start + _AT_ONCE]))
    if waits and rows:
        connection.execute(t.waiting.insert(), [_ticket(row) for row in rows])
    return added


def unknown(connection: sa.Connection, batch: Sequence[Row]) -> list[Row]:
    """Give the rows that are not there yet, each once.

    Raises
    ------
    BookError
        Two rows with one id say different things.
    """
    there: dict[str, Row] = {}
    for table in {row.table for row in batch}:
        there |= by_id(connection, table, {r.values["id"] for r in batch if r.table is table})
    fresh: list[Row] = []
    for row in batch:
        known = there.get(row.values["id"])
        if known is None:
            there[row.values["id"]] = row
            fresh.append(row)
        else:
            _check_same(row, known)
    return fresh


def _check_same(row: Row, known: Row) -> None:
    for name, value in row.values.items():
        if row.table is not known.table or not _same(name, value, known.values[name]):
            raise BookError(
                f"The {row.table.name} {row.values['id']} says another {name} than the one known.",
                "Find out which bench changed it; nothing was taken in.",
            )


def _same(name: str, given: Any, there: Any) -> bool:
    if name == "waveform" and given is not None and there is not None:
        # The same samples may be packed otherwise by another version of the packer.
        from trimmer.book.waveforms import unpack_samples

        return unpack_samples(given).tobytes() == unpack_samples(bytes(there)).tobytes()
    if isinstance(given, dict | list):
        return dumps(given) == dumps(there)
    return bool(given == there)


def unless_there(connection: sa.Connection, table: sa.Table) -> sa.Insert:
    """Give the insertion into `table` that leaves a row with the same id alone."""
    insertion = sqlite.insert if connection.dialect.name == "sqlite" else postgresql.insert
    return insertion(table).on_conflict_do_nothing(index_elements=["id"])


def _ticket(row: Row) -> dict[str, str]:
    return {"table_name": row.table.name, "row_id": row.values["id"], "owner_id": row.owner}


def by_id(connection: sa.Connection, table: sa.Table, ids: Iterable[str]) -> dict[str, Row]:
    """Read whole rows of `table` by id."""
    found = connection.execute(sa.select(table).where(table.c.id.in_(list(ids)))).mappings()
    return {row["id"]: Row(table, dict(row)) for row in found}
