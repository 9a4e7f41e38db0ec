"""Imports: merges another bench's export, without doubles, all of it or nothing."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import islice
from pathlib import Path
from typing import BinaryIO

from pydantic import ValidationError

from trimmer.book import tables as t
from trimmer.book.book import Book
from trimmer.book.entries import Merged
from trimmer.book.exporting import FORM
from trimmer.book.imported import ENTRY, Head
from trimmer.book.migrations import STEPS
from trimmer.book.store import Row
from trimmer.errors import BookError

_LONGEST_LINE = 256 * 1024 * 1024
_AT_ONCE = 200
_TABLES = {table.name: table for table in t.RECORDS}
_REMEDY = "Export it again on the other bench with `trimmer log export -o FILE.json`; nothing was taken in."


def import_book(book: Book, path: Path) -> Merged:
    """Merge an export into a book.

    Rows that are there already are left alone, so that an export can be imported again, or one that
    overlaps it.

    Raises
    ------
    BookError
        The file is no export, or is damaged, or says something else of a row that the book has; or
        the book failed. Nothing was taken in.
    """
    try:
        with path.open("rb") as file:
            return book.merge(_batches(_entries(_lines(file), path)))
    except OSError as error:
        raise BookError(
            f"{path} cannot be read: {error.strerror}.", "Check the path of the export."
        ) from error


def _lines(file: BinaryIO) -> Iterator[tuple[int, bytes]]:
    """Give the rows' texts with their line numbers, without the array's brackets and commas."""
    number, last = 0, b""
    while line := file.readline(_LONGEST_LINE + 1):
        number += 1
        if len(line) > _LONGEST_LINE:
            raise BookError(f"Line {number} is longer than any row of a book.", _REMEDY)
        last = line.strip()
        text = last.removesuffix(b",")
        if text and text not in (b"[", b"]"):
            yield number, text
    if last != b"]":
        raise BookError(f"The export is cut short after line {number}.", _REMEDY)


def _entries(lines: Iterator[tuple[int, bytes]], path: Path) -> Iterator[Row]:
    number, first = next(lines, (1, b""))
    _check_head(first, path)
    for number, text in lines:
        try:
            entry = ENTRY.validate_json(text)
        except ValidationError as error:
            raise BookError(f"{path}, line {number}: {_first(error)}.", _REMEDY) from error
        values = entry.model_dump(exclude={"row"})
        yield Row(_TABLES[entry.row], values)


def _check_head(text: bytes, path: Path) -> None:
    try:
        head = Head.model_validate_json(text)
    except ValidationError as error:
        raise BookError(f"{path} is not an export of a bench book.", _REMEDY) from error
    unknown = sorted(set(head.steps) - {step.name for step in STEPS})
    if head.form > FORM or unknown:
        raise BookError(
            f"{path} was exported by a newer version of trimmer.",
            "Update trimmer on this bench, then import again; nothing was taken in.",
        )


def _first(error: ValidationError) -> str:
    """Say the first thing wrong, and where."""
    problem = error.errors(include_url=False, include_input=False, include_context=False)[0]
    where = ".".join(str(step) for step in problem["loc"])
    return f"{where}: {problem['msg']}" if where else str(problem["msg"])


def _batches(rows: Iterator[Row]) -> Iterator[list[Row]]:
    while batch := list(islice(rows, _AT_ONCE)):
        yield batch
