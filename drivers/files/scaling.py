"""From the numbers of a column to samples: volts where that is known, else what they are."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.contract import UnusableCapture, clean
from drivers.files.columns import is_whole
from drivers.files.header import Column, Header
from drivers.files.steps import common_step
from drivers.files.units import Unit, parse_unit

CODES_PER_DIVISION = 25.0
"""Of the form with a memory length, a vertical scale, a sampling period and a data line."""


@dataclass(frozen=True, slots=True, eq=False)
class Samples:
    """Samples and what is known of their scale."""

    values: NDArray[np.float64]
    """Shape (N,), volts where `has_volts`."""
    has_volts: bool
    """Whether the values are volts."""
    code: float | None
    """Size of one code, in the unit of `values`."""
    bits: int | None
    """Bits of a code, where the file states them."""
    notes: tuple[str, ...]
    """How the scale was found."""


def scale(numbers: NDArray[np.float64], column: Column, header: Header, channel: int) -> Samples:
    """Give the samples of a column.

    Raises
    ------
    UnusableCapture
        The values are levels in decibels or angles, not samples.
    """
    bits = _bits(header)
    unit = column.unit if column.unit and column.unit.base else _stated_unit(header, channel)
    # Millivolts come as whole numbers; volts that are whole by chance do not.
    doubtful = unit is None or unit.base == "code" or (column.unit is None and unit.factor == 1.0)
    codes = is_whole(numbers) and doubtful
    if codes and (line := _line(header, channel)):
        gain, zero, how = line
        return Samples(zero + gain * numbers, True, abs(gain), bits, (how,))
    if codes:
        return _fractions(numbers, bits)
    if unit is None:
        note = _unknown_unit(column)
        return Samples(numbers, not column.unit_text, common_step(numbers), bits, (note,))
    if unit.base in ("dB", "degree"):
        raise UnusableCapture(
            f"the values are in {unit.base}, not samples of a waveform",
            "Save the waveform itself: voltage over time.",
        )
    values = numbers * unit.factor if unit.factor != 1.0 else numbers
    if unit.base == "V":
        return Samples(values, True, common_step(values), bits, ())
    note = f"values are in {unit.base}, not in volts: ratios only"
    return Samples(values, False, common_step(values), bits, (note,))


def _unknown_unit(column: Column) -> str:
    if column.unit_text:
        return f"values are in {clean(column.unit_text, 24)!r}, not known as volts: ratios only"
    return "no unit is stated for the values: taken as volts"


def _bits(header: Header) -> int | None:
    bits = header.number("bits")
    return int(bits) if bits is not None and bits == int(bits) and 4 <= bits <= 32 else None


def _stated_unit(header: Header, channel: int) -> Unit | None:
    facts = header.facts.get("y_unit", [])
    if not facts:
        return None
    return parse_unit(facts[channel - 1 if len(facts) >= channel else 0].text)


def _line(header: Header, channel: int) -> tuple[float, float, str] | None:
    """Find gain and zero of codes from the header, volts a code and volts.

    Three forms, told apart by what they state: step, offset in codes, zero in volts; increment,
    origin, reference, where origin is volts or codes; volts a division at 25 codes each.
    """
    step = header.number("y_step", channel)
    if step is not None and _usable(step):
        codes = header.number("y_code_offset", channel) or 0.0
        volts = header.number("y_zero", channel) or 0.0
        return (
            step,
            volts - step * codes,
            f"codes turned to volts by the header's {step:.6g} V a code",
        )
    increment = header.number("y_increment", channel)
    if increment is not None and _usable(increment):
        return _with_origin(header, channel, increment)
    division = header.number("y_division", channel)
    if division is not None and _usable(division) and header.facts.get("data") is not None:
        gain = division / CODES_PER_DIVISION
        return gain, 0.0, f"codes turned to volts at 25 codes a division of {division:.6g} V"
    return None


def _with_origin(header: Header, channel: int, step: float) -> tuple[float, float, str] | None:
    origin = header.number("y_origin", channel) or 0.0
    reference = header.number("y_reference", channel) or 0.0
    how = f"codes turned to volts by the header's {step:.6g} V a code"
    if origin == 0.0:
        return step, -step * reference, how
    if origin == int(origin) and abs(origin) > 2.0:
        return step, -step * (origin + reference), f"{how}, its origin counted in codes"
    if origin != int(origin):
        return step, origin - step * reference, how
    return None


def _usable(number: float) -> bool:
    return math.isfinite(number) and number != 0.0


def _fractions(numbers: NDArray[np.float64], bits: int | None) -> Samples:
    """Give codes of unknown size as fractions of full scale, about the middle where unsigned."""
    finite = numbers[np.isfinite(numbers)]
    signed = bool(finite.min() < 0.0)
    largest = float(np.abs(finite).max())
    width = bits or max(8, math.ceil(math.log2(largest + 1.0)) + (1 if signed else 0))
    half = 2.0 ** (width - 1)
    values = (numbers if signed else numbers - half) / half
    notes = (
        "values are whole numbers without a unit: taken as codes, ratios only",
        f"full scale taken as {width} bits",
    )
    return Samples(values, False, 1.0 / half, bits, notes)
