"""Where a file's interval comes from: the person's word, then the time column, then the header."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from drivers.contract import UnusableCapture, clean
from drivers.files.axis import ASK, Axis, from_times, printed
from drivers.files.block import Block
from drivers.files.columns import ENVELOPE, Roles
from drivers.files.header import Header
from drivers.files.layout import Layout, split
from drivers.files.units import Unit, parse_unit

AGREE = 1e-3
"""Relative difference up to which two statements of an interval are the same."""
DAY_S = 86400.0


@dataclass(frozen=True, slots=True, eq=False)
class Table:
    """A file understood: its header, its numbers, and what its columns are."""

    header: Header
    """Names, units, facts."""
    block: Block
    """The numbers."""
    layout: Layout
    """How the rows are split."""
    roles: Roles
    """Which column is what."""


def settle(table: Table, wanted_s: float | None) -> Axis:
    """Settle the time axis of a file.

    Raises
    ------
    UnusableCapture
        Nothing says how far apart the samples are, or the file contradicts itself.
    """
    if wanted_s is not None:
        return _by_person(table, wanted_s)
    stated_s = _stated(table)
    if table.roles.time is not None:
        return _by_times(table, stated_s)
    if table.block.gaps:
        raise UnusableCapture(
            f"{table.block.gaps} lines among the numbers are empty, and there is no time column",
            "Save the capture again, with a time column.",
        )
    _check_counts(table)
    if stated_s is None:
        raise UnusableCapture("the file does not say how far apart its samples are", ASK)
    return Axis(stated_s, None, (f"interval of {stated_s:.6g} s taken from the header",))


def _check_counts(table: Table) -> None:
    """Refuse to lay the header's interval on rows that may have been thinned out."""
    step = table.roles.counter_step
    if step is not None and step != 1.0:
        raise UnusableCapture(
            "the column that counts the rows does not step by one, so that the header's interval "
            "may not be theirs",
            ASK,
        )
    length, rows = table.header.number("length"), len(table.block.rows)
    if length is not None and length >= 2 * rows and length % rows == 0:
        raise UnusableCapture(
            f"the header states {length:.0f} points and the file has {rows}: they may have been "
            "thinned out, and the header's interval may not be theirs",
            ASK,
        )


def _by_person(table: Table, wanted_s: float) -> Axis:
    notes: tuple[str, ...] = (f"interval of {wanted_s:.6g} s as stated by you",)
    if table.roles.time is None:
        return Axis(wanted_s, None, notes)
    try:
        own = _by_times(table, None)
    except UnusableCapture:
        return Axis(wanted_s, None, (*notes, "the time column was not used"))
    if abs(own.interval_s - wanted_s) > AGREE * wanted_s:
        notes = (*notes, f"the file's time column has {own.interval_s:.6g} s instead")
    return Axis(wanted_s, None, notes)


def _by_times(table: Table, stated_s: float | None) -> Axis:
    time, layout = table.roles.time, table.layout
    assert time is not None
    times = table.block.numbers[:, time.place]
    notes: tuple[str, ...] = ()
    if layout.columns[time.place] in layout.clocks:
        times = times + DAY_S * np.cumsum(np.diff(times, prepend=times[:1]) < -DAY_S / 2)
        factor = 1.0
    else:
        unit = _time_unit(table)
        factor = unit.factor if unit else 1.0
        if unit is None:
            notes = ("no unit is stated for time: taken as seconds",)
    _refuse_pairs(times, table.block.numbers[:, table.roles.values.place])
    fineness = printed(_cells(table), layout.convention)
    axis = from_times(times * factor, fineness, factor, stated_s)
    return replace(axis, notes=(*notes, *axis.notes))


def _time_unit(table: Table) -> Unit | None:
    """Find the time column's unit: its own, else the header's; None for none stated."""
    time = table.roles.time
    assert time is not None
    if time.unit is not None and time.unit.base == "s":
        return time.unit
    if time.unit is not None or time.unit_text:
        word = clean(time.unit_text or (time.unit.base if time.unit else ""), 24)
        raise UnusableCapture(f"time is in {word!r}, which is no unit of time known here", ASK)
    fact = table.header.first("x_unit")
    unit = parse_unit(fact.text) if fact else None
    if unit is not None and unit.base == "s":
        return unit
    times = table.block.numbers[:, time.place]
    if np.all(times == np.round(times)):
        raise UnusableCapture("time comes in whole numbers, and the file does not say of what", ASK)
    return None


def _cells(table: Table) -> list[str]:
    """Take a sample of the time cells as printed: both ends and some between."""
    assert table.roles.time is not None
    column = table.layout.columns[table.roles.time.place]
    rows = table.block.rows
    stride = max(1, len(rows) // 100)
    sample = [*rows[:50], *rows[::stride], *rows[-50:]]
    return [split(row, table.layout.delimiter)[column] for row in sample]


def _refuse_pairs(times: NDArray[np.float64], values: NDArray[np.float64]) -> None:
    """Refuse minimum and maximum written one after the other at the same instant.

    Coarsely printed times of plain samples come in pairs too, but there the second of a pair is
    now above, now below the first.
    """
    pairs = times.size // 2
    if pairs < 4:
        return
    first, second = times[0 : 2 * pairs : 2], times[1 : 2 * pairs : 2]
    if not np.array_equal(first, second) or np.any(np.diff(first) <= 0.0):
        return
    rises = values[1 : 2 * pairs : 2] - values[0 : 2 * pairs : 2]
    if np.all(rises >= 0.0) or np.all(rises <= 0.0):
        raise UnusableCapture(
            "each instant has two values, a minimum and a maximum: an envelope, not samples",
            ENVELOPE,
        )


def _stated(table: Table) -> float | None:
    """Find the interval that the header states, by itself or as a rate; both must agree."""
    found = [
        interval_s
        for concept in ("interval", "rate", "clock")
        if (interval_s := _interval(table, concept)) is not None
    ]
    if table.roles.time is None and any(abs(one - found[0]) > AGREE * found[0] for one in found):
        raise UnusableCapture(
            "the header states intervals that contradict each other: "
            + ", ".join(f"{interval_s:.6g} s" for interval_s in found),
            ASK,
        )
    return found[0] if found else None


def _interval(table: Table, concept: str) -> float | None:
    """Read one statement as seconds between samples, by its unit where it has one."""
    fact = table.header.fact(concept, table.roles.place)
    if fact is None or fact.number is None or not 0.0 < fact.number < math.inf:
        return None
    base = fact.unit.base if fact.unit else ""
    if base == "Hz" or (not base and concept == "rate"):
        return 1.0 / fact.number
    if base == "s":
        return fact.number
    if base or concept != "interval":
        return None
    x_unit = table.header.first("x_unit")
    unit = parse_unit(x_unit.text) if x_unit else None
    return fact.number * (unit.factor if unit is not None and unit.base == "s" else 1.0)
