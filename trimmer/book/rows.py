"""Values into rows, and rows into values; what measures and guides is loaded when it is needed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from trimmer.book import tables as t
from trimmer.book.columns import plain
from trimmer.book.entries import (
    Correction,
    Learned,
    RecordStart,
    Reference,
    SheetEnd,
    SheetRow,
    SheetStart,
    TurnEntry,
    UnitRow,
)
from trimmer.book.readings import (
    advice_document,
    advice_from,
    causes_document,
    causes_from,
    finite,
    from_document,
    reading_document,
)
from trimmer.book.store import Row

if TYPE_CHECKING:
    from trimmer.guidance.advice import Trim
    from trimmer.measurement.reading import Reading

Values = Mapping[Any, Any]


def _words(given: Mapping[str, str]) -> dict[str, str]:
    return {plain(str(key)): plain(str(value)) for key, value in given.items()}


def sheet_row(new: str, start: SheetStart) -> Row:
    """Give the row that begins a sheet."""
    values = {
        "id": new,
        "taken_at": start.taken_at,
        "unit": start.unit.strip(),
        "kind": start.kind.strip(),
        "source": start.source,
        "identity": start.identity,
        "dialect": start.dialect,
        "settings": _words(start.settings),
        "notes": _words(start.notes),
        "travel_turns": finite(start.travel_turns),
        "orders": start.orders,
        "versions": _words(start.versions),
    }
    return Row(t.sheet, values)


def start_from(values: Values) -> SheetStart:
    """Give back what a sheet began with."""
    return SheetStart(**{key: value for key, value in values.items() if key != "id"})


def turn_row(new: str, sheet: str, entry: TurnEntry) -> Row:
    """Give the row of a turn and its reading."""
    from trimmer.book.waveforms import pack

    advice, wave = entry.advice, entry.waveform
    values = {
        "id": new,
        "sheet_id": sheet,
        "number": entry.turn,
        "taken_at": entry.taken_at,
        "source": entry.source,
        "word": entry.word,
        "trim": advice.trim if advice else None,
        "sense": advice.sense if advice else None,
        "asked_turns": finite(advice.turns) if advice else None,
        "made_turns": finite(entry.made_turns),
        "advice": advice_document(advice) if advice else None,
        **_figures(entry.reading),
        "reading": reading_document(entry.reading),
        "waveform": pack(wave) if wave is not None else None,
        "interval_s": finite(entry.interval_s),
        "notes": [plain(note) for note in entry.notes],
    }
    return Row(t.turn, values)


def _figures(reading: Reading | None) -> dict[str, float | None]:
    if reading is None:
        return {"fundamental_hz": None, "thd": None, "thd_sigma": None}
    return {
        "fundamental_hz": finite(reading.fundamental_hz),
        "thd": finite(reading.thd.value),
        "thd_sigma": finite(reading.thd.sigma),
    }


def turn_from(values: Values) -> TurnEntry:
    """Give back a turn and its reading."""
    from trimmer.book.waveforms import unpack_samples

    packed = values["waveform"]
    return TurnEntry(
        turn=values["number"],
        taken_at=values["taken_at"],
        reading=from_document(values["reading"]),
        source=values["source"],
        advice=advice_from(values["advice"]) if values["advice"] is not None else None,
        made_turns=values["made_turns"],
        word=values["word"],
        waveform=unpack_samples(bytes(packed)) if packed is not None else None,
        interval_s=values["interval_s"],
        notes=tuple(values["notes"]),
    )


def end_row(new: str, sheet: str, end: SheetEnd) -> Row:
    """Give the row that ends a sheet."""
    done = end.done
    values = {
        "id": new,
        "sheet_id": sheet,
        "ended_at": end.ended_at,
        "verdict": done.verdict,
        "turns": done.turn,
        **_figures(end.reading),
        "floor_thd": finite(done.floor_thd),
        "floor_sigma": finite(done.floor_sigma),
        "net_upper": finite(done.net_turns.get("upper")),
        "net_lower": finite(done.net_turns.get("lower")),
        "expected_thd_warm": finite(done.expected_thd_warm),
        "remainder": causes_document(done.remainder),
        "reason": done.reason,
        "reading": reading_document(end.reading) if end.reading is not None else None,
    }
    return Row(t.sheet_end, values)


def end_from(values: Values) -> SheetEnd:
    """Give back how a sheet ended."""
    from trimmer.guidance.advice import Done

    trims: tuple[Trim, ...] = ("upper", "lower")
    net = {trim: values[f"net_{trim}"] for trim in trims}
    done = Done(
        turn=values["turns"],
        verdict=values["verdict"],
        floor_thd=values["floor_thd"],
        floor_sigma=values["floor_sigma"],
        net_turns={trim: turns for trim, turns in net.items() if turns is not None},
        remainder=causes_from(values["remainder"]),
        reason=values["reason"],
        expected_thd_warm=values["expected_thd_warm"],
    )
    given = values["reading"]
    reading = from_document(given) if given is not None else None
    return SheetEnd(values["ended_at"], done, reading)


def listed(card: Sequence[Any]) -> SheetRow:
    """Give the line of a sheet from its card, whose columns are the line's fields in their order."""
    # By position, since a list may have a hundred thousand of them: by name takes twice as long.
    identity, unit, kind, at, fundamental, thd, sigma, verdict, finished, turns = card
    return SheetRow(
        identity, unit, kind, at, fundamental, thd, sigma, verdict, finished != 0, turns
    )


def correction_from(values: Values) -> Correction:
    """Give back a correction."""
    return Correction(values["at"], values["field"], values["value"], values["reason"])


def corrected(start: SheetStart, corrections: Sequence[Correction]) -> SheetStart:
    """Apply corrections, oldest first, to what a sheet began with."""
    unit, kind, notes = start.unit, start.kind, dict(start.notes)
    for each in corrections:
        if each.field == "unit":
            unit = each.value
        elif each.field == "kind":
            kind = each.value
        elif each.field.startswith("note:"):
            notes[each.field.removeprefix("note:")] = each.value
    return replace(start, unit=unit, kind=kind, notes=notes)


def learned_from(values: Values) -> Learned:
    """Give back what a sheet taught."""
    return Learned(
        values["id"],
        values["sheet_id"],
        values["unit"],
        values["kind"],
        values["at"],
        values["document"],
    )


def reference_row(new: str, given: Reference) -> Row:
    """Give the row of a reference."""
    values = {
        "id": new,
        "name": given.name.strip(),
        "taken_at": given.taken_at,
        "source": given.source,
        "reading": reading_document(given.reading),
        "document": dict(given.document),
    }
    return Row(t.reference, values)


def reference_from(values: Values) -> Reference:
    """Give back a reference."""
    return Reference(
        values["name"],
        values["taken_at"],
        values["source"],
        from_document(values["reading"]),
        values["document"],
    )


def record_row(new: str, start: RecordStart) -> Row:
    """Give the row that begins a record."""
    values = {
        "id": new,
        "what": start.what,
        "sheet_id": start.sheet,
        "taken_at": start.taken_at,
        "unit": start.unit.strip(),
        "kind": start.kind.strip(),
        "source": start.source,
        "document": dict(start.document),
    }
    return Row(t.record, values)


def record_start_from(values: Values) -> RecordStart:
    """Give back what a record began with."""
    return RecordStart(
        values["what"],
        values["taken_at"],
        values["unit"],
        values["kind"],
        values["source"],
        values["sheet_id"],
        values["document"],
    )


def unit_from(values: Values) -> UnitRow:
    """Give the line of a unit."""
    return UnitRow(
        values["unit"],
        values["kind"] or "",
        values["sheets"],
        values["sheet_id"],
        values["taken_at"],
        values["thd"],
        values["thd_sigma"],
        values["verdict"],
    )
