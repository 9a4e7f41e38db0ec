"""A card for each sheet, for lists and filters; filled from the sheets there are."""

from __future__ import annotations

from trimmer.book.migrations.step import Step, Words

_LATEST = """(SELECT {column} FROM {table} AS latest WHERE latest.sheet_id = sheet.id
              ORDER BY latest.id DESC LIMIT 1)"""
_CORRECTED = """coalesce((SELECT value FROM correction WHERE correction.sheet_id = sheet.id
                 AND correction.field = '{name}' ORDER BY correction.id DESC LIMIT 1), sheet.{name})"""


def _latest(table: str, column: str) -> str:
    return _LATEST.format(table=table, column=column)


def _figure(column: str) -> str:
    return f"coalesce({_latest('sheet_end', column)}, {_latest('turn', column)})"


def _statements(w: Words) -> list[str]:
    return [
        f"""CREATE TABLE card (
            sheet_id {w.text} NOT NULL PRIMARY KEY REFERENCES sheet (id),
            unit {w.text} NOT NULL,
            kind {w.text} NOT NULL,
            taken_at {w.text} NOT NULL,
            fundamental_hz {w.real},
            thd {w.real},
            thd_sigma {w.real},
            verdict {w.text} NOT NULL,
            finished INTEGER NOT NULL,
            turns INTEGER NOT NULL)""",
        "CREATE INDEX card_by_time ON card (taken_at, sheet_id)",
        "CREATE INDEX card_of_unit ON card (unit, taken_at, sheet_id)",
        "CREATE INDEX card_of_kind ON card (kind, taken_at, sheet_id)",
        "CREATE INDEX card_of_verdict ON card (verdict, taken_at, sheet_id)",
        "CREATE INDEX card_unfinished ON card (finished, taken_at)",
        f"""INSERT INTO card SELECT sheet.id,
            {_CORRECTED.format(name="unit")}, {_CORRECTED.format(name="kind")}, sheet.taken_at,
            {_figure("fundamental_hz")}, {_figure("thd")}, {_figure("thd_sigma")},
            coalesce({_latest("sheet_end", "verdict")}, 'stopped'),
            CASE WHEN EXISTS (SELECT 1 FROM sheet_end WHERE sheet_end.sheet_id = sheet.id)
                 THEN 1 ELSE 0 END,
            coalesce({_latest("sheet_end", "turns")}, {_latest("turn", "number")}, 0)
            FROM sheet""",
    ]


STEP = Step("0004-cards", _statements)
