"""What a database's complaint means for the person at the bench."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager

import sqlalchemy.exc as sa_exc

from trimmer.errors import BookError

_SQLITE: tuple[tuple[str, str, str], ...] = (
    (
        "SQLITE_FULL",
        "there is no space left for it",
        "Free some space on that disk, or choose another with `--book`; what is in the book is safe.",
    ),
    (
        "SQLITE_READONLY",
        "it may be read but not written",
        "Make the file and its folder writable, or choose another book with `--book`.",
    ),
    (
        "SQLITE_NOTADB",
        "it is not a bench book",
        "Choose another file with `--book`; this one was left as it is.",
    ),
    (
        "SQLITE_CORRUPT",
        "it is damaged",
        "Copy the file away, then import your latest export into a new book with `--book`.",
    ),
    (
        "SQLITE_BUSY",
        "another program has kept it locked",
        "Close the other program that writes to it, then try again.",
    ),
    (
        "SQLITE_LOCKED",
        "another program has kept it locked",
        "Close the other program that writes to it, then try again.",
    ),
    (
        "SQLITE_CANTOPEN",
        "it cannot be opened",
        "Check that its folder exists and may be written, or choose another with `--book`.",
    ),
    (
        "SQLITE_IOERR",
        "the disk failed while it was read or written",
        "Check the disk and the space left on it, or choose another with `--book`.",
    ),
)


class BookBehind(BookError):
    """The book is of an older version and was opened only to look."""


def sqlite_name(error: BaseException | None) -> str:
    """Give SQLite's own name of an error (``SQLITE_FULL``), or an empty text."""
    origin = getattr(error, "orig", error)
    return getattr(origin, "sqlite_errorname", "") or ""


def is_lost(error: BaseException) -> bool:
    """Tell whether an error means that a server cannot be reached now: worth trying again later."""
    if isinstance(error, sa_exc.DBAPIError):
        if isinstance(error.orig, sqlite3.Error):
            return False
        if error.connection_invalidated:
            return True
        return isinstance(error, sa_exc.OperationalError | sa_exc.InterfaceError)
    return isinstance(error, sa_exc.TimeoutError | OSError)


_TURNED_AWAY = "Check the user, the password and the database's name in `--book`."
_LOST = "Check that the server runs and the network reaches it, then try again."
_NOT_YET = ("starting up", "shutting down", "recovery", "too many", "remaining connection slots")


def turned_away(error: BaseException) -> bool:
    """Tell whether a server answered a greeting with a refusal that waiting will not mend.

    A wrong password or an unknown database comes as ``FATAL`` in the greeting, without a code; so do
    a start and a shutdown, which pass.
    """
    said = str(getattr(error, "orig", error))
    return "FATAL" in said and not any(word in said for word in _NOT_YET)


def book_error(error: BaseException, shown: str) -> BookError:
    """Turn a complaint of SQLite, PostgreSQL or the system into the book's own error."""
    name = sqlite_name(error)
    for start, what, remedy in _SQLITE:
        if name.startswith(start):
            return BookError(f"The book {shown} failed: {what}.", remedy)
    if isinstance(error, sqlite3.DatabaseError) and "file is not a database" in str(error):
        return BookError(f"The book {shown} failed: {_SQLITE[2][1]}.", _SQLITE[2][2])
    if turned_away(error):
        return BookError(f"The book {shown} turned us away: {_first_line(error)}", _TURNED_AWAY)
    if isinstance(error, sa_exc.DBAPIError) and is_lost(error):
        return BookError(f"The book {shown} cannot be reached: {_first_line(error)}", _LOST)
    return BookError(f"The book {shown} failed: {_first_line(error)}")


def _first_line(error: BaseException) -> str:
    origin = getattr(error, "orig", None) or error
    said = str(origin)
    lines = [line.strip() for line in said.splitlines() if line.strip()]
    first = lines[0] if lines else type(origin).__name__
    # The PostgreSQL driver leads every failed greeting with where it greeted; the reason comes last.
    for lead in ("FATAL:", " failed: "):
        first = first.rpartition(lead)[2].strip() if lead in first else first
    return first if first.endswith(".") else first + "."


@contextmanager
def guarded(shown: str) -> Iterator[None]:
    """Let only `BookError` out of the block."""
    try:
        yield
    except (sa_exc.SQLAlchemyError, sqlite3.Error, OSError) as error:
        raise book_error(error, shown) from error


@contextmanager
def legible(what: str) -> Iterator[None]:
    """Turn the trouble of reading an entry that is not as this program writes it into `BookError`."""
    try:
        yield
    except (KeyError, IndexError, TypeError, ValueError, AttributeError, OverflowError) as error:
        raise BookError(
            f"{what} cannot be read: {type(error).__name__}, {error}.",
            "Update trimmer; if it still cannot be read, import your latest export into a new book.",
        ) from error
