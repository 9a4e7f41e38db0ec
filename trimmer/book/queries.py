"""What is asked of a book, as queries on the cards and rows."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import sqlalchemy as sa

from trimmer.book import tables as t
from trimmer.book.entries import SheetFilter
from trimmer.book.ids import is_id

_NEWEST_FIRST = (t.card.c.taken_at.desc(), t.card.c.sheet_id.desc())


def sheets(which: SheetFilter, limit: int | None, offset: int) -> sa.Select[Any]:
    """Select cards, newest first."""
    query = sa.select(t.card).where(*_conditions(which)).order_by(*_NEWEST_FIRST)
    if limit is not None:
        query = query.limit(limit)
    if offset:
        # SQLite has no OFFSET without LIMIT; -1 is its word for no limit, which SQLAlchemy writes.
        query = query.offset(offset)
    return query


def count(which: SheetFilter) -> sa.Select[int]:
    """Count cards."""
    return sa.select(sa.func.count()).select_from(t.card).where(*_conditions(which))


def _conditions(which: SheetFilter) -> list[sa.ColumnElement[bool]]:
    card = t.card.c
    tests: list[tuple[Any, Callable[[Any], sa.ColumnElement[bool]]]] = [
        (which.unit, lambda unit: card.unit == unit),
        (which.kind, lambda kind: card.kind == kind),
        (which.since, lambda since: card.taken_at >= since),
        (which.until, lambda until: card.taken_at < until),
        (which.limit_thd, lambda limit: card.thd > limit),
        (which.within_thd, lambda limit: card.thd <= limit),
        (which.verdict, lambda verdict: card.verdict == verdict),
    ]
    conditions = [test(value) for value, test in tests if value is not None]
    if which.finished is not None:
        conditions.append(card.finished == int(which.finished))
    return conditions


def like_id(fragment: str) -> sa.Select[Any]:
    """Select sheet ids that begin or end with `fragment`, at most nine."""
    column = t.card.c.sheet_id
    if is_id(fragment):
        return sa.select(column).where(column == fragment)
    matches = sa.or_(
        column.startswith(fragment, autoescape=True), column.endswith(fragment, autoescape=True)
    )
    return sa.select(column).where(matches).order_by(column).limit(9)


def units() -> sa.Select[Any]:
    """Select each unit's latest card, with how many sheets it has and its latest named kind."""
    card = t.card.c
    grouped = (
        sa.select(card.unit, sa.func.count().label("sheets"))
        .where(card.unit != "")
        .group_by(card.unit)
        .subquery("grouped")
    )
    newest = t.card.alias("newest")
    latest_id = (
        sa.select(newest.c.sheet_id)
        .where(newest.c.unit == grouped.c.unit)
        .order_by(newest.c.taken_at.desc(), newest.c.sheet_id.desc())
        .limit(1)
        .scalar_subquery()
    )
    return (
        sa.select(
            grouped.c.unit,
            grouped.c.sheets,
            _kind_of(grouped.c.unit).scalar_subquery().label("kind"),
            card.sheet_id,
            card.taken_at,
            card.thd,
            card.thd_sigma,
            card.verdict,
        )
        .select_from(grouped)
        .join(t.card, card.sheet_id == latest_id)
        .order_by(grouped.c.unit)
    )


def _kind_of(unit: sa.ColumnElement[str]) -> sa.Select[Any]:
    named = t.card.alias("named")
    return (
        sa.select(named.c.kind)
        .where(named.c.unit == unit, named.c.kind != "")
        .order_by(named.c.taken_at.desc(), named.c.sheet_id.desc())
        .limit(1)
    )


def kind_of(unit: str) -> sa.Select[Any]:
    """Select the kind of a unit by its latest sheet that names one."""
    return _kind_of(sa.literal(unit))


def of_sheet(table: sa.Table, sheet: str) -> sa.Select[Any]:
    """Select a sheet's rows of `table`, oldest first."""
    return sa.select(table).where(table.c.sheet_id == sheet).order_by(table.c.id)


def latest_of_sheet(table: sa.Table, sheet: str) -> sa.Select[Any]:
    """Select a sheet's newest row of `table`."""
    query = sa.select(table).where(table.c.sheet_id == sheet)
    return query.order_by(table.c.id.desc()).limit(1)


def learned(kind: str | None, unit: str | None, limit: int) -> sa.Select[Any]:
    """Select what sheets taught, newest first; each sheet's newest word only, when read."""
    query = sa.select(t.learned).order_by(t.learned.c.id.desc()).limit(limit)
    if kind is not None:
        query = query.where(t.learned.c.kind == kind)
    if unit is not None:
        query = query.where(t.learned.c.unit == unit)
    return query


def reference(name: str) -> sa.Select[Any]:
    """Select the newest reference of a name."""
    query = sa.select(t.reference).where(t.reference.c.name == name)
    return query.order_by(t.reference.c.id.desc()).limit(1)


def reference_names() -> sa.Select[Any]:
    """Select the names of all references."""
    return sa.select(t.reference.c.name).distinct().order_by(t.reference.c.name)


def records(
    what: str, unit: str | None, kind: str | None, sheet: str | None, limit: int | None
) -> sa.Select[Any]:
    """Select records of one sort, newest first."""
    columns = t.record.c
    given = [
        (unit, columns.unit == unit),
        (kind, columns.kind == kind),
        (sheet, columns.sheet_id == sheet),
    ]
    conditions = [condition for value, condition in given if value is not None]
    query = sa.select(t.record).where(columns.what == what, *conditions)
    query = query.order_by(columns.id.desc())
    return query if limit is None else query.limit(limit)


def of_record(table: sa.Table, record: str) -> sa.Select[Any]:
    """Select a record's rows of `table`, oldest first."""
    return sa.select(table).where(table.c.record_id == record).order_by(table.c.id)


def latest_end(record: str) -> sa.Select[Any]:
    """Select how a record ended last."""
    query = sa.select(t.record_end).where(t.record_end.c.record_id == record)
    return query.order_by(t.record_end.c.id.desc()).limit(1)
