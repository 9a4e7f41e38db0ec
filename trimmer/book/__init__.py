"""The bench book: sheets, turns, readings and what they teach, in a database.

Importing this loads no database library: that waits until a book is opened.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

from trimmer.book.entries import (
    Correction,
    Document,
    Learned,
    Merged,
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
    from trimmer.book.documents import sheet_document, sheet_event
    from trimmer.book.exporting import export_book
    from trimmer.book.importing import import_book

__all__ = [
    "Book",
    "Correction",
    "Document",
    "Learned",
    "Merged",
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
    "export_book",
    "import_book",
    "open_book",
    "sheet_document",
    "sheet_event",
]

_LATER = {
    "Book": "book",
    "export_book": "exporting",
    "import_book": "importing",
    "sheet_document": "documents",
    "sheet_event": "documents",
}


def __getattr__(name: str) -> Any:
    if name not in _LATER:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"trimmer.book.{_LATER[name]}"), name)
