"""The block of rows that is the capture, and what stands above, beside and below it."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from drivers.contract import UnusableCapture, clean
from drivers.files.cells import is_date, parse_cell
from drivers.files.layout import NO_ROWS, Layout, split
from drivers.files.rows import BLANK, DATA, Rows, read_rows
from drivers.files.text import Text
from drivers.files.units import Unit

RUN_ROWS = 8
"""A run of rows this long is data; a shorter one above or below the block is header or footer."""
BESIDE_ROWS = 400
"""Rows of the block in which remarks beside the data are looked for."""
OVERRANGE = 9e36
"""Beyond this a number is an instrument's mark (9.9E37 over range, 9.91E37 not a number)."""


@dataclass(frozen=True, slots=True, eq=False)
class Block:
    """The data of a text file, with what stands around them."""

    header: list[list[str]]
    """Cells of the rows above the data."""
    beside: list[list[str]]
    """Cells that stand beside the data in the first rows: remarks of some instruments."""
    numbers: NDArray[np.float64]
    """Shape (rows, columns of the layout), NaN for what is out of range."""
    rows: list[str]
    """The lines of the data, as many as `numbers` has rows."""
    units: tuple[Unit | None, ...]
    """Unit written behind the numbers of each column, already applied."""
    gaps: int = 0
    """Empty lines inside the data."""
    cut: bool = False
    """True where the last row is incomplete and was left out."""
    notes: tuple[str, ...] = ()
    """What was left out, and why."""


def read_block(text: Text, layout: Layout) -> Block:
    """Find the block and read its numbers.

    Raises
    ------
    UnusableCapture
        There is no block, or more than one.
    """
    lines = text.lines
    rows = read_rows(lines, layout)
    places = _longest_run(rows, lines)
    first, last = int(places[0]), int(places[-1])
    before = int(np.count_nonzero(rows.kinds[:first] == DATA))
    numbers = rows.numbers[before : before + places.size]
    numbers[~(np.abs(numbers) < OVERRANGE)] = math.nan
    body = lines[first : last + 1]
    kept = body if len(body) == places.size else [lines[place] for place in places]
    # Line ends written twice make every other line empty; that is no gap.
    gaps = 0 if len(body) > 1.8 * len(kept) else len(body) - len(kept)
    header = [_header_cells(line, layout) for line in lines[:first] if line.strip()]
    below = [line for line in lines[last + 1 :] if line.strip()]
    for cells in header[-1:]:
        _refuse_other_count(cells, layout)
    for line in below:
        if len(below) > 1 or not _is_stump(line, layout):
            _refuse_other_count(split(line, layout.delimiter), layout)
    block = Block(header, _beside(kept, layout), numbers, kept, rows.units, gaps)
    return _trimmed(block, layout, below, text.ended)


def _longest_run(rows: Rows, lines: list[str]) -> NDArray[np.intp]:
    """Give the line numbers of the longest run of data, empty lines passed over."""
    filled = np.flatnonzero(rows.kinds != BLANK)
    data = np.concatenate([[False], rows.kinds[filled] == DATA, [False]])
    edges = np.flatnonzero(np.diff(data.astype(np.int8)))
    starts, ends = edges[0::2], edges[1::2]
    if starts.size == 0:
        raise UnusableCapture("no rows of numbers were found in the file", NO_ROWS)
    order = np.argsort(starts - ends, kind="stable")
    lengths = ends - starts
    if order.size > 1 and lengths.sum() - lengths.max() >= RUN_ROWS:
        between = int(filled[ends[min(order[0], order[1])]])
        raise UnusableCapture(
            f"the numbers break off at line {between + 1}, which holds "
            f"{clean(lines[between], 40)!r}, and go on after it",
            "Save one capture, one segment, to a file; remove what stands between the numbers.",
        )
    return np.asarray(filled[starts[order[0]] : ends[order[0]]])


def _refuse_other_count(cells: list[str], layout: Layout) -> None:
    """Refuse to drop a row of numbers that only has another count: what parts them is in doubt."""
    filled = [cell for cell in cells if cell]
    if min(len(filled), len(layout.columns)) < 2 or any(map(is_date, filled)):
        return
    if all(parse_cell(cell, layout.convention) for cell in filled):
        raise UnusableCapture(
            f"the rows of numbers do not all have the same count: {clean(' '.join(cells), 60)!r}",
            "Save with semicolons or tabs between the columns, and no blanks in numbers.",
        )


def _header_cells(line: str, layout: Layout) -> list[str]:
    """Split a header line, which may use another delimiter than the numbers."""
    if layout.delimiter is None or layout.delimiter not in line:
        for mark in ("\t", ";", ","):
            if mark in line:
                return split(line, mark)
    return split(line, layout.delimiter)


def _beside(rows: list[str], layout: Layout) -> list[list[str]]:
    taken = set(layout.columns)
    found = []
    for row in rows[:BESIDE_ROWS]:
        cells = split(row, layout.delimiter)
        if len(cells) > len(taken):
            rest = [cell for column, cell in enumerate(cells) if column not in taken]
            if any(rest):
                found.append(rest)
    return found


def _trimmed(block: Block, layout: Layout, below: list[str], ended: bool) -> Block:
    """Leave out a last row that the end of the file cut through, and say what else was left."""
    notes: list[str] = []
    stump = len(below) == 1 and _is_stump(below[0], layout)
    short = not below and not ended and len(block.rows) > 2 and _is_short(block.rows, layout)
    if stump or short:
        notes.append("the last row is cut short and was left out")
    elif below:
        notes.append(f"{len(below)} lines below the numbers left out")
    if block.gaps:
        notes.append(f"{block.gaps} empty lines among the numbers")
    if short:
        block = replace(block, numbers=block.numbers[:-1], rows=block.rows[:-1])
    return replace(block, cut=stump or short, notes=tuple(notes))


def _is_stump(line: str, layout: Layout) -> bool:
    cells = split(line, layout.delimiter)
    return len(cells) <= layout.width and all(
        not cell or parse_cell(cell, layout.convention) or cell in "+-" for cell in cells
    )


def _is_short(rows: list[str], layout: Layout) -> bool:
    """Without a line end, a last cell shorter than all before it may be half a number."""
    column = layout.columns[-1]
    lengths = [len(split(row, layout.delimiter)[column]) for row in rows[-200:]]
    return lengths[-1] < min(lengths[:-1])
