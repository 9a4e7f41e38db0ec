"""Column types that mean the same in SQLite and PostgreSQL, to the last bit."""

# ruff: noqa: ARG002 (the database library names what these methods are given)

from __future__ import annotations

import json
import math
import zlib
from collections.abc import Mapping
from datetime import UTC, datetime
from typing import Any

import sqlalchemy as sa

_MARK = "not_finite"
_NOT_FINITE = {"nan": math.nan, "inf": math.inf, "-inf": -math.inf}
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
    """Write a document as one line of strict JSON in ASCII; a number keeps its every bit.

    JSON has no word for what is not finite. A figure that is not, which no sound document has, becomes
    ``{"not_finite": "nan"}`` rather than cost the sheet it belongs to.
    """
    try:
        return _strict(document)
    except ValueError:
        return _strict(_marked(document))


def _strict(document: Any) -> str:
    return json.dumps(
        document, ensure_ascii=True, allow_nan=False, separators=(",", ":"), default=_numpy
    )


def _numpy(value: Any) -> Any:
    """Give a number or an array of the numeric library as Python's own."""
    if hasattr(value, "tolist"):
        return value.tolist()
    raise TypeError(f"a {type(value).__name__} cannot stand in a document")


def loads(text: str | bytes) -> Any:
    """Read what `dumps` wrote."""
    document = json.loads(text)
    mark = _MARK if isinstance(text, str) else _MARK.encode()
    return unmarked(document) if mark in text else document  # type: ignore[operator]


def _marked(value: Any) -> Any:
    if hasattr(value, "tolist"):
        value = value.tolist()
    if isinstance(value, float):
        return value if math.isfinite(value) else {_MARK: repr(value)}
    if isinstance(value, Mapping):
        return {key: _marked(v) for key, v in value.items()}
    return [_marked(v) for v in value] if isinstance(value, list | tuple) else value


def unmarked(value: Any) -> Any:
    """Give a document its figures that are not finite."""
    if isinstance(value, Mapping):
        if value.keys() == {_MARK} and value[_MARK] in _NOT_FINITE:
            return _NOT_FINITE[value[_MARK]]
        return {key: unmarked(v) for key, v in value.items()}
    return [unmarked(v) for v in value] if isinstance(value, list) else value


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
        return None if value is None else loads(value)


class PackedJson(sa.types.TypeDecorator[Any]):
    """A large document (a reading's covariance is 28 by 28 numbers), kept packed by zlib."""

    impl = sa.LargeBinary
    cache_ok = True

    def process_bind_param(self, value: Any, dialect: sa.Dialect) -> bytes | None:
        return None if value is None else zlib.compress(dumps(value).encode("ascii"), 6)

    def process_result_value(self, value: bytes | None, dialect: sa.Dialect) -> Any:
        return None if value is None else loads(unpack(bytes(value)))
