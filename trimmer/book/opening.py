"""Opens a book, wherever it is; the database library is loaded here and not before."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from trimmer.book.places import Place, find
from trimmer.errors import BookError

if TYPE_CHECKING:
    from trimmer.book.book import Book
    from trimmer.book.store import Store


def open_book(
    location: str | Path | None = None, *, demo: bool = False, writes: bool = True
) -> Book:
    """Open a book, made and brought up to date if need be.

    Parameters
    ----------
    location
        A file, or ``postgresql+psycopg://...``; None for the default, which is ``book.sqlite`` in the
        folder `TRIMMER_HOME` names, or in this system's folder for a user's data.
    demo
        Take the demonstration's own book as the default.
    writes
        False to look only: a book that may not be written can still be read.

    Raises
    ------
    BookError
        There is no such book and it cannot be made; it is newer than this program, damaged, or not a
        book at all. A file that is refused is left as it is.
    """
    place = find(location, demo=demo)
    if place.sort == "server":
        from trimmer.book.shared import open_shared

        return open_shared(place)
    return _open_file(place, writes)


def _open_file(place: Place, writes: bool) -> Book:
    from trimmer.book.book import Book
    from trimmer.book.faults import BookBehind

    writes = _settled(place, writes)
    try:
        return Book(open_store(place.path, place.shown, writes=writes))
    except BookBehind:
        return Book(open_store(place.path, place.shown, writes=True))


def _settled(place: Place, writes: bool) -> bool:
    """Make the default book where there is none; a named one only where it will be written."""
    if writes or (place.path.exists() and place.path.stat().st_size):
        return writes
    if place.chosen:
        raise BookError(f"There is no book {place.shown}.", "Check the path given with `--book`.")
    return True


def open_store(path: Path, shown: str, *, writes: bool) -> Store:
    """Open one SQLite file as a store, its schema brought up to date or checked."""
    from trimmer.book.engines import sqlite_engine
    from trimmer.book.store import Store

    if writes:
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise BookError(f"The folder of {shown} cannot be made: {error.strerror}.") from error
    store = Store(sqlite_engine(path, writes=writes), shown)
    try:
        store.prepare(writes=writes)
    except BaseException:
        store.close()
        raise
    return store
