"""Where a book is: the default file, another file, or a server several benches share."""

from __future__ import annotations

import os
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path
from typing import Literal
from urllib.parse import urlsplit

from trimmer.errors import BookError

BOOK_NAME = "book.sqlite"
DEMO_NAME = "demo-book.sqlite"

Sort = Literal["file", "server"]


@dataclass(frozen=True, slots=True)
class Place:
    """Where a book is."""

    sort: Sort
    """A SQLite file or a PostgreSQL server."""
    path: Path
    """The file; for a server, the local file that keeps what the server does not have yet."""
    url: str | None = None
    """The server's address with its password, where there is one."""
    shown: str = ""
    """The place in words that are safe to show: no password."""
    chosen: bool = False
    """True where the person named the place."""


def home() -> Path:
    """Give the folder of the book: `TRIMMER_HOME`, or the user's data folder of this system."""
    override = os.environ.get("TRIMMER_HOME")
    if override:
        return Path(override).expanduser()
    from platformdirs import user_data_path

    return user_data_path("trimmer", appauthor=False)


def find(location: str | Path | None, *, demo: bool = False) -> Place:
    """Tell where the book is that `location` names.

    Parameters
    ----------
    location
        None for the default; a file; ``sqlite:///FILE``; or ``postgresql+psycopg://...``.
    demo
        Take the demonstration's own book as the default.

    Raises
    ------
    BookError
        The location is an address of a sort that cannot hold a book.
    """
    if location is None:
        path = home() / (DEMO_NAME if demo else BOOK_NAME)
        return Place("file", path, shown=str(path))
    text = str(location)
    if "://" not in text:
        path = Path(text).expanduser()
        return Place("file", path, shown=str(path), chosen=True)
    return _addressed(text)


def _addressed(text: str) -> Place:
    scheme = text.split("://", 1)[0].lower()
    if scheme in ("sqlite", "sqlite+pysqlite"):
        rest = text.split("://", 1)[1]
        if not rest.startswith("/") or len(rest) < 2:
            raise BookError(
                f"{text!r} names no file.", "Write `--book FILE` or `--book sqlite:///FILE`."
            )
        path = Path(rest[1:]).expanduser()
        return Place("file", path, shown=str(path), chosen=True)
    if scheme in ("postgresql", "postgres", "postgresql+psycopg"):
        url = "postgresql+psycopg://" + text.split("://", 1)[1]
        shown = without_password(url)
        key = sha256(shown.encode("utf-8", "surrogatepass")).hexdigest()[:12]
        return Place("server", home() / f"outbox-{key}.sqlite", url, shown, chosen=True)
    raise BookError(
        f"A book cannot be kept at an address of the sort {scheme!r}.",
        "Give a file, or a PostgreSQL server as `--book postgresql+psycopg://USER@HOST/DATABASE`.",
    )


def without_password(url: str) -> str:
    """Give a server's address as it may be shown: without password, without options."""
    parts = urlsplit(url)
    try:
        host, port = parts.hostname or "", parts.port
    except ValueError as error:
        raise BookError(
            f"The book's address cannot be read: {error}.",
            "Write it as `postgresql+psycopg://USER@HOST:PORT/DATABASE`.",
        ) from error
    user = f"{parts.username}@" if parts.username else ""
    return f"{parts.scheme}://{user}{host}{f':{port}' if port else ''}{parts.path}"
