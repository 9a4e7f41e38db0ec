"""What a file states about its capture: key and value, wherever they stand."""

from __future__ import annotations

import re
from dataclasses import dataclass

from drivers.files.cells import Convention, parse_cell
from drivers.files.units import Unit, parse_unit
from drivers.files.vocabulary import concept_of

_LABELLED = re.compile(r"^[A-Za-z][\w ]{0,15}:\s*(\S.*)$")
"""`CH1:0.5`: a value that says whose it is."""


@dataclass(frozen=True, slots=True)
class Fact:
    """A value that the file states about its capture."""

    text: str
    """The value as written."""
    number: float | None
    """The value as a number, its own unit applied."""
    unit: Unit | None
    """The unit found with it: behind the number, in the cell after it, or in the key."""


def collect(
    row: list[str], below: list[str], convention: Convention, facts: dict[str, list[Fact]]
) -> None:
    """Take the facts of a header row: key and value, `key: value`, or a value under its key."""
    cells = _parted(row)
    place = 0
    while place < len(cells):
        concept, unit = concept_of(cells[place])
        if concept is None:
            place += 1
            continue
        values = []
        place += 1
        while place < len(cells) and concept_of(cells[place])[0] is None:
            values.append(cells[place])
            place += 1
        found = _facts(values, unit, convention)
        facts.setdefault(concept, []).extend(found)
    for key, under in zip(row, below, strict=False):
        concept, unit = concept_of(key)
        if concept and under and parse_cell(under, convention):
            facts.setdefault(concept, []).extend(_facts([under], unit, convention))


def _parted(row: list[str]) -> list[str]:
    """Part `key: value` and `key = value` into two cells."""
    cells: list[str] = []
    for cell in row:
        parts = re.split(r"\s*[:=]\s*", cell, maxsplit=1)
        cells.extend(parts if len(parts) == 2 and concept_of(parts[0])[0] else [cell])
    return [cell.strip('" ') for cell in cells if cell.strip('" ')]


def _facts(values: list[str], unit: Unit | None, convention: Convention) -> list[Fact]:
    """Read the values behind a key; a unit may follow in a cell of its own."""
    found: list[Fact] = []
    for value in values:
        if (labelled := _LABELLED.match(value)) is not None:
            value = labelled[1]
        number = _number(value, convention)
        if number is None and found and (own := parse_unit(value)) and found[-1].unit is unit:
            last = found.pop()
            scaled = None if last.number is None else last.number / _size(unit) * own.factor
            found.append(Fact(last.text, scaled, own))
            continue
        if number is None:
            found.append(Fact(value, None, parse_unit(value)))
        elif number[1] is not None and number[1].base:
            found.append(Fact(value, number[0], number[1]))
        else:
            found.append(Fact(value, number[0] * _size(unit), unit))
    return found


def _size(unit: Unit | None) -> float:
    return unit.factor if unit else 1.0


def _number(text: str, convention: Convention) -> tuple[float, Unit | None] | None:
    """Read a number in the file's convention, else with a point: headers mix them."""
    for attempt in (convention, Convention()):
        if (number := parse_cell(text, attempt)) and number.value == number.value:
            return number.value, number.unit
    return None
