"""A waveform from a text file of numbers, recognised by its shape."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from itertools import zip_longest

import numpy as np

from drivers.contract import Coupling, UnusableCapture, Waveform, clean
from drivers.files.block import Block, read_block
from drivers.files.columns import ENVELOPE, Roles, assign
from drivers.files.header import Header, read_header
from drivers.files.layout import Layout, find_layout, split
from drivers.files.scaling import scale
from drivers.files.text import Text, decode
from drivers.files.timing import Table, settle

WIDE = 32
"""Columns from which a few rows are one record each, written along the line."""


@dataclass(frozen=True, slots=True)
class Wanted:
    """What the person decided about a file."""

    channel: int | None = None
    """1-based column of values; None lets the file decide."""
    interval_s: float | None = None
    """Seconds between samples; None takes the file's own."""


@dataclass(frozen=True, slots=True, eq=False)
class FileCapture:
    """A waveform with the question whether its file looked complete."""

    waveform: Waveform
    """The waveform."""
    cut: bool
    """True where the file ends before it should: worth waiting for more."""


def read_csv(raw: bytes, wanted: Wanted, taken_at: datetime, source: str) -> FileCapture:
    """Read a text file of numbers.

    Raises
    ------
    UnusableCapture
        The file cannot be read as one plain waveform; the remedy says what to change.
    """
    text = decode(raw)
    layout = find_layout(text)
    if len(layout.columns) >= WIDE and len(text.lines) * 8 <= len(layout.columns):
        text = _turned(text, layout)
        layout = find_layout(text)
    block = read_block(text, layout)
    header = read_header(block, layout)
    _refuse_by_header(header)
    roles = assign(header, block, layout, wanted.channel)
    numbers = block.numbers[:, roles.values.place]
    samples = scale(numbers, roles.values, header, roles.place)
    axis = settle(Table(header, block, layout, roles), wanted.interval_s)
    coupling, averaged = _settings(header)
    shape = _shape_said(layout, block, roles)
    clipped = int(np.count_nonzero(np.isnan(numbers)))
    notes = (
        shape,
        *((f"{clipped} values are marked as out of range or missing",) if clipped else ()),
        *text.notes,
        *layout.notes,
        *block.notes,
        *roles.notes,
        *samples.notes,
        *axis.notes,
    )
    waveform = Waveform(
        samples=samples.values,
        interval_s=axis.interval_s,
        taken_at=taken_at,
        source=source,
        has_volts=samples.has_volts,
        times_s=axis.times_s,
        bits=samples.bits,
        code=samples.code,
        clipped=clipped,
        coupling=coupling,
        averaged=averaged,
        notes=tuple(clean(note) for note in notes),
    )
    length = header.number("length")
    short = length is not None and length == int(length) and 1 < len(block.rows) < length
    return FileCapture(waveform, block.cut or short)


def _turned(text: Text, layout: Layout) -> Text:
    """Turn records along the line into columns; short lines before them stay what they are."""
    rows = [split(line, layout.delimiter) for line in text.lines if line.strip()]
    longest = max(map(len, rows))
    records = [cells for cells in rows if 2 * len(cells) > longest]
    lines = ["\t".join(cells) for cells in rows if 2 * len(cells) <= longest]
    lines += ["\t".join(cells) for cells in zip_longest(*records, fillvalue="")]
    while lines and not lines[-1].strip():
        lines.pop()
    return Text(lines, "\t", ended=True, notes=(*text.notes, "one record on a line"))


def _refuse_by_header(header: Header) -> None:
    mode = header.first("mode")
    word = mode.text.casefold() if mode else ""
    if any(part in word for part in ("peak", "env", "minmax", "min/max", "min-max")):
        raise UnusableCapture(
            f"the file was taken as {clean(word, 40)!r}, not as samples", ENVELOPE
        )


def _settings(header: Header) -> tuple[Coupling, int]:
    stated = header.first("coupling")
    word = stated.text.strip().upper()[:2] if stated else ""
    coupling: Coupling = "AC" if word == "AC" else "DC" if word in ("DC", "D") else "unknown"
    averages = header.number("averages")
    many = averages is not None and averages == int(averages) and 2 <= averages <= 1e6
    return coupling, int(averages) if many and averages else 1


def _shape_said(layout: Layout, block: Block, roles: Roles) -> str:
    """Say in one line what was recognised."""
    marks = {None: "blanks", "\t": "tabs", ";": "semicolons", ",": "commas", "|": "bars"}
    between = marks.get(layout.delimiter, clean(repr(layout.delimiter), 8))
    decimal = "decimal comma" if layout.convention.decimal == "," else "decimal point"
    time = "a time column" if roles.time is not None else "no time column"
    parted = f"parted by {between}, " if len(layout.columns) > 1 else ""
    return f"{len(block.rows)} rows, {parted}{decimal}, {time}"
