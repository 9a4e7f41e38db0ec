"""The block of rows: which lines it spans, and its numbers as an array."""

from __future__ import annotations

import io
import math
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.contract import UnusableCapture, clean
from drivers.files.cells import Number, parse_cell, parse_clock
from drivers.files.layout import NO_ROWS, Layout, split
from drivers.files.text import Text
from drivers.files.units import Unit

RUN_ROWS = 8
"""A run of rows this long is data; a shorter one above or below the block is header or footer."""
BESIDE_ROWS = 400
"""Rows of the block in which remarks beside the data are looked for."""
OVERRANGE = 9e36
"""Beyond this a number is an instrument's mark (9.9E37 over range, 9.91E37 not a number)."""
_Row = tuple[list[float], list[Unit | None] | None]
"""The numbers of a row, and the units behind them where there are any."""
BLANK: _Row = ([], None)
_PLAIN = b"0123456789+-.,eE \t\n;|"


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


@dataclass(frozen=True, slots=True)
class _Span:
    first: int
    last: int


def read_block(text: Text, layout: Layout) -> Block:
    """Find the block and read its numbers, the quick way where every cell is plain.

    Raises
    ------
    UnusableCapture
        There is no block, or more than one.
    """
    lines = text.lines
    span = _ends(lines, layout)
    body = lines[span.first : span.last + 1] if span else []
    kept = _without_blanks(body)
    numbers = _quickly(kept, layout) if kept else None
    if numbers is None or span is None:
        span, kept, numbers, units = _carefully(lines, layout)
        body = lines[span.first : span.last + 1]
    else:
        units = (None,) * len(layout.columns)
    gaps = 0 if len(body) > 1.8 * len(kept) else len(body) - len(kept)
    numbers[~(np.abs(numbers) < OVERRANGE)] = math.nan
    header = [_header_cells(line, layout) for line in lines[: span.first] if line.strip()]
    below = [line for line in lines[span.last + 1 :] if line.strip()]
    block = Block(header, _beside(kept, layout), numbers, kept, units, gaps)
    return _trimmed(block, layout, below, text.ended)


def _header_cells(line: str, layout: Layout) -> list[str]:
    """Split a header line, which may use another delimiter than the numbers."""
    if layout.delimiter is None or layout.delimiter not in line:
        for mark in ("\t", ";", ","):
            if mark in line:
                return split(line, mark)
    return split(line, layout.delimiter)


def _without_blanks(body: list[str]) -> list[str]:
    return body if all(body) and all(map(str.strip, body)) else [row for row in body if row.strip()]


def _ends(lines: list[str], layout: Layout) -> _Span | None:
    """Find the block's ends from the two ends of the file; None where that is not enough."""
    last = len(lines) - 1
    while last >= 0 and _values(lines[last], layout) is None:
        last -= 1
        if last < len(lines) - 50:
            return None
    first, looked, width = 0, 0, 400
    while looked <= last:
        for row in range(looked, min(last + 1, looked + width)):
            if lines[row].strip() and _values(lines[row], layout) is None:
                first = row + 1
        looked += width
        if first < looked - width // 2:
            break
    while first <= last and not lines[first].strip():
        first += 1
    return _Span(first, last) if first <= last else None


def _values(line: str, layout: Layout) -> _Row | None:
    """Read one row; None where it is no row of the block."""
    cells = split(line, layout.delimiter)
    if len(cells) < layout.width:
        return None
    if len(cells) > layout.width and _surplus(cells[layout.width :], layout):
        return None
    if layout.convention.decimal == "." and not layout.clocks and "_" not in line:
        try:
            return [float(cells[column]) for column in layout.columns], None
        except ValueError:
            pass
    return _row(cells, layout)


def _row(cells: list[str], layout: Layout) -> _Row | None:
    """Read one row cell by cell."""
    values: list[float] = []
    units: list[Unit | None] = []
    for column in layout.columns:
        clock = parse_clock(cells[column]) if column in layout.clocks else None
        number = (
            Number(clock) if clock is not None else parse_cell(cells[column], layout.convention)
        )
        if number is None:
            return None
        values.append(number.value)
        units.append(number.unit)
    if not any(cells[column] for column in layout.columns):
        return None
    return values, units if any(units) else None


def _surplus(cells: list[str], layout: Layout) -> bool:
    """More numbers than the block has columns: a row of another kind, unless words explain them."""
    filled = [cell for cell in cells if cell]
    return bool(filled) and all(parse_cell(cell, layout.convention) for cell in filled)


def _quickly(rows: list[str], layout: Layout) -> NDArray[np.float64] | None:
    """Read plain rows at the speed of numpy; None where any cell wants care."""
    if layout.clocks or layout.convention.thousands:
        return None
    mark = layout.delimiter
    if mark is not None and len({row.count(mark) for row in rows}) != 1:
        return None
    body = "\n".join(rows)
    if not body.isascii() or body.encode().translate(None, _PLAIN):
        return None
    if layout.convention.decimal == ",":
        if "." in body:
            return None
        body = body.replace(",", ".")
    try:
        numbers = np.loadtxt(
            io.StringIO(body),
            delimiter=mark,
            usecols=layout.columns if mark else None,
            comments=None,
            ndmin=2,
        )
    except ValueError:
        return None
    if mark is None and numbers.shape[1] != layout.width:
        return None
    numbers = numbers if mark else numbers[:, list(layout.columns)]
    return numbers if len(numbers) == len(rows) else None


def _carefully(
    lines: list[str], layout: Layout
) -> tuple[_Span, list[str], NDArray[np.float64], tuple[Unit | None, ...]]:
    """Read every row by itself, and find the runs."""
    read = [_values(line, layout) if line.strip() else BLANK for line in lines]
    span = _longest_run(read, lines)
    kept = [row for row in range(span.first, span.last + 1) if read[row] is not BLANK]
    rows = [values for row in kept if (values := read[row])]
    numbers = np.array([values for values, _ in rows], dtype=np.float64)
    suffixed = [units for _, units in rows if units]
    units = tuple(
        _one_unit(units[place] for units in suffixed) for place in range(len(layout.columns))
    )
    return span, [lines[row] for row in kept], numbers, units


def _one_unit(units: Iterable[Unit | None]) -> Unit | None:
    found: dict[str, Unit] = {}
    for unit in units:
        if unit is not None:
            found.setdefault(unit.base, unit)
    if len(found) > 1:
        names = ", ".join(sorted(base or "a prefix" for base in found))
        raise UnusableCapture(f"a column mixes units: {clean(names)}", NO_ROWS)
    return next(iter(found.values()), None)


def _longest_run(read: Sequence[_Row | None], lines: list[str]) -> _Span:
    runs: list[list[int]] = []
    going = False
    for row, values in enumerate(read):
        if values is None:
            going = False
        elif values is not BLANK:
            if not going:
                runs.append([])
            runs[-1].append(row)
            going = True
    if not runs:
        raise UnusableCapture("no rows of numbers were found in the file", NO_ROWS)
    runs.sort(key=len, reverse=True)
    if len(runs) > 1 and len(runs[1]) >= RUN_ROWS:
        earlier, later = sorted((runs[0], runs[1]))
        between = next(row for row in range(earlier[-1] + 1, later[0]) if read[row] is None)
        raise UnusableCapture(
            f"the numbers break off at line {between + 1}, which holds "
            f"{clean(lines[between], 40)!r}, and go on after it",
            "Save one capture, one segment, to a file; remove what stands between the numbers.",
        )
    return _Span(runs[0][0], runs[0][-1])


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
    numbers, rows, notes, cut = block.numbers, block.rows, list(block.notes), False
    if below and len(below) == 1 and _is_stump(below[0], layout):
        cut = True
    elif below:
        notes.append(f"{len(below)} lines below the numbers left out")
    elif not ended and len(rows) > 2 and _is_short(rows, layout):
        cut, rows, numbers = True, rows[:-1], numbers[:-1]
    if cut:
        notes.append("the last row is cut short and was left out")
    if block.gaps:
        notes.append(f"{block.gaps} empty lines among the numbers")
    return Block(
        block.header, block.beside, numbers, rows, block.units, block.gaps, cut, tuple(notes)
    )


def _is_stump(line: str, layout: Layout) -> bool:
    cells = split(line, layout.delimiter)
    return len(cells) <= layout.width and all(
        not cell or parse_cell(cell, layout.convention) or cell in "+-" for cell in cells
    )


def _is_short(rows: list[str], layout: Layout) -> bool:
    """Without a line end, a last cell shorter than all before it may be half a number."""
    lengths = Counter(
        len(split(row, layout.delimiter)[layout.columns[-1]]) for row in rows[-200:-1]
    )
    last = split(rows[-1], layout.delimiter)[layout.columns[-1]]
    return len(last) < min(lengths)
