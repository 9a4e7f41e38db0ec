"""Which column is time, which are values, and which of them is wanted."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.contract import UnusableCapture, clean
from drivers.files.block import Block
from drivers.files.header import Column, Header
from drivers.files.layout import Layout

NO_SPECTRUM = "Save the waveform itself: voltage over time."
ENVELOPE = "Set the instrument's acquisition to plain sampling (no peak detect, no envelope) and save again."
CHOOSE = "Choose the column of values with `--channel N`."
_LOW = re.compile(r"(?:^|[\W_])min(?:imum)?(?:$|[\W_])", re.IGNORECASE)
_HIGH = re.compile(r"(?:^|[\W_])max(?:imum)?(?:$|[\W_])", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Roles:
    """What each column is."""

    time: Column | None
    """The time column that belongs to the values."""
    values: Column
    """The column of values taken."""
    place: int
    """1-based number of the column among the columns of values."""
    bare: bool
    """True where the time column has neither name nor unit and was known by its even steps."""
    counter_step: float | None
    """Step of the column that counts the rows, where there is one; NaN where it is uneven."""
    notes: tuple[str, ...]
    """What was taken of what."""


def assign(header: Header, block: Block, layout: Layout, channel: int | None) -> Roles:
    """Tell the columns apart and take the wanted one.

    Parameters
    ----------
    channel
        1-based number among the columns of values; None takes the first in volts, else the first.

    Raises
    ------
    UnusableCapture
        No column of values, no such channel, a spectrum, an envelope, or several nameless ones.
    """
    columns = list(header.columns)
    _refuse_kinds(columns)
    parts = _sorted_out(columns, block, layout)
    values = _without_codes(parts.others, block)
    if not values:
        raise UnusableCapture("the file has no column of values", "Save the values too.")
    named = bool(parts.times) or any(column.name for column in columns)
    place = _place(values, channel, named=named)
    chosen = values[place - 1]
    before = [column for column in parts.times if column.place < chosen.place]
    return Roles(
        time=before[-1] if before else next(iter(parts.times), None),
        values=chosen,
        place=place,
        bare=parts.bare,
        counter_step=_step(parts.counters, block),
        notes=_said(values, chosen, place),
    )


@dataclass(frozen=True, slots=True)
class _Parts:
    """Columns by kind, each in the file's order."""

    times: list[Column]
    bare: bool
    counters: list[Column]
    others: list[Column]


def _sorted_out(columns: list[Column], block: Block, layout: Layout) -> _Parts:
    """Tell times, counters of rows, and the rest apart.

    A time in numbers goes before a time of day, which is often printed coarser.
    """
    clocks = [column for column in columns if layout.columns[column.place] in layout.clocks]
    times = [column for column in columns if column.is_time and column not in clocks] or clocks
    rest = [column for column in columns if column not in times and column not in clocks]
    counters = [column for column in rest if _counts(column, block)]
    others = [column for column in rest if column not in counters]
    if not times and not counters and len(others) > 1 and _even(others[0], block):
        _refuse_other_axis(others[0])
        return _Parts(others[:1], True, [], others[1:])
    return _Parts(times, False, counters, others)


def _refuse_other_axis(column: Column) -> None:
    """Refuse an axis of angle, length or anything but time."""
    if column.unit is not None or column.unit_text:
        raise UnusableCapture(
            f"the first column ({clean(column.name, 40)}) rises evenly and is no time",
            "Save voltage over time.",
        )


def _counts(column: Column, block: Block) -> bool:
    """Say whether a column counts the rows: by its name, or by whole numbers in steps of one."""
    if column.is_index:
        return True
    numbers = block.numbers[:, column.place]
    return numbers.size > 2 and bool(np.all(np.diff(numbers) == 1.0))


def _step(counted: list[Column], block: Block) -> float | None:
    if not counted or len(block.numbers) < 2:
        return None
    steps = np.diff(block.numbers[:, counted[0].place])
    return float(steps[0]) if bool(np.all(steps == steps[0])) else math.nan


def _even(column: Column, block: Block) -> bool:
    """Say whether a column is an axis: always rising, in nearly equal steps. No sine does that."""
    numbers = block.numbers[:, column.place]
    steps = np.diff(numbers)
    if numbers.size < 3 or not bool(np.all(steps >= 0.0)) or numbers[-1] <= numbers[0]:
        return False
    mean = (numbers[-1] - numbers[0]) / steps.size
    straight = numbers[0] + mean * np.arange(numbers.size)
    return bool(np.abs(numbers - straight).max() <= 2.0 * max(mean, float(steps.max())))


def _without_codes(columns: list[Column], block: Block) -> list[Column]:
    """Leave out columns of codes that stand next to the same values in volts."""
    plain = [column for column in columns if not column.is_code]
    if len(plain) < len(columns) and plain:
        return plain
    twins = [column for column in columns if _is_twin(column, columns, block)]
    return [column for column in columns if column not in twins]


def _is_twin(column: Column, columns: list[Column], block: Block) -> bool:
    """Say whether a column of whole numbers is a straight line of another, which is not whole."""
    if column.unit is not None and column.unit.base != "code":
        return False
    codes = block.numbers[:, column.place]
    if not is_whole(codes) or np.ptp(codes) == 0.0:
        return False
    return any(
        _straight(codes, block.numbers[:, other.place]) for other in columns if other != column
    )


def is_whole(values: NDArray[np.float64]) -> bool:
    """Say whether all values (NaN passed over) are whole numbers."""
    finite = values[np.isfinite(values)]
    return bool(finite.size) and bool(np.all(finite == np.round(finite)))


def _straight(codes: NDArray[np.float64], values: NDArray[np.float64]) -> bool:
    if is_whole(values):
        return False
    both = np.isfinite(codes) & np.isfinite(values)
    x, y = codes[both][:4096], values[both][:4096]
    if x.size < 16 or np.ptp(x) < 8.0 or np.ptp(y) == 0.0:
        return False
    x, y = x - x.mean(), y - y.mean()
    slope = float(np.dot(x, y) / np.dot(x, x))
    return slope != 0.0 and float(np.abs(y - slope * x).max()) < 0.3 * abs(slope)


def _refuse_kinds(columns: list[Column]) -> None:
    """Refuse what is no waveform, whatever else its names say."""
    if columns[0].is_frequency and len(columns) > 1:
        raise UnusableCapture(
            "the first column is frequency: a spectrum, not a waveform", NO_SPECTRUM
        )
    names = [column.name for column in columns]
    if any(map(_LOW.search, names)) and any(map(_HIGH.search, names)):
        raise UnusableCapture(
            "the file holds a minimum and a maximum for each instant, not samples", ENVELOPE
        )


def _place(values: list[Column], channel: int | None, *, named: bool) -> int:
    if channel is not None:
        if 1 <= channel <= len(values):
            return channel
        raise UnusableCapture(
            f"the file has {len(values)} column(s) of values, no number {channel}", CHOOSE
        )
    if len(values) > 1 and not named:
        raise UnusableCapture(
            f"the file has {len(values)} columns without names and without time", CHOOSE
        )
    volts = [number for number, column in enumerate(values, 1) if column.is_volts]
    return volts[0] if volts else 1


def _said(values: list[Column], chosen: Column, place: int) -> tuple[str, ...]:
    if len(values) == 1:
        return ()
    name = f" ({clean(chosen.name, 40)})" if chosen.name else ""
    return (f"column {place} of {len(values)} columns of values taken{name}",)
