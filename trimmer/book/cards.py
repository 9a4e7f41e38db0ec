"""The card of a sheet: the one derived table, always rebuilt from the rows it sums up."""

from __future__ import annotations

from typing import Any

import sqlalchemy as sa
from sqlalchemy.dialects import postgresql, sqlite

from trimmer.book import tables as t

UNFINISHED_VERDICT = "stopped"
"""What a sheet without an end counts as: it was interrupted, or killed."""


def _latest(table: sa.Table, column: str) -> sa.ScalarSelect[Any]:
    """Give a column of the sheet's newest row in `table`; ids grow with time."""
    return (
        sa.select(table.c[column])
        .where(table.c.sheet_id == t.sheet.c.id)
        .order_by(table.c.id.desc())
        .limit(1)
        .scalar_subquery()
    )


def _corrected(name: str) -> sa.ColumnElement[Any]:
    newest = (
        sa.select(t.correction.c.value)
        .where(t.correction.c.sheet_id == t.sheet.c.id, t.correction.c.field == name)
        .order_by(t.correction.c.id.desc())
        .limit(1)
        .scalar_subquery()
    )
    return sa.func.coalesce(newest, t.sheet.c[name])


def _figure(column: str) -> sa.ColumnElement[Any]:
    return sa.func.coalesce(_latest(t.sheet_end, column), _latest(t.turn, column))


def _finished() -> sa.ColumnElement[int]:
    ended = sa.exists().where(t.sheet_end.c.sheet_id == t.sheet.c.id)
    return sa.case((ended, 1), else_=0)


def _cards() -> sa.Select[Any]:
    """Select the cards as they should be, in the order of the table's columns."""
    turns = sa.func.coalesce(_latest(t.sheet_end, "turns"), _latest(t.turn, "number"), 0)
    verdict = sa.func.coalesce(_latest(t.sheet_end, "verdict"), UNFINISHED_VERDICT)
    return sa.select(
        t.sheet.c.id,
        _corrected("unit"),
        _corrected("kind"),
        t.sheet.c.taken_at,
        _figure("fundamental_hz"),
        _figure("thd"),
        _figure("thd_sigma"),
        verdict,
        _finished(),
        turns,
    )


def refresh(connection: sa.Connection, which: sa.ColumnElement[bool]) -> None:
    """Renew the cards of the sheets that `which` selects."""
    if connection.dialect.name == "postgresql":
        # Two benches at one sheet: the second must see the first one's rows, so it waits for them
        # here. SQLite has one writer at a time.
        locked = sa.select(t.sheet.c.id).where(which).order_by(t.sheet.c.id)
        connection.execute(locked.with_for_update(key_share=True))
    insertion = sqlite.insert if connection.dialect.name == "sqlite" else postgresql.insert
    names = [column.name for column in t.card.columns]
    statement = insertion(t.card).from_select(names, _cards().where(which))
    renewed = {name: statement.excluded[name] for name in names if name != "sheet_id"}
    connection.execute(statement.on_conflict_do_update(index_elements=["sheet_id"], set_=renewed))
