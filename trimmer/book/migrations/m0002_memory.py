"""What sheets taught of a kind's trims, and references under their names."""

from __future__ import annotations

from trimmer.book.migrations.step import Step, Words


def _statements(w: Words) -> list[str]:
    return [
        f"""CREATE TABLE learned (
            id {w.text} NOT NULL PRIMARY KEY,
            sheet_id {w.text} NOT NULL REFERENCES sheet (id),
            at {w.text} NOT NULL,
            unit {w.text} NOT NULL,
            kind {w.text} NOT NULL,
            document {w.blob} NOT NULL)""",
        "CREATE INDEX learned_of_kind ON learned (kind, id)",
        "CREATE INDEX learned_of_unit ON learned (unit, id)",
        "CREATE INDEX learned_of_sheet ON learned (sheet_id)",
        f"""CREATE TABLE reference (
            id {w.text} NOT NULL PRIMARY KEY,
            name {w.text} NOT NULL,
            taken_at {w.text} NOT NULL,
            source {w.text} NOT NULL,
            reading {w.blob} NOT NULL,
            document {w.document} NOT NULL)""",
        "CREATE INDEX reference_by_name ON reference (name, id)",
    ]


STEP = Step("0002-memory", _statements)
