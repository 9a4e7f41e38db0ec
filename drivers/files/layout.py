"""Where the data of a text file stand: its delimiter, its number convention, the block of rows.

The rule: the block is the longest run of rows that hold numbers in the same columns. What stands
above it is header, what stands below is footer. Two long runs in one file are refused, since
dropping one of them silently would give a record that nobody took.
"""

from __future__ import annotations

import csv
from collections import Counter
from dataclasses import dataclass, field
from itertools import pairwise

from drivers.contract import UnusableCapture
from drivers.files.cells import (
    Convention,
    find_convention,
    is_overrange,
    looks_numeric,
    parse_cell,
    parse_clock,
)
from drivers.files.text import Text

DELIMITERS: tuple[str | None, ...] = ("\t", ";", ",", "|", None)
"""Tried in this order; None is runs of blanks."""
SAMPLE_ROWS = 120
"""Rows looked at, from the end and from the middle, to find the layout."""
FRONT = 8192
"""Characters of a line looked at to find the layout."""
NO_ROWS = "Save the capture as rows of numbers, one row for each instant."
AMBIGUOUS = "Save with a point as decimal mark, or with semicolons or tabs between the columns."


@dataclass(frozen=True, slots=True)
class Layout:
    """How the rows of a file are to be split and which columns hold numbers."""

    delimiter: str | None
    """Between cells; None for runs of blanks."""
    convention: Convention
    """How numbers are written."""
    columns: tuple[int, ...]
    """Columns that hold numbers (or times of day) in the block."""
    clocks: frozenset[int]
    """Those of `columns` that hold times of day."""
    width: int
    """Cells in an ordinary row of the block, up to the last column with numbers."""
    notes: tuple[str, ...] = ()
    """What was decided and is worth saying."""


@dataclass(slots=True)
class _Tally:
    """What a candidate delimiter makes of the sample."""

    delimiter: str | None
    convention: Convention
    rows: list[list[str]]
    shapes: Counter[tuple[int, ...]] = field(default_factory=Counter)

    @property
    def shape(self) -> tuple[int, ...]:
        return max(self.shapes, key=lambda shape: (self.shapes[shape], len(shape)), default=())

    @property
    def score(self) -> float:
        return self.shapes[self.shape] / len(self.rows) if self.shape else 0.0


def split(line: str, delimiter: str | None) -> list[str]:
    """Split a line into stripped cells, minding quotes."""
    if '"' in line:
        try:
            cells = next(csv.reader([line], delimiter=delimiter or " ", skipinitialspace=True))
        except (csv.Error, StopIteration):
            cells = line.split(delimiter)
        if delimiter is None:
            cells = [cell for cell in cells if cell]
    else:
        cells = line.split(delimiter)
    return [cell.strip() for cell in cells]


def _front(line: str, delimiter: str | None) -> list[str]:
    """Split the front of a line: a record on one line may have a million cells."""
    cells = split(line[:FRONT], delimiter)
    return cells if len(line) <= FRONT or len(cells) < 2 else cells[:-1]


def find_layout(text: Text) -> Layout:
    """Find the layout from a sample of the last and the middle rows.

    Raises
    ------
    UnusableCapture
        There are no numbers, or commas could mean two things.
    """
    sample = _sample(text.lines)
    if not sample:
        raise UnusableCapture("the file is empty", NO_ROWS)
    tried = [text.delimiter] if text.delimiter else list(DELIMITERS)
    tallies = [tally for mark in tried if (tally := _tally(sample, mark))]
    best = max(tallies, key=lambda tally: (round(tally.score, 2), len(tally.shape)), default=None)
    if best is None or best.score == 0.0:
        raise UnusableCapture("no rows of numbers were found in the file", NO_ROWS)
    return _joined_commas(best) or _layout(best)


def _sample(lines: list[str]) -> list[str]:
    """Take rows from the end and from the middle; the head of a file is header."""
    if len(lines) <= 2 * SAMPLE_ROWS:
        return [line for line in lines if line.strip()]
    middle = len(lines) // 2
    rows = lines[middle : middle + SAMPLE_ROWS] + lines[-SAMPLE_ROWS:]
    return [line for line in rows if line.strip()]


def _tally(sample: list[str], delimiter: str | None) -> _Tally | None:
    rows = [_front(line, delimiter) for line in sample]
    plain = [row for row in rows if any(row) and all(map(looks_numeric, row))]
    convention = find_convention(cell for row in plain or rows for cell in row)
    if convention is None:
        return None
    tally = _Tally(delimiter, convention, rows)
    tally.shapes.update(shape for row in rows if (shape := _shape(row, convention)))
    return tally


def _shape(row: list[str], convention: Convention) -> tuple[int, ...]:
    """Give the columns with numbers or times of day, overrange marks counted with them."""
    columns = []
    numbers = 0
    for column, cell in enumerate(row):
        if not cell:
            continue
        if is_overrange(cell):
            columns.append(column)
        elif parse_cell(cell, convention) or parse_clock(cell) is not None:
            columns.append(column)
            numbers += 1
    return tuple(columns) if numbers else ()


def _layout(tally: _Tally) -> Layout:
    columns = _columns(tally)
    body = [row for row in tally.rows if _holds(row, columns, tally.convention)]
    clocks = frozenset(column for column in columns if _is_clock(body, column, tally.convention))
    return Layout(tally.delimiter, tally.convention, columns, clocks, columns[-1] + 1)


def _columns(tally: _Tally) -> tuple[int, ...]:
    """Columns with numbers in most rows: a few cells of overrange do not unmake a column."""
    counts = Counter(column for shape in tally.shapes.elements() for column in shape)
    total = sum(tally.shapes.values())
    return tuple(sorted(column for column, count in counts.items() if 2 * count > total))


def _holds(row: list[str], columns: tuple[int, ...], convention: Convention) -> bool:
    return len(row) > columns[-1] and set(columns) <= set(_shape(row, convention))


def _is_clock(rows: list[list[str]], column: int, convention: Convention) -> bool:
    return any(
        parse_clock(row[column]) is not None and parse_cell(row[column], convention) is None
        for row in rows
    )


def _joined_commas(tally: _Tally) -> Layout | None:
    """Look whether commas that seem to part columns are decimal marks.

    Whole numbers are not printed as `05` or `-0`; digits behind a comma are.
    """
    if tally.delimiter != ",":
        return None
    rows = [row for row in tally.rows if _shape(row, tally.convention)]
    pairs = [pair for row in rows for pair in pairwise(row)]
    if not any(_decimal_pair(*pair) for pair in pairs):
        return None
    if all(len(row) <= 2 and all(_whole(cell) for cell in row) for row in rows):
        decimal = Convention(",")
        return Layout("\t", decimal, (0,), frozenset(), 1, ("commas taken as decimal marks",))
    raise UnusableCapture(
        "commas seem to part the columns and to mark decimals at the same time", AMBIGUOUS
    )


def _decimal_pair(whole: str, fraction: str) -> bool:
    """`0` and `05`, or `-0` and `3`: two cells that are one number with a decimal comma."""
    digits = whole.lstrip("+-")
    if not (digits.isdigit() and fraction.isdigit()) or (digits[0] == "0" and len(digits) > 1):
        return False
    return (fraction[0] == "0" and len(fraction) > 1) or whole in ("-0", "+0")


def _whole(cell: str) -> bool:
    return cell.lstrip("+-").isdigit()
