"""`trimmer log`: the bench book on the command line."""

from __future__ import annotations

import argparse
from datetime import UTC, datetime, timedelta
from pathlib import Path

from trimmer.book import Book, Sheet, SheetFilter, SheetRow, open_book
from trimmer.commands.wording import advice_lines, done_lines, percent, reading_lines
from trimmer.errors import CommandError
from trimmer.events import line


def run(options: argparse.Namespace) -> int:
    """Do what the action says."""
    actions = {"list": _list, "show": _show, "export": _export, "import": _import}
    with open_book(options.book, writes=options.action == "import") as book:
        return actions[options.action](book, options)


def day(text: str | None, *, end: bool = False) -> datetime | None:
    """Read a date as the beginning (or the end) of that day, local time.

    Raises
    ------
    CommandError
        It is no date.
    """
    if text is None:
        return None
    try:
        read = datetime.fromisoformat(text)
    except ValueError as error:
        raise CommandError(f"{text!r} is not a date", "Write it as YYYY-MM-DD.") from error
    if end and len(text) == len("2026-01-31"):
        read += timedelta(days=1)
    return read.astimezone(UTC)


def _list(book: Book, options: argparse.Namespace) -> int:
    from trimmer.book.documents import sheet_event

    which = SheetFilter(
        unit=options.unit,
        kind=options.kind,
        since=day(options.since),
        until=day(options.until, end=True),
        limit_thd=options.limit_thd,
    )
    for row in book.sheets(which):
        print(line(sheet_event(row)) if options.json else sheet_line(row))
    return 0


def sheet_line(row: SheetRow) -> str:
    """Write a sheet as one line."""
    when = row.taken_at.astimezone().strftime("%Y-%m-%d %H:%M")
    unit = row.unit or "(no name)"
    kind = f", {row.kind}" if row.kind else ""
    at = "" if row.fundamental_hz is None else f" at {row.fundamental_hz:.5g} Hz"
    ended = row.verdict if row.finished else "broken off"
    turns = f"{row.turns} turn{'' if row.turns == 1 else 's'}"
    return f"{row.id}  {when}  {unit}{kind}: THD {percent(row.thd, row.thd_sigma)}{at}, {turns}, {ended}"


def _show(book: Book, options: argparse.Namespace) -> int:
    from trimmer.book.documents import sheet_document

    sheet = book.sheet(_sheet_named(book, options.sheet))
    if options.json:
        print(line(sheet_document(sheet)))
    else:
        print("\n".join(sheet_lines(sheet)))
    return 0


def _sheet_named(book: Book, name: str) -> str:
    """Take a unit's name for its latest sheet; anything else is (part of) a sheet's id."""
    latest = book.sheets(SheetFilter(unit=name), limit=1)
    return latest[0].id if latest else name


def sheet_lines(sheet: Sheet) -> list[str]:
    """Write a whole sheet as lines."""
    start = sheet.start
    lines = [sheet_line(sheet.row), f"  From {start.source}: {start.identity}."]
    if start.dialect:
        lines.append(f"  Waveform dialect {start.dialect}.")
    lines += [f"  {key}: {value}" for key, value in {**start.settings, **start.notes}.items()]
    for entry in sheet.turns:
        if entry.advice is not None:
            lines += advice_lines(entry.advice)
        lines += reading_lines(f"Turn {entry.turn}", entry.reading, entry.notes)
    if sheet.end is not None:
        thd = sheet.end.reading.thd if sheet.end.reading else None
        lines += done_lines(
            sheet.end.done,
            thd.value if thd else None,
            thd.sigma if thd else None,
            sheet.row.id,
        )
    for each in sheet.corrections:
        lines.append(f"  Corrected {each.at:%Y-%m-%d}: {each.field} is {each.value}. {each.reason}")
    made_with = ", ".join(f"{name} {version}" for name, version in start.versions.items())
    lines.append(f"  Made with {made_with}.")
    return lines


def _export(book: Book, options: argparse.Namespace) -> int:
    from trimmer.book.exporting import export_book

    path = Path(options.output)
    chosen = SheetFilter(unit=options.unit, kind=options.kind)
    which = chosen if options.unit or options.kind else None
    written = export_book(book, path, which)
    if options.json:
        print(line({"event": "exported", "file": str(path), "count": written}))
    else:
        print(f"{written} sheets written to {path}.")
    return 0


def _import(book: Book, options: argparse.Namespace) -> int:
    from trimmer.book.importing import import_book

    merged = import_book(book, Path(options.file))
    if options.json:
        print(
            line(
                {
                    "event": "imported",
                    "sheets": merged.sheets,
                    "rows": merged.rows,
                    "new": merged.new,
                }
            )
        )
    else:
        print(
            f"{merged.sheets} sheets in the file; {merged.new} of its {merged.rows} rows are new, "
            "the others were there already."
        )
    return 0
