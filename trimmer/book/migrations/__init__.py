"""The book's schema, step by step. A step that has been released is never edited; a new one is added.

Each step is a module with a `STEP`: its name, and its statements for a database's words. `STEPS`
lists them in order. They spell the SQL out, so that what an old step did does not change when
`trimmer.book.tables` does.
"""

from __future__ import annotations

from trimmer.book.migrations import (
    m0001_sheets,
    m0002_memory,
    m0003_records,
    m0004_cards,
    m0005_append_only,
    m0006_waiting,
)
from trimmer.book.migrations.step import Step

STEPS: tuple[Step, ...] = (
    m0001_sheets.STEP,
    m0002_memory.STEP,
    m0003_records.STEP,
    m0004_cards.STEP,
    m0005_append_only.STEP,
    m0006_waiting.STEP,
)
"""Every step, in the order in which they are applied."""

__all__ = ["STEPS", "Step"]
