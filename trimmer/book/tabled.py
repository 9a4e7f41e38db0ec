"""The figures of sheets as comma-separated values, one sheet a line, for a spreadsheet."""

from __future__ import annotations

import csv
from collections.abc import Iterator
from typing import Any, TextIO

from trimmer.book.entries import Sheet
from trimmer.events import reading_event

_ORDERS = range(2, 16)
_FORMULA = ("=", "+", "-", "@", "\t", "\r")

_SHEET = ("id", "unit", "kind", "taken_at", "verdict", "finished", "turns_made", "source")
_READING = (
    "fundamental_hz",
    "fundamental_sigma_hz",
    "amplitude_v",
    "amplitude_sigma_v",
    "offset_v",
    "offset_sigma_v",
    "thd",
    "thd_sigma",
    "thd_low",
    "thd_high",
    "thd_plus_noise",
    "rise_share",
    "rise_share_sigma",
    "orders",
)
_CRESTS = ("upper", "lower", "asymmetry", "upper_sigma", "lower_sigma", "asymmetry_sigma")
_PARTS = ("crest", "crest_sigma", "skew", "skew_sigma")
_END = ("floor_thd", "floor_sigma", "net_upper", "net_lower", "expected_thd_warm")


def columns() -> list[str]:
    """Give the names of the columns."""
    crests = [f"pointedness_{name}" for name in _CRESTS]
    parts = [f"{part}_{order}" for order in _ORDERS for part in _PARTS]
    return [*_SHEET, *_READING, *crests, *_END, *parts, "notes"]


def write_table(sheets: Iterator[Sheet], to: TextIO) -> int:
    """Write sheets as comma-separated values (RFC 4180) and count them.

    Text that a spreadsheet would take for a formula gets an apostrophe before it.
    """
    writer = csv.DictWriter(to, columns(), restval="", lineterminator="\r\n")
    writer.writeheader()
    number = 0
    for sheet in sheets:
        writer.writerow({name: _cell(value) for name, value in _line(sheet).items()})
        number += 1
    return number


def _cell(value: Any) -> Any:
    if isinstance(value, str):
        return "'" + value if value.startswith(_FORMULA) else value
    return "" if value is None else value


def _line(sheet: Sheet) -> dict[str, Any]:
    row = sheet.row
    line: dict[str, Any] = {
        "id": row.id,
        "unit": row.unit,
        "kind": row.kind,
        "taken_at": row.taken_at.isoformat(),
        "verdict": row.verdict,
        "finished": int(row.finished),
        "turns_made": row.turns,
        "source": sheet.start.source,
        "notes": "; ".join(f"{key}={value}" for key, value in sheet.start.notes.items()),
    }
    return line | _figures(sheet) | _ending(sheet)


def _figures(sheet: Sheet) -> dict[str, Any]:
    reading = sheet.end.reading if sheet.end else None
    if reading is None and sheet.turns:
        reading = sheet.turns[-1].reading
    if reading is None:
        return {}
    event = reading_event(None, sheet.row.taken_at, "", reading)
    parts = {
        f"{part}_{each['order']}": each[part]
        for each in event["harmonics"]
        if each["order"] in _ORDERS
        for part in _PARTS
    }
    crests = {f"pointedness_{name}": event["crests"][name] for name in _CRESTS}
    return {**{name: event[name] for name in _READING}, **crests, **parts}


def _ending(sheet: Sheet) -> dict[str, Any]:
    if sheet.end is None:
        return {}
    done = sheet.end.done
    return {
        "floor_thd": done.floor_thd,
        "floor_sigma": done.floor_sigma,
        "net_upper": done.net_turns.get("upper"),
        "net_lower": done.net_turns.get("lower"),
        "expected_thd_warm": done.expected_thd_warm,
    }
