"""`trimmer report`: one page of a unit, or of a kind, to hand on."""

from __future__ import annotations

import argparse
import contextlib
import os
from pathlib import Path

from drivers import clean
from trimmer.book import Book, open_book
from trimmer.errors import CommandError
from trimmer.events import line

FORMS = {".html": "html", ".htm": "html", ".pdf": "pdf", ".svg": "svg", ".png": "png"}
NEEDS = ("jinja2", "matplotlib")


def run(options: argparse.Namespace) -> int:
    """Write the page."""
    path = Path(options.output)
    form = FORMS.get(path.suffix.lower())
    if form is None:
        raise CommandError(
            f"{clean(path.name)} says no form of page", "End its name in .html, .pdf, .svg or .png."
        )
    if bool(options.unit) == bool(options.kind):
        raise CommandError(
            "a report is of one unit or of one kind", "Name a UNIT, or give `--kind NAME`."
        )
    with open_book(options.book, writes=False) as book:
        written = rendered(book, options, form)
    write(path, written)
    if options.json:
        print(line({"event": "report", "file": str(path), "bytes": len(written)}), flush=True)
    else:
        print(f"Written to {clean(str(path))}.", flush=True)
    return 0


def rendered(book: Book, options: argparse.Namespace, form: str) -> bytes:
    """Gather the page and draw it.

    Raises
    ------
    CommandError
        The book does not know the unit or kind, or the libraries that draw are not installed.
    """
    from trimmer.report.kind import kind_page
    from trimmer.report.unit import unit_page

    page = unit_page(book, options.unit) if options.unit else kind_page(book, options.kind)
    try:
        if form == "html":
            from trimmer.report.html import html_bytes

            return html_bytes(page)
        from trimmer.report.sheet import sheet_bytes

        return sheet_bytes(page, form)
    except ModuleNotFoundError as missing:
        if (missing.name or "").partition(".")[0] not in NEEDS:
            raise
        raise CommandError(
            f"reports need the library {missing.name}, which is not installed",
            "Install it with `pip install 'trimmer[report]'`.",
        ) from missing


def write(path: Path, content: bytes) -> None:
    """Write a file whole, or leave what was there.

    Raises
    ------
    CommandError
        It cannot be written.
    """
    part = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        part.write_bytes(content)
        part.replace(path)
    except OSError as error:
        with contextlib.suppress(OSError):
            part.unlink(missing_ok=True)
        raise CommandError(
            f"{clean(str(path))} cannot be written: {error.strerror}",
            "Choose another place with `-o`.",
        ) from error
