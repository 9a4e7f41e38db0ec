"""Engines for the two databases, set so that a committed row is a kept row."""

from __future__ import annotations

import logging
import os
import sqlite3
import stat
from importlib.util import find_spec
from pathlib import Path
from typing import Any
from urllib.parse import quote

import sqlalchemy as sa
from sqlalchemy import event
from sqlalchemy.pool import QueuePool

from trimmer.book.faults import sqlite_name
from trimmer.errors import BookError

APPLICATION_ID = 0x54524D31
"""In the header of every book file (SQLite's application_id), so that no other program's is taken."""

BUSY_S = 10.0
"""Longest wait for another program's write."""

_CONNECT_S = 3
_SILENCE_MS = 5000
_BEGINNING = b"SQLite format 3\x00"
"""First bytes of every SQLite file (SQLite, *Database File Format*, section 1.3.1)."""


def sqlite_engine(path: Path, *, writes: bool = True) -> sa.Engine:
    """Give an engine on a SQLite file, made if it is missing and `writes` is true.

    Raises
    ------
    BookError
        The path is a folder, a device, or a file of another program.
    """
    _check_path(path)

    def connect() -> sqlite3.Connection:
        connection = _open(path, writes)
        try:
            _prepare(connection, path, writes)
        except BaseException:
            connection.close()
            raise
        return connection

    engine = sa.create_engine("sqlite://", creator=connect, poolclass=QueuePool)
    event.listen(engine, "begin", _begin)
    return engine


def _check_path(path: Path) -> None:
    try:
        mode = path.stat().st_mode
    except FileNotFoundError:
        return
    except OSError as error:
        raise BookError(f"The book {path} failed: {error.strerror}.") from error
    if not stat.S_ISREG(mode):
        what = "a folder" if stat.S_ISDIR(mode) else "no plain file"
        raise BookError(f"The book {path} failed: it is {what}.", "Give a file with `--book`.")
    _check_beginning(path)


def _check_beginning(path: Path) -> None:
    """Refuse a file that does not begin as SQLite's do: SQLite itself would write over a short one."""
    try:
        with path.open("rb") as file:
            beginning = file.read(len(_BEGINNING))
    except OSError:
        return  # what may not be read is told by what opens it
    # An empty file is what another bench leaves for an instant while it makes this very book.
    if beginning and beginning != _BEGINNING:
        raise BookError(
            f"{path} is not a bench book.",
            "Choose another file with `--book`; this one was left as it is.",
        )


def _open(path: Path, writes: bool) -> sqlite3.Connection:
    if writes:
        return _connect(path, "mode=rwc")
    try:
        connection = _connect(path, "mode=ro")
        connection.execute("PRAGMA schema_version")
    except sqlite3.OperationalError as error:
        if not _untouched(path):
            raise _unfinished(path) from error
        return _connect(path, "mode=ro&immutable=1")
    return connection


def _untouched(path: Path) -> bool:
    """Tell whether all of a book is in its main file, so that it can be read where it lies.

    In a folder that may not be written, SQLite cannot share a WAL book; one that nobody has open, and
    whose WAL is empty or gone, is complete in itself.
    """
    wal = path.with_name(path.name + "-wal")
    return path.exists() and not (wal.exists() and wal.stat().st_size)


def _unfinished(path: Path) -> BookError:
    if not path.exists():
        return BookError(f"There is no book {path}.", "Check the path given with `--book`.")
    return BookError(
        f"The book {path} lies in a folder that may not be written, with entries not yet merged.",
        f"Copy {path.name} and {path.name}-wal to a folder that may, and open it there.",
    )


def _connect(path: Path, options: str) -> sqlite3.Connection:
    """Connect by address. `isolation_level` None leaves transactions to `_begin`, so that changes of the
    schema are inside them."""
    name = quote(os.fsencode(path.absolute()))
    return sqlite3.connect(
        f"file:{name}?{options}",
        uri=True,
        timeout=BUSY_S,
        isolation_level=None,
        check_same_thread=False,
    )


def _prepare(connection: sqlite3.Connection, path: Path, writes: bool) -> None:
    _check_owner(connection, path, writes)
    connection.execute("PRAGMA foreign_keys = ON")
    connection.execute("PRAGMA trusted_schema = OFF")
    if writes:
        # Where the file system cannot do WAL (a network folder), SQLite keeps the rollback journal,
        # which is as safe and only slower.
        connection.execute("PRAGMA journal_mode = WAL")
        connection.execute("PRAGMA synchronous = FULL")


def _check_owner(connection: sqlite3.Connection, path: Path, writes: bool) -> None:
    owner = _owner(connection)
    if owner == APPLICATION_ID:
        return
    empty = connection.execute("SELECT count(*) FROM sqlite_master").fetchone()[0] == 0
    if owner == 0 and empty:
        if writes:
            connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
        return
    # Another bench may have made this book between the two questions: it signs before it fills it.
    if _owner(connection) == APPLICATION_ID:
        return
    raise BookError(
        f"{path} is another program's database, not a bench book.",
        "Choose another file with `--book`; this one was left as it is.",
    )


def _owner(connection: sqlite3.Connection) -> int:
    return int(connection.execute("PRAGMA application_id").fetchone()[0])


def _begin(connection: sa.Connection) -> None:
    # A write takes the lock at its start: one that began by reading could be refused half-way.
    writes = connection.get_execution_options().get("book_writes", False)
    connection.exec_driver_sql("BEGIN IMMEDIATE" if writes else "BEGIN")


def server_engine(url: str) -> sa.Engine:
    """Give an engine on a PostgreSQL server whose every wait is finite.

    Raises
    ------
    BookError
        The driver is not installed, or the address cannot be read.
    """
    if find_spec("psycopg") is None:
        raise BookError(
            "A book on a server needs the PostgreSQL driver, which is not installed.",
            "Install it with `pip install 'trimmer[postgres]'`.",
        )
    # The driver's own warnings of a lost connection would land among the lines on the terminal.
    logging.getLogger("psycopg").addHandler(logging.NullHandler())
    options: dict[str, Any] = {
        "connect_timeout": _CONNECT_S,
        "keepalives_idle": 5,
        "keepalives_interval": 2,
        "keepalives_count": 3,
        "tcp_user_timeout": _SILENCE_MS,
        "application_name": "trimmer",
        "options": f"-c statement_timeout={3 * _SILENCE_MS} -c lock_timeout={_SILENCE_MS}",
    }
    try:
        parsed = sa.make_url(url)
        for given in parsed.query:
            options.pop(given, None)
        return sa.create_engine(parsed, connect_args=options, pool_pre_ping=True, pool_size=2)
    except (sa.exc.ArgumentError, ValueError) as error:
        raise BookError(
            "The book's address cannot be read.",
            "Write it as `postgresql+psycopg://USER@HOST:PORT/DATABASE`.",
        ) from error


def is_sqlite_busy(error: BaseException) -> bool:
    """Tell whether another program held the file for longer than the wait."""
    return sqlite_name(error).startswith(("SQLITE_BUSY", "SQLITE_LOCKED"))
