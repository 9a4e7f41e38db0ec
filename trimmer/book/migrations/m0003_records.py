"""Warm-ups, surveys, rechecks, notes and limits, with their points and ends."""

from __future__ import annotations

from trimmer.book.migrations.step import Step, Words


def _statements(w: Words) -> list[str]:
    return [
        f"""CREATE TABLE record (
            id {w.text} NOT NULL PRIMARY KEY,
            what {w.text} NOT NULL,
            sheet_id {w.text} REFERENCES sheet (id),
            taken_at {w.text} NOT NULL,
            unit {w.text} NOT NULL,
            kind {w.text} NOT NULL,
            source {w.text} NOT NULL,
            document {w.document} NOT NULL)""",
        "CREATE INDEX record_of_unit ON record (what, unit, id)",
        "CREATE INDEX record_of_kind ON record (what, kind, id)",
        "CREATE INDEX record_of_sheet ON record (sheet_id)",
        f"""CREATE TABLE record_point (
            id {w.text} NOT NULL PRIMARY KEY,
            record_id {w.text} NOT NULL REFERENCES record (id),
            taken_at {w.text} NOT NULL,
            document {w.blob} NOT NULL)""",
        "CREATE INDEX point_of_record ON record_point (record_id, id)",
        f"""CREATE TABLE record_end (
            id {w.text} NOT NULL PRIMARY KEY,
            record_id {w.text} NOT NULL REFERENCES record (id),
            ended_at {w.text} NOT NULL,
            verdict {w.text} NOT NULL,
            document {w.blob} NOT NULL)""",
        "CREATE INDEX end_of_record ON record_end (record_id, id)",
    ]


STEP = Step("0003-records", _statements)
