"""Column types that mean the same in SQLite and PostgreSQL, to the last bit."""

# ruff: noqa: ARG002 (the database library names what these methods are given)

from __future__ import annotations

import json
import zlib
from datetime import UTC, datetime
from typing import Any

import sqlalchemy as sa

_UNPACKED_BYTES = 64 * 1024 * 1024
_UNSHOWABLE = dict.fromkeys((*range(32), 127, *range(0xD800, 0xE000)), "�")


def plain(text: str, limit: int = 2000) -> str:
    """Make text fit for any database: no control characters (PostgreSQL refuses NUL), no half of a
    surrogate pair (which a command line's odd bytes become), bounded length."""
    return text[:limit].translate(_UNSHOWABLE)


def stamp(moment: datetime) -> str:
    """Write an instant as UTC, ISO 8601, always 32 characters, so that text order is time order.

    SQLite has no type for instants with a zone, and drops the zone of what it is given.
    """
    if moment.tzinfo is None:
        raise ValueError("an instant in the book needs a time zone")
    return moment.astimezone(UTC).isoformat(timespec="microseconds")


def dumps(document: Any) -> str:
    """Write a document as one line of strict JSON in ASCII; a number keeps its every bit."""
    return json.dumps(document, ensure_ascii=True, allow_nan=False, separators=(",", ":"))


def unpack(packed: bytes, limit: int = _UNPACKED_BYTES) -> bytes:
    """Undo `zlib.compress`, refusing what would grow past `limit` bytes.

    Raises
    ------
    ValueError
        The bytes are damaged, or grow past the limit.
    """
    worker = zlib.decompressobj()
    try:
        out = worker.decompress(packed, limit)
    except zlib.error as error:
        raise ValueError(f"packed bytes are damaged: {error}") from error
    if worker.unconsumed_tail or not worker.eof:
        raise ValueError(f"packed bytes are cut short or longer than {limit} bytes")
    return out


class Plain(sa.types.TypeDecorator[str]):
    """Text, compared and sorted by code point in both databases."""

    impl = sa.Text
    cache_ok = True

    def load_dialect_impl(self, dialect: sa.Dialect) -> sa.types.TypeEngine[Any]:
        if dialect.name == "postgresql":
            return dialect.type_descriptor(sa.Text(collation="C"))
        return dialect.type_descriptor(sa.Text())

    def process_bind_param(self, value: str | None, dialect: sa.Dialect) -> str | None:
        return None if value is None else plain(value)


class Instant(sa.types.TypeDecorator[datetime]):
    """An instant, kept as the text of `stamp`."""

    impl = Plain
    cache_ok = True

    def process_bind_param(self, value: datetime | None, dialect: sa.Dialect) -> str | None:
        return None if value is None else stamp(value)

    def process_result_value(self, value: str | None, dialect: sa.Dialect) -> datetime | None:
        return None if value is None else datetime.fromisoformat(value)


class Json(sa.types.TypeDecorator[Any]):
    """A small document, kept as text that any SQL shell can read."""

    impl = sa.Text
    cache_ok = True

    def process_bind_param(self, value: Any, dialect: sa.Dialect) -> str | None:
        return None if value is None else dumps(value)

    def process_result_value(self, value: str | None, dialect: sa.Dialect) -> Any:
        return None if value is None else json.loads(value)


class PackedJson(sa.types.TypeDecorator[Any]):
    """A large document (a reading's covariance is 28 by 28 numbers), kept packed by zlib."""

    impl = sa.LargeBinary
    cache_ok = True

    def process_bind_param(self, value: Any, dialect: sa.Dialect) -> bytes | None:
        return None if value is None else zlib.compress(dumps(value).encode("ascii"), 6)

    def process_result_value(self, value: bytes | None, dialect: sa.Dialect) -> Any:
        return None if value is None else json.loads(unpack(bytes(value)))
