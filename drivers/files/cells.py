"""What a cell of a table holds: a number in some convention, an overrange mark, a time of day, text."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from drivers.files.units import Unit, parse_prefix, parse_unit

_OVERRANGE_WORDS = (
    "nan -nan +nan inf +inf -inf infinity -infinity ovl ovr ol o.l o.l. ofl over overflow overrange "
    "over-range underflow underrange clip clipped n/a #n/a na null none invalid error err "
    "#num! #value! #div/0! 1.#inf -1.#inf 1.#ind -1.#ind 1.#qnan -1.#qnan \N{INFINITY} "
    "-\N{INFINITY} +\N{INFINITY}"
)
_OVERRANGE = frozenset(_OVERRANGE_WORDS.split())
_ONLY_MARKS = re.compile(r"^[*\-?.#\u2013\u2014]*[*\-?#\u2013\u2014]+[*\-?.#\u2013\u2014]*$")
_BLANKS = (
    " '\N{NO-BREAK SPACE}\N{NARROW NO-BREAK SPACE}\N{THIN SPACE}\N{RIGHT SINGLE QUOTATION MARK}"
)
NUMBER = re.compile(
    rf"^(?P<sign>[+\-\N{{MINUS SIGN}}]?)\s*(?P<body>[0-9.,{_BLANKS}]*[0-9.,])"
    r"(?P<exponent>(?:[eEdD]| [eE](?=[+\-]))[+\-\N{MINUS SIGN}]?[0-9]{1,4})?\s*"
    r"(?P<suffix>[^\s0-9.,+\-][^0-9]{0,12})?$"
)
_DATE = re.compile(r"^\d{1,4}[./\-]\d{1,2}[./\-]\d{1,4}$")
_CLOCK = re.compile(
    r"^(?:\d{1,4}[./\-]\d{1,2}[./\-]\d{1,4}[T ]\s*)?"
    r"(\d{1,2}):(\d\d):(\d\d)(?:[.,:](\d{1,9}))?\s*(?:Z|[+\-]\d\d:?\d\d)?$"
)


@dataclass(frozen=True, slots=True)
class Convention:
    """How numbers are written."""

    decimal: str = "."
    """The decimal mark."""
    thousands: str = ""
    """The mark between groups of three digits, besides blanks; empty for none."""
    doubtful: bool = False
    """True where every number could be read either way, as 1,234 can."""


@dataclass(frozen=True, slots=True)
class Number:
    """A number and the unit written behind it."""

    value: float
    """The number, in the unit's base; NaN for an overrange mark."""
    unit: Unit | None = None
    """The unit behind the number; a bare prefix gives the base ''."""


def parse_cell(cell: str, convention: Convention) -> Number | None:
    """Read a cell as a number; NaN for an overrange mark or an empty cell, None for text."""
    if convention.decimal == "." and "_" not in cell:
        try:
            value = float(cell)
        except ValueError:
            pass
        else:
            return Number(value if math.isfinite(value) else math.nan)
    cell = cell.strip()
    if is_overrange(cell):
        return Number(math.nan)
    found = NUMBER.match(cell)
    if found is None or (digits := plain_digits(found["body"], convention)) is None:
        return None
    exponent = _exponent(found["exponent"])
    value = float(f"{digits}e{exponent}")
    if found["sign"] in ("-", "\N{MINUS SIGN}"):
        value = -value
    return _with_suffix(value, found["suffix"])


def is_overrange(cell: str) -> bool:
    """Say whether a stripped cell stands for a value that could not be had."""
    if cell == "#":
        return False  # the usual name of a column that counts
    return not cell or cell.casefold() in _OVERRANGE or bool(_ONLY_MARKS.match(cell))


def _with_suffix(value: float, suffix: str | None) -> Number | None:
    if suffix is None:
        return Number(value if math.isfinite(value) else math.nan)
    if (unit := parse_unit(suffix)) is not None:
        return Number(value * unit.factor, unit)
    if (size := parse_prefix(suffix.strip())) is not None:
        return Number(value * size, Unit("", size))
    return None


def plain_digits(body: str, convention: Convention) -> str | None:
    """Give the digits with a decimal point and without group marks; None where they do not fit."""
    whole, mark, fraction = body.partition(convention.decimal)
    if mark and not fraction.isdigit() and (fraction or mark == ","):
        return None  # `5.` is a number, `5,` is a number and a delimiter
    if not whole.isdigit() and whole:
        groups = re.split(f"[{re.escape(_BLANKS + convention.thousands)}]", whole)
        if not _grouped(groups):
            return None
        whole = "".join(groups)
    return f"{whole}.{fraction}" if whole or fraction else None


def _grouped(groups: list[str]) -> bool:
    first, rest = groups[0], groups[1:]
    if not first.isdigit() or len(first) > 3 or first.startswith("0"):
        return False
    return all(len(group) == 3 and group.isdigit() for group in rest)


def is_date(cell: str) -> bool:
    """Say whether a cell is a date, which looks like a number with two marks."""
    return bool(_DATE.match(cell.strip()))


def parse_clock(cell: str) -> float | None:
    """Read a time of day, with or without a date before it, as seconds; None where it is none."""
    found = _CLOCK.match(cell.strip())
    if found is None:
        return None
    hours, minutes, seconds = (int(found[part]) for part in (1, 2, 3))
    return hours * 3600.0 + minutes * 60.0 + float(f"{seconds}.{found[4] or 0}")


def looks_numeric(cell: str) -> bool:
    """Say whether a stripped cell could be a number in some convention, or stands for one."""
    return bool(NUMBER.match(cell)) or is_overrange(cell) or parse_clock(cell) is not None


def last_place(cell: str, convention: Convention) -> tuple[int, int] | None:
    """Tell how finely a number is printed.

    Returns
    -------
    tuple of int or None
        Decimal exponent of the last digit printed (-6 for ``0.000001`` and for ``1 us``), and the
        count of significant digits. None for text.
    """
    if clock := _CLOCK.match(cell.strip()):
        return -len(clock[4] or ""), 5 + len(clock[4] or "")
    found = NUMBER.match(cell.strip())
    if found is None or (digits := plain_digits(found["body"], convention)) is None:
        return None
    fraction = digits.partition(".")[2]
    significant = len(digits.replace(".", "").lstrip("0")) or 1
    place = _exponent(found["exponent"]) - len(fraction)
    scaled = _with_suffix(1.0, found["suffix"])
    if scaled is not None and scaled.value > 0.0:
        place += round(math.log10(scaled.value))
    return place, significant


def _exponent(text: str | None) -> int:
    return int(text.strip()[1:].replace("\N{MINUS SIGN}", "-")) if text else 0
