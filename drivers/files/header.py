"""What the rows above the numbers say: names and units of columns, and facts of the capture."""

from __future__ import annotations

import re
from dataclasses import dataclass, field

from drivers.contract import UnusableCapture, clean
from drivers.files.block import Block
from drivers.files.cells import is_date, parse_cell
from drivers.files.facts import Fact, collect
from drivers.files.layout import AMBIGUOUS, Layout
from drivers.files.units import Unit, parse_unit, unit_in_name
from drivers.files.vocabulary import (
    CODE_NAMES,
    FREQUENCY_NAMES,
    INDEX_NAMES,
    STATISTICS,
    TIME_NAMES,
    concept_of,
    squeeze,
)

NAME_ROWS = 6
"""Rows above the numbers among which names and units are looked for."""
_COMMENT = re.compile(r'^[\s"]*(?:#|%|//|!|\*|;|--)+\s*')
_BRACKETED = re.compile(r"[(\[]([^()\[\]]*)[)\]]")
_LOST_PREFIX = re.compile(r"^\S{1,3}[Vs]$")
_NAME_AND_UNIT = re.compile(r"[^\s()\[\]{}][^()\[\]{}]*[(\[{][^()\[\]{}]*[)\]}]")


@dataclass(frozen=True, slots=True)
class Column:
    """What is known of a column of numbers."""

    place: int
    """Index among the columns with numbers."""
    name: str = ""
    """Its name, as the file has it."""
    unit: Unit | None = None
    """Its unit, where stated."""
    unit_text: str = ""
    """The units row's own word where it is none known here."""

    @property
    def word(self) -> str:
        """The name without unit, blanks and case."""
        return squeeze(self.name)

    @property
    def is_time(self) -> bool:
        """True where name or unit says time."""
        return (self.unit is not None and self.unit.base == "s") or self.word in TIME_NAMES

    @property
    def is_index(self) -> bool:
        """True where name or unit says that rows are counted here."""
        if self.unit is not None and self.unit.base != "index":
            return False
        return self.unit is not None or self.word in INDEX_NAMES

    @property
    def is_code(self) -> bool:
        """True where name or unit says digitiser codes."""
        if self.unit is not None:
            return self.unit.base == "code"
        return self.word in CODE_NAMES

    @property
    def is_frequency(self) -> bool:
        """True where name or unit says frequency."""
        return (self.unit is not None and self.unit.base == "Hz") or self.word in FREQUENCY_NAMES

    @property
    def is_volts(self) -> bool:
        """True where the unit is stated to be volts."""
        return self.unit is not None and self.unit.base == "V"


@dataclass(frozen=True, slots=True)
class Header:
    """Names, units and facts."""

    columns: tuple[Column, ...]
    """One for each column of numbers."""
    facts: dict[str, list[Fact]] = field(default_factory=dict)
    """Values stated, by concept; several where the file has one for each channel."""

    def first(self, concept: str) -> Fact | None:
        """Give the first value stated for a concept."""
        return next(iter(self.facts.get(concept, ())), None)

    def fact(self, concept: str, channel: int = 1) -> Fact | None:
        """Give the number stated for a concept: the channel's own where there are several."""
        facts = [fact for fact in self.facts.get(concept, ()) if fact.number is not None]
        if not facts:
            return None
        return facts[channel - 1 if len(facts) >= channel else 0]

    def number(self, concept: str, channel: int = 1) -> float | None:
        """Give the same as a bare number."""
        fact = self.fact(concept, channel)
        return fact.number if fact else None


def read_header(block: Block, layout: Layout) -> Header:
    """Read what stands above and beside the numbers."""
    rows = [row for row in map(_uncommented, block.header) if any(row)]
    names, units = _name_rows(rows, layout)
    columns = tuple(
        _column(place, names.get(column, ""), units.get(column, ""), block.units[place])
        for place, column in enumerate(layout.columns)
    )
    facts: dict[str, list[Fact]] = {}
    following: list[list[str]] = [*rows[1:], []]
    for row, below in zip(rows, following, strict=False):
        collect(row, below, layout.convention, facts)
    for row in block.beside:
        collect(_uncommented(row), [], layout.convention, facts)
    return Header(columns, facts)


def _uncommented(row: list[str]) -> list[str]:
    """Take the mark of a comment off a row; a mark by itself names a column (`#` counts rows)."""
    first = _COMMENT.sub("", row[0]).strip().strip('"')
    return [first, *row[1:]] if first or len(row) == 1 else row


def _column(place: int, name: str, unit_text: str, written: Unit | None) -> Column:
    unit = parse_unit(unit_text) or unit_in_name(name) or parse_unit(name)
    if written is not None and written.base:
        unit = Unit(written.base)
    elif written is not None and unit is not None and unit.factor != 1.0:
        raise UnusableCapture(
            f"column {clean(name, 40)!r} states a scaled unit and its numbers carry prefixes too",
            "Save with plain numbers.",
        )
    return Column(place, name, unit, "" if unit else unit_text or _unknown_unit(name))


def _unknown_unit(name: str) -> str:
    """Find a bracket that must be a unit though it is none known: `Time (?s)`, its micro lost."""
    is_time = squeeze(name) in TIME_NAMES
    for content in _BRACKETED.findall(name):
        if is_time or _LOST_PREFIX.match(content):
            return str(content)
    return ""


def _name_rows(rows: list[list[str]], layout: Layout) -> tuple[dict[int, str], dict[int, str]]:
    """Find the names row and the units row: the last rows that have words over the columns."""
    above = [cells for row in rows[-NAME_ROWS:] if (cells := _aligned(row, layout))]
    if not above:
        _refuse_lost_units(rows)
        return {}, {}
    last = above[-1]
    _refuse_too_few(rows[-1], layout)
    if _is_units(last) or (len(above) > 1 and _has_units(last)):
        same_kind = len(above) > 1 and len(above[-2]) == len(last)
        return (above[-2] if same_kind else last), last
    return last, {}


def _refuse_lost_units(rows: list[list[str]]) -> None:
    """Refuse to take volts and seconds for granted where a line names units, but of what?"""
    line = " ".join(rows[-1]) if rows else ""
    is_fact = bool(rows) and any(concept_of(cell)[0] for cell in rows[-1])
    if not is_fact and any(parse_unit(content) for content in _BRACKETED.findall(line)):
        raise UnusableCapture(
            f"the line above the numbers, {clean(line, 60)!r}, has another count of names than "
            "there are columns",
            "Save with tabs, semicolons or commas between the columns.",
        )


def _refuse_too_few(row: list[str], layout: Layout) -> None:
    """Refuse commas that make more columns than there are names: some may be decimal marks."""
    if layout.delimiter == "," and 1 < len(row) < layout.width:
        raise UnusableCapture(
            f"there are {len(row)} names for {layout.width} columns: some commas may mark decimals",
            AMBIGUOUS,
        )


def _is_units(cells: dict[int, str]) -> bool:
    return all(parse_unit(cell) is not None for cell in cells.values())


def _has_units(cells: dict[int, str]) -> bool:
    """Say whether some cells are units and none is a name: `Time,Volts` are names."""
    words = {squeeze(cell) for cell in cells.values()}
    return any(map(parse_unit, cells.values())) and not words & (TIME_NAMES | INDEX_NAMES)


def _aligned(row: list[str], layout: Layout) -> dict[int, str]:
    """Put a header row's cells over the columns; empty where they are no names."""
    if layout.delimiter is None:
        row = _respaced(row, len(layout.columns))
    cells = {column: row[column] for column in layout.columns if column < len(row) and row[column]}
    if not cells or len(cells) < min(2, len(layout.columns)):
        return {}
    if any(is_date(cell) for cell in cells.values()):
        return {}
    numbers = [cell for cell in cells.values() if parse_cell(cell, layout.convention)]
    # Channels are called 1 and 2; a row of words and other numbers is a row of facts.
    if len(numbers) == len(cells) or not all(number.isdigit() for number in numbers):
        return {}
    concept = concept_of(row[0])[0]
    if concept and (numbers or concept not in ("interval", "y_unit") or len(row) < layout.width):
        return {}
    return {} if squeeze(row[0]) in STATISTICS else cells


def _respaced(row: list[str], wanted: int) -> list[str]:
    """Blanks part the names too: join them again by their units in brackets."""
    is_marked = not _COMMENT.sub("", row[0])
    if len(row) == wanted and (not is_marked or any(map(parse_unit, row[1:]))):
        return row
    row = row[1:] if is_marked else row
    if len(row) == wanted:
        return row
    line = " ".join(row)
    joined = _NAME_AND_UNIT.findall(line)
    return joined if len(joined) == wanted else [""]
