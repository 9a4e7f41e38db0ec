"""Brings a book's schema up to date: named steps in order, each in a transaction of its own."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import cast

import sqlalchemy as sa

import trimmer
from trimmer.book.migrations import STEPS, Step
from trimmer.book.migrations.step import WORDS, Dialect
from trimmer.book.tables import migration
from trimmer.errors import BookError

_SERVER_LOCK = 0x54524D31


def applied(connection: sa.Connection) -> set[str]:
    """Give the names of the steps a book already has; none for an empty database."""
    if not sa.inspect(connection).has_table("migration"):
        return set()
    return set(connection.scalars(sa.select(migration.c.name)))


def check(names: set[str], shown: str, steps: tuple[Step, ...] = STEPS) -> list[Step]:
    """Give the steps that are still to be applied.

    Raises
    ------
    BookError
        The book has a step this program does not know: a newer version wrote it.
    """
    unknown = sorted(names - {step.name for step in steps})
    if unknown:
        raise BookError(
            f"The book {shown} was written by a newer version of trimmer (step {unknown[-1]}).",
            "Update trimmer, or choose another book with `--book`; this one was left as it is.",
        )
    return [step for step in steps if step.name not in names]


def migrate(engine: sa.Engine, shown: str, steps: tuple[Step, ...] = STEPS) -> None:
    """Apply what is missing.

    Raises
    ------
    BookError
        The book is newer than this program, or is another program's database.
    """
    with engine.connect() as connection, connection.begin():
        _lock(connection)
        names = applied(connection)
        if not names:
            _refuse_strangers(connection, shown)
    for step in check(names, shown, steps):
        _apply(engine, step)


def _refuse_strangers(connection: sa.Connection, shown: str) -> None:
    """Refuse a database that has tables but no steps: they are somebody else's."""
    strangers = [name for name in sa.inspect(connection).get_table_names() if name != "migration"]
    if strangers:
        raise BookError(
            f"The database {shown} holds another program's tables ({strangers[0]}, ...).",
            "Give the book an empty database of its own; this one was left as it is.",
        )


def _lock(connection: sa.Connection) -> None:
    """Let one bench at a time look at or change a server's schema; SQLite's own lock does it there."""
    if connection.dialect.name == "postgresql":
        connection.execute(sa.select(sa.func.pg_advisory_xact_lock(_SERVER_LOCK)))


def _apply(engine: sa.Engine, step: Step) -> None:
    dialect = cast("Dialect", engine.dialect.name)
    words = WORDS[dialect]
    with engine.connect().execution_options(book_writes=True) as connection, connection.begin():
        _lock(connection)
        connection.exec_driver_sql(
            f"CREATE TABLE IF NOT EXISTS migration (name {words.text} NOT NULL PRIMARY KEY,"
            f" applied_at {words.text} NOT NULL, program {words.text} NOT NULL)"
        )
        if step.name in applied(connection):
            return
        for statement in step.statements(words):
            connection.exec_driver_sql(statement)
        connection.execute(
            migration.insert().values(
                name=step.name, applied_at=datetime.now(UTC), program=trimmer.__version__
            )
        )
