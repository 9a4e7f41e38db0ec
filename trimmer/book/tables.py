"""The book's tables, one definition for SQLite and PostgreSQL.

Rows of the record tables are only ever added; each has an id of its own that no other bench gives.
`card` is derived from them, one row a sheet, so that lists and filters need no search; `waiting`
names the rows that a server does not have yet. The migrations build exactly this; a test compares.
"""

from __future__ import annotations

from typing import Any

import sqlalchemy as sa

from trimmer.book.columns import Instant, Json, PackedJson, Plain

metadata = sa.MetaData()


def _id() -> sa.Column[str]:
    return sa.Column("id", Plain(), primary_key=True)


def _sheet(*, nullable: bool = False) -> sa.Column[str]:
    return sa.Column("sheet_id", Plain(), sa.ForeignKey("sheet.id"), nullable=nullable)


def _need(name: str, kind: sa.types.TypeEngine[Any]) -> sa.Column[Any]:
    return sa.Column(name, kind, nullable=False)


migration = sa.Table(
    "migration",
    metadata,
    sa.Column("name", Plain(), primary_key=True),
    _need("applied_at", Instant()),
    _need("program", Plain()),
)

sheet = sa.Table(
    "sheet",
    metadata,
    _id(),
    _need("taken_at", Instant()),
    _need("unit", Plain()),
    _need("kind", Plain()),
    _need("source", Plain()),
    _need("identity", Plain()),
    sa.Column("dialect", Plain()),
    _need("settings", Json()),
    _need("notes", Json()),
    sa.Column("travel_turns", sa.Double()),
    sa.Column("orders", sa.Integer()),
    _need("versions", Json()),
)

turn = sa.Table(
    "turn",
    metadata,
    _id(),
    _sheet(),
    _need("number", sa.Integer()),
    _need("taken_at", Instant()),
    _need("source", Plain()),
    _need("word", Plain()),
    sa.Column("trim", Plain()),
    sa.Column("sense", Plain()),
    sa.Column("asked_turns", sa.Double()),
    sa.Column("made_turns", sa.Double()),
    sa.Column("advice", Json()),
    sa.Column("fundamental_hz", sa.Double()),
    sa.Column("thd", sa.Double()),
    sa.Column("thd_sigma", sa.Double()),
    _need("reading", PackedJson()),
    sa.Column("waveform", sa.LargeBinary()),
    sa.Column("interval_s", sa.Double()),
    _need("notes", Json()),
    sa.Index("turn_of_sheet", "sheet_id", "id"),
)

state = sa.Table(
    "state",
    metadata,
    _id(),
    _sheet(),
    _need("saved_at", Instant()),
    _need("document", PackedJson()),
    sa.Index("state_of_sheet", "sheet_id", "id"),
)

sheet_end = sa.Table(
    "sheet_end",
    metadata,
    _id(),
    _sheet(),
    _need("ended_at", Instant()),
    _need("verdict", Plain()),
    _need("turns", sa.Integer()),
    sa.Column("fundamental_hz", sa.Double()),
    sa.Column("thd", sa.Double()),
    sa.Column("thd_sigma", sa.Double()),
    sa.Column("floor_thd", sa.Double()),
    sa.Column("floor_sigma", sa.Double()),
    sa.Column("net_upper", sa.Double()),
    sa.Column("net_lower", sa.Double()),
    sa.Column("expected_thd_warm", sa.Double()),
    _need("remainder", Json()),
    _need("reason", Plain()),
    sa.Column("reading", PackedJson()),
    sa.Index("end_of_sheet", "sheet_id", "id"),
)

correction = sa.Table(
    "correction",
    metadata,
    _id(),
    _sheet(),
    _need("at", Instant()),
    _need("field", Plain()),
    _need("value", Plain()),
    _need("reason", Plain()),
    sa.Index("correction_of_sheet", "sheet_id", "field", "id"),
)

learned = sa.Table(
    "learned",
    metadata,
    _id(),
    _sheet(),
    _need("at", Instant()),
    _need("unit", Plain()),
    _need("kind", Plain()),
    _need("document", PackedJson()),
    sa.Index("learned_of_kind", "kind", "id"),
    sa.Index("learned_of_unit", "unit", "id"),
    sa.Index("learned_of_sheet", "sheet_id"),
)

reference = sa.Table(
    "reference",
    metadata,
    _id(),
    _need("name", Plain()),
    _need("taken_at", Instant()),
    _need("source", Plain()),
    _need("reading", PackedJson()),
    _need("document", Json()),
    sa.Index("reference_by_name", "name", "id"),
)

record = sa.Table(
    "record",
    metadata,
    _id(),
    _need("what", Plain()),
    _sheet(nullable=True),
    _need("taken_at", Instant()),
    _need("unit", Plain()),
    _need("kind", Plain()),
    _need("source", Plain()),
    _need("document", Json()),
    sa.Index("record_of_unit", "what", "unit", "id"),
    sa.Index("record_of_kind", "what", "kind", "id"),
    sa.Index("record_of_sheet", "sheet_id"),
)

record_point = sa.Table(
    "record_point",
    metadata,
    _id(),
    sa.Column("record_id", Plain(), sa.ForeignKey("record.id"), nullable=False),
    _need("taken_at", Instant()),
    _need("document", PackedJson()),
    sa.Index("point_of_record", "record_id", "id"),
)

record_end = sa.Table(
    "record_end",
    metadata,
    _id(),
    sa.Column("record_id", Plain(), sa.ForeignKey("record.id"), nullable=False),
    _need("ended_at", Instant()),
    _need("verdict", Plain()),
    _need("document", PackedJson()),
    sa.Index("end_of_record", "record_id", "id"),
)

card = sa.Table(
    "card",
    metadata,
    sa.Column("sheet_id", Plain(), sa.ForeignKey("sheet.id"), primary_key=True),
    _need("unit", Plain()),
    _need("kind", Plain()),
    _need("taken_at", Instant()),
    sa.Column("fundamental_hz", sa.Double()),
    sa.Column("thd", sa.Double()),
    sa.Column("thd_sigma", sa.Double()),
    _need("verdict", Plain()),
    _need("finished", sa.Integer()),
    _need("turns", sa.Integer()),
    sa.Index("card_by_time", "taken_at", "sheet_id"),
    sa.Index("card_of_unit", "unit", "taken_at", "sheet_id"),
    sa.Index("card_of_kind", "kind", "taken_at", "sheet_id"),
    sa.Index("card_of_verdict", "verdict", "taken_at", "sheet_id"),
    sa.Index("card_unfinished", "finished", "taken_at"),
)

waiting = sa.Table(
    "waiting",
    metadata,
    sa.Column("number", sa.Integer(), primary_key=True, autoincrement=True),
    _need("table_name", Plain()),
    _need("row_id", Plain()),
    _need("owner_id", Plain()),
)

RECORDS: tuple[sa.Table, ...] = (
    sheet,
    turn,
    state,
    sheet_end,
    correction,
    learned,
    reference,
    record,
    record_point,
    record_end,
)
"""The append-only tables, parents before children."""
