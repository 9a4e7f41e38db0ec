"""A sheet, or its line in a list, as documents with the field names of the JSON lines."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from trimmer.book.entries import Correction, Sheet, SheetEnd, SheetRow, TurnEntry


def sheet_event(row: SheetRow) -> dict[str, Any]:
    """Give the line of a sheet in a list."""
    return {
        "event": "sheet",
        "id": row.id,
        "unit": row.unit,
        "kind": row.kind,
        "taken_at": row.taken_at.isoformat(),
        "fundamental_hz": row.fundamental_hz,
        "thd": row.thd,
        "thd_sigma": row.thd_sigma,
        "verdict": row.verdict,
        "finished": row.finished,
        "turns_made": row.turns,
    }


def sheet_document(sheet: Sheet, *, waveforms: bool = True) -> dict[str, Any]:
    """Give a whole sheet as one JSON-able document.

    Parameters
    ----------
    sheet
        The sheet.
    waveforms
        False leaves the samples out.
    """
    start = sheet.start
    return {
        **sheet_event(sheet.row),
        "source": start.source,
        "identity": start.identity,
        "dialect": start.dialect,
        "settings": dict(start.settings),
        "notes": dict(start.notes),
        "travel_turns": start.travel_turns,
        "orders": start.orders,
        "versions": dict(start.versions),
        "readings": [_reading(entry, waveforms) for entry in sheet.turns],
        "end": _end(sheet.end, sheet.row.id) if sheet.end else None,
        "corrections": [_correction(each) for each in sheet.corrections],
    }


def _reading(entry: TurnEntry, waveforms: bool) -> dict[str, Any]:
    from trimmer.events import advice_event, reading_event

    return reading_event(
        entry.turn,
        entry.taken_at,
        entry.source,
        entry.reading,
        advice=advice_event(entry.advice) if entry.advice else None,
        made_turns=entry.made_turns,
        word=entry.word,
        notes=list(entry.notes),
        waveform=_waveform(entry) if waveforms else None,
    )


def _waveform(entry: TurnEntry) -> dict[str, Any] | None:
    if entry.waveform is None:
        return None
    return {"interval_s": entry.interval_s, "samples": entry.waveform.tolist()}


def _end(end: SheetEnd, sheet: str) -> dict[str, Any]:
    from trimmer.events import done_event

    thd = end.reading.thd if end.reading else None
    event = done_event(end.done, thd.value if thd else None, thd.sigma if thd else None, sheet)
    return {**event, "ended_at": end.ended_at.isoformat()}


def _correction(correction: Correction) -> dict[str, Any]:
    return {**asdict(correction), "at": correction.at.isoformat()}
