"""The numbers of a text file's rows: at the speed of numpy where plain, cell by cell where not."""

from __future__ import annotations

import io
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.contract import UnusableCapture, clean
from drivers.files.cells import Number, parse_cell, parse_clock
from drivers.files.layout import NO_ROWS, Layout, split
from drivers.files.units import Unit

STRETCH = 2048
"""Lines tried at once; one odd cell sends only its own stretch the slow way."""
OTHER, BLANK, DATA = 0, 1, 2
"""What a line is."""
_PLAIN = b"0123456789+-.,eE \t\n;|"
_Row = tuple[list[float], list[Unit | None] | None]


@dataclass(frozen=True, slots=True, eq=False)
class Rows:
    """Every line of a file, tried as a row of data."""

    kinds: NDArray[np.int8]
    """Shape (lines,), `OTHER`, `BLANK` or `DATA`."""
    numbers: NDArray[np.float64]
    """Shape (lines that are data, columns)."""
    units: tuple[Unit | None, ...]
    """Unit written behind the numbers of each column, already applied."""


def read_rows(lines: list[str], layout: Layout) -> Rows:
    """Try every line as a row.

    Raises
    ------
    UnusableCapture
        The numbers of one column carry different units.
    """
    kinds = np.full(len(lines), OTHER, np.int8)
    parts = [np.empty((0, len(layout.columns)))]
    suffixes: list[set[Unit]] = [set() for _ in layout.columns]
    for start in range(0, len(lines), STRETCH):
        stretch = lines[start : start + STRETCH]
        filled = [row for row, line in enumerate(stretch) if line and not line.isspace()]
        kept = stretch if len(filled) == len(stretch) else [stretch[row] for row in filled]
        kinds[start : start + len(stretch)] = BLANK
        places = start + np.array(filled, np.intp)
        if (quick := _quickly(kept, layout)) is not None:
            kinds[places] = DATA
            parts.append(quick)
            continue
        read = [read_row(line, layout) for line in kept]
        good = np.array([row is not None for row in read], bool)
        kinds[places] = np.where(good, DATA, OTHER)
        rows = [row for row in read if row is not None]
        parts.append(
            np.array([values for values, _ in rows], np.float64).reshape(-1, len(suffixes))
        )
        for _, units in rows:
            for column, unit in enumerate(units or ()):
                if unit is not None:
                    suffixes[column].add(unit)
    numbers = np.concatenate([part for part in parts if len(part)] or parts[:1])
    return Rows(kinds, numbers, tuple(map(_one_unit, suffixes)))


def read_row(line: str, layout: Layout) -> _Row | None:
    """Read one row; None where it is no row of data."""
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
    return _cell_by_cell(cells, layout)


def _cell_by_cell(cells: list[str], layout: Layout) -> _Row | None:
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
    """More numbers than there are columns: a row of another kind, unless words explain them."""
    filled = [cell for cell in cells if cell]
    return bool(filled) and all(parse_cell(cell, layout.convention) for cell in filled)


def _quickly(rows: list[str], layout: Layout) -> NDArray[np.float64] | None:
    """Read plain rows all at once; None where any cell wants care."""
    mark = layout.delimiter
    if not rows or layout.clocks or layout.convention.thousands:
        return None
    if mark is not None and len({row.count(mark) for row in rows}) != 1:
        return None
    body = "\n".join(rows)
    if not body.isascii() or body.encode().translate(None, _PLAIN):
        return None
    if layout.convention.decimal == ",":
        if "." in body:
            return None
        body = body.replace(",", ".")
    used = layout.columns if mark else None
    try:
        numbers = np.loadtxt(
            io.StringIO(body), delimiter=mark, usecols=used, comments=None, ndmin=2
        )
    except ValueError:
        return None
    if mark is None:
        if numbers.shape[1] != layout.width:
            return None
        numbers = numbers[:, list(layout.columns)]
    return numbers if len(numbers) == len(rows) else None


def _one_unit(units: Iterable[Unit]) -> Unit | None:
    found = {unit.base: unit for unit in units}
    if len(found) > 1:
        names = ", ".join(sorted(base or "a prefix" for base in found))
        raise UnusableCapture(f"a column mixes units: {clean(names)}", NO_ROWS)
    return next(iter(found.values()), None)
