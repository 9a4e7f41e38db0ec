"""Many sheets in short: how each began and ended, and its last reading, a few queries for hundreds."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator
from typing import Any

import sqlalchemy as sa

from trimmer.book import queries as q
from trimmer.book import rows as r
from trimmer.book import tables as t
from trimmer.book.entries import Sheet, SheetFilter, SheetRow, TurnEntry

_AT_ONCE = 200


def sheets_in_short(connection: sa.Connection, which: SheetFilter) -> Iterator[Sheet]:
    """Give sheets, newest first, each with no turn but the last one that a sheet without end has."""
    lines = [r.listed(card) for card in connection.execute(q.sheets(which, None, 0))]
    for start in range(0, len(lines), _AT_ONCE):
        yield from _together(connection, lines[start : start + _AT_ONCE])


def _together(connection: sa.Connection, lines: list[SheetRow]) -> Iterator[Sheet]:
    ids = [line.id for line in lines]
    begun = {row["id"]: r.start_from(row) for row in _rows(connection, t.sheet, t.sheet.c.id, ids)}
    ends = {row["sheet_id"]: r.end_from(row) for row in _of(connection, t.sheet_end, ids)}
    corrections = defaultdict(list)
    for row in _of(connection, t.correction, ids):
        corrections[row["sheet_id"]].append(r.correction_from(row))
    last = _last_turns(connection, [each for each in ids if each not in ends])
    for line in lines:
        wrong = tuple(corrections[line.id])
        turns = (last[line.id],) if line.id in last else ()
        yield Sheet(line, r.corrected(begun[line.id], wrong), turns, ends.get(line.id), wrong)


def _of(connection: sa.Connection, table: sa.Table, ids: list[str]) -> list[sa.RowMapping]:
    return _rows(connection, table, table.c.sheet_id, ids)


def _rows(
    connection: sa.Connection, table: sa.Table, column: sa.Column[Any], ids: list[str]
) -> list[sa.RowMapping]:
    query = sa.select(table).where(column.in_(ids)).order_by(table.c.id)
    return list(connection.execute(query).mappings())


def _last_turns(connection: sa.Connection, ids: list[str]) -> dict[str, TurnEntry]:
    newest = sa.select(sa.func.max(t.turn.c.id)).where(t.turn.c.sheet_id.in_(ids))
    query = sa.select(t.turn).where(t.turn.c.id.in_(newest.group_by(t.turn.c.sheet_id)))
    found = connection.execute(query).mappings()
    return {row["sheet_id"]: r.turn_from(row) for row in found}
