"""References: a clean source seen through the same input, stored and taken into account by name."""

from __future__ import annotations

import argparse
from datetime import datetime

from trimmer.book import Book
from trimmer.book.entries import Reference as Stored
from trimmer.errors import CommandError
from trimmer.measurement import Reading, Reference


def reference_of(book: Book, options: argparse.Namespace) -> Reference | None:
    """Give the reference that the command names; None where it names none.

    Raises
    ------
    CommandError
        The book has none of this name.
    """
    if not options.reference:
        return None
    stored = book.reference(options.reference)
    if stored is None:
        known = ", ".join(book.references()) or "none"
        raise CommandError(
            f"the book has no reference {options.reference!r} (it has: {known})",
            "Store one with `trimmer measure SOURCE --reference NAME --store`.",
        )
    return Reference.from_document(dict(stored.document))


def store(book: Book, name: str, taken_at: datetime, source: str, reading: Reading) -> None:
    """Store the reading of a clean source under a name; the newest of a name counts."""
    document = Reference.of(reading, name).document()
    book.add_reference(Stored(name, taken_at, source, reading, document))
