"""Where the data of a text file stand: its delimiter, its number convention, the block of rows.

The rule: the block is the longest run of rows that hold numbers in the same columns. What stands
above it is header, what stands below is footer. Two long runs in one file are refused, since
dropping one of them silently would give a record that nobody took.
"""

from __future__ import annotations

import csv
import re
from collections import Counter
from dataclasses import dataclass, field
from itertools import pairwise, zip_longest

from drivers.contract import UnusableCapture
from drivers.files.cells import (
    Convention,
    is_date,
    is_overrange,
    looks_numeric,
    parse_cell,
    parse_clock,
)
from drivers.files.conventions import find_convention
from drivers.files.text import Text

DELIMITERS: tuple[str | None, ...] = ("\t", ";", ",", "|", None)
"""Tried in this order; None is runs of blanks."""
SAMPLE_ROWS = 120
"""Rows looked at, from the end and from the middle, to find the layout."""
FRONT = 8192
"""Characters of a line looked at to find the layout."""
NO_ROWS = "Save the capture as rows of numbers, one row for each instant."
_BLANKS = re.compile(r"[ \t]+")
_FRACTION = re.compile(r"^(\d+)([eE][+-]?\d+)?(?:\s*[^\d\s.,+-][^\d.,]*)?$")
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
        """Part of the rows that have the usual shape, times the part of their cells that it explains.

        A wrong delimiter often leaves a number at either end of a row, and nonsense between.
        """
        if not self.shape:
            return 0.0
        usual = [row for row in self.rows if _shape(row, self.convention) == self.shape]
        filled = sum(1 for row in usual for cell in row if cell and not is_date(cell))
        return len(usual) / len(self.rows) * len(usual) * len(self.shape) / max(filled, 1)


def split(line: str, delimiter: str | None) -> list[str]:
    """Split a line into stripped cells, minding quotes."""
    if '"' in line:
        try:
            cells = next(csv.reader([line], delimiter=delimiter or " ", skipinitialspace=True))
        except (csv.Error, StopIteration):
            cells = line.split(delimiter)
        if delimiter is None:
            cells = [cell for cell in cells if cell] or [""]
    elif delimiter is None and not line.isascii():
        cells = _BLANKS.split(line.strip(" \t"))  # a no-break space does not part columns
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
    best = max(tallies, key=_merit, default=None)
    if best is None or best.score == 0.0:
        raise UnusableCapture("no rows of numbers were found in the file", NO_ROWS)
    best = _without_joined_commas(best, tallies, text.lines[:100])
    if best.convention.doubtful:
        raise UnusableCapture(
            "every mark stands before three digits: it may mark decimals or thousands", AMBIGUOUS
        )
    return _layout(best)


def _merit(tally: _Tally) -> tuple[float, bool, int]:
    """Rank a reading: what it explains, then a mark over blanks, which may part thousands too."""
    count = len(tally.shape)
    return round(tally.score, 2), tally.delimiter is not None and count > 1, count


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
    convention = find_convention(zip_longest(*(plain or rows), fillvalue=""))
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
    best = tally.shape
    alike = [shape for shape in tally.shapes.elements() if 2 * len(shape) >= len(best)]
    counts = Counter(column for shape in alike for column in shape)
    total = len(alike)
    return tuple(sorted(column for column, count in counts.items() if 2 * count > total)) or best


def _holds(row: list[str], columns: tuple[int, ...], convention: Convention) -> bool:
    return len(row) > columns[-1] and set(columns) <= set(_shape(row, convention))


def _is_clock(rows: list[list[str]], column: int, convention: Convention) -> bool:
    return any(
        parse_clock(row[column]) is not None and parse_cell(row[column], convention) is None
        for row in rows
    )


def _without_joined_commas(best: _Tally, tallies: list[_Tally], head: list[str]) -> _Tally:
    """Look whether commas that seem to part columns are decimal marks, and take the other reading.

    Whole numbers are not printed as `05`, `-0` or `5e-3`; digits behind a comma are. Where that
    does not tell, the count of names above the columns does.
    """
    if best.delimiter != ",":
        return best
    rows = [row for row in best.rows if _shape(row, best.convention) == best.shape]
    doubtful = any(_decimal_pair(*pair) for row in rows for pair in pairwise(row))
    if not doubtful and not _could_be_pairs(rows):
        return best
    names = _count_names(head)
    if not doubtful and (names == len(best.shape) or (names == 0 and len(best.shape) > 2)):
        return best
    others = [tally for tally in tallies if tally.convention.decimal == ","]
    other = max(others, key=lambda tally: tally.score, default=None)
    if other is not None and other.score >= 0.98 * best.score and (doubtful or names == 1):
        return other
    raise UnusableCapture(
        "commas may part the columns or mark decimals, and the file does not tell which", AMBIGUOUS
    )


def _could_be_pairs(rows: list[list[str]]) -> bool:
    """Say whether rows of whole numbers could be half as many numbers with decimal commas."""
    for row in rows:
        if (
            len(row) % 2
            or not all(map(_whole, row[0::2]))
            or not all(map(_FRACTION.match, row[1::2]))
        ):
            return False
    first = [int("".join(row[0].split())) for row in rows]
    return any(below != above + 1 for above, below in pairwise(first))


def _count_names(head: list[str]) -> int:
    """Count the names above the numbers: the cells of the last line that has only words."""
    count = 0
    for line in head:
        cells = [cell for cell in split(line, ",") if cell]
        if cells and not any(looks_numeric(cell) for cell in cells):
            count = len(cells)
    return count


def _decimal_pair(whole: str, fraction: str) -> bool:
    """`0` and `05`, `-0` and `3`, `1` and `5e-3`: two cells that are one number with a comma."""
    digits = whole.lstrip("+-")
    found = _FRACTION.match(fraction)
    if not digits.isdigit() or found is None or (digits[0] == "0" and len(digits) > 1):
        return False
    zeros = found[1][0] == "0" and len(found[1]) > 1
    return zeros or found[2] is not None or whole in ("-0", "+0")


def _whole(cell: str) -> bool:
    return "".join(cell.lstrip("+-").split()).isdigit()
