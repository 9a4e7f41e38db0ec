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
from trimmer.book.faults import guarded
from trimmer.book.migrate import applied, check, migrate


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
        """
        with guarded(self.shown):
            if writes:
                migrate(self.engine, self.shown)
            else:
                with self.engine.connect() as connection:
                    check(applied(connection), self.shown)

    @contextmanager
    def reading(self) -> Iterator[sa.Connection]:
        """Give a connection to read by; complaints become `BookError`."""
        with guarded(self.shown), self.engine.connect() as connection:
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


def insert(connection: sa.Connection, rows: Sequence[Row], *, waits: bool = False) -> int:
    """Add the rows that are not there yet, and renew the cards of the sheets they touch."""
    added = sum(_insert_one(connection, row) for row in rows)
    touched = sorted({row.owner for row in rows if row.table in (t.sheet, *_CARD_PARTS)})
    for sheet_id in touched:
        refresh(connection, t.sheet.c.id == sheet_id)
    if waits and rows:
        connection.execute(t.waiting.insert(), [_ticket(row) for row in rows])
    return added


_CARD_PARTS = (t.turn, t.sheet_end, t.correction)


def _insert_one(connection: sa.Connection, row: Row) -> int:
    statement = unless_there(connection, row.table)
    return max(0, connection.execute(statement, row.values).rowcount)


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
