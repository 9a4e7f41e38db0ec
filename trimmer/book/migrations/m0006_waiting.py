"""Rows that a shared book's server does not have yet, in the order in which they were written."""

from __future__ import annotations

from trimmer.book.migrations.step import Step, Words


def _statements(w: Words) -> list[str]:
    return [
        f"""CREATE TABLE waiting (
            number {w.serial},
            table_name {w.text} NOT NULL,
            row_id {w.text} NOT NULL,
            owner_id {w.text} NOT NULL)"""
    ]


STEP = Step("0006-waiting", _statements)
