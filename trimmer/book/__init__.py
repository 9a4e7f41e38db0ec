"""The bench book: sheets, turns, readings and what they teach, in a database.

Importing this loads no database library: that waits until a book is opened.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from trimmer.book.entries import (
    Correction,
    Document,
    Learned,
    Notice,
    Record,
    RecordPoint,
    RecordStart,
    Reference,
    Resumed,
    Sheet,
    SheetEnd,
    SheetFilter,
    SheetRow,
    SheetStart,
    TurnEntry,
    UnitRow,
)
from trimmer.book.opening import open_book

if TYPE_CHECKING:
    from trimmer.book.book import Book

__all__ = [
    "Book",
    "Correction",
    "Document",
    "Learned",
    "Notice",
    "Record",
    "RecordPoint",
    "RecordStart",
    "Reference",
    "Resumed",
    "Sheet",
    "SheetEnd",
    "SheetFilter",
    "SheetRow",
    "SheetStart",
    "TurnEntry",
    "UnitRow",
    "open_book",
]


def __getattr__(name: str) -> Any:
    if name == "Book":
        from trimmer.book.book import Book

        return Book
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
