"""What was found out about each instrument, kept under its whole identification.

A change of firmware changes the identification, so what was found is found again.
"""

from __future__ import annotations

import contextlib
import json
import os
import tempfile
from dataclasses import asdict, dataclass, fields, replace
from pathlib import Path
from typing import Any

_FILE = "instruments.json"


@dataclass(frozen=True, slots=True)
class Known:
    """What is known of one instrument."""

    dialect: str
    """Name of its dialect."""
    encoding: int | None = None
    """Index of the way its samples are sent; None while not tried."""
    acquire: int | None = None
    """Index of the way it is armed and waited for."""
    preamble: int | None = None
    """Index of the way its preamble is asked for."""
    signed: bool | None = None
    """Sign of the codes where it was settled against text."""
    big_endian: bool | None = None
    """Byte order where it was settled against text."""
    data: int | None = None
    """Index of the query for its samples."""
    windows: bool | None = None
    """False where it knows no windows on its record."""
    asks_errors: bool = True
    """False where it keeps no errors."""
    unanswered: tuple[str, ...] = ()
    """Optional fields it does not know."""
    settled: str = ""
    """How the form was settled, in words."""

    def changed(self, **parts: Any) -> Known:
        """Give a copy with some parts changed."""
        return replace(self, **parts)


def recall(settings_dir: Path | None, identity: str) -> Known | None:
    """Give what is known of an instrument, None where that is nothing.

    A file that cannot be read counts as empty: everything in it can be found again.
    """
    entry = _load(settings_dir).get(identity)
    if not isinstance(entry, dict):
        return None
    names = {part.name for part in fields(Known)}
    kept = {name: value for name, value in entry.items() if name in names}
    if not _sound(kept):
        return None
    kept["unanswered"] = tuple(kept.get("unanswered", ()))
    return Known(**kept)


def remember(settings_dir: Path | None, identity: str, known: Known | None) -> None:
    """Keep what is known of an instrument; None forgets it.

    Written beside the file and moved into place, so that a crash leaves the old or the new one.
    A folder that cannot be written only means asking again next time.
    """
    if settings_dir is None:
        return
    entries = _load(settings_dir)
    if known is None:
        if entries.pop(identity, None) is None:
            return
    else:
        entries[identity] = {**asdict(known), "unanswered": list(known.unanswered)}
    with contextlib.suppress(OSError):
        settings_dir.mkdir(parents=True, exist_ok=True)
        handle, beside = tempfile.mkstemp(dir=settings_dir, prefix=".instruments", suffix=".tmp")
        try:
            with os.fdopen(handle, "w", encoding="utf-8") as file:
                json.dump(entries, file, indent=1, sort_keys=True, ensure_ascii=False)
                file.flush()
                os.fsync(file.fileno())
            os.replace(beside, settings_dir / _FILE)
        except OSError:
            os.unlink(beside)
            raise


def _load(settings_dir: Path | None) -> dict[str, Any]:
    if settings_dir is None:
        return {}
    try:
        entries = json.loads((settings_dir / _FILE).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {}
    return entries if isinstance(entries, dict) else {}


def _sound(entry: dict[str, Any]) -> bool:
    def whole(value: object) -> bool:
        return value is None or (isinstance(value, int) and not isinstance(value, bool))

    def truth(value: object) -> bool:
        return value is None or isinstance(value, bool)

    unanswered = entry.get("unanswered", [])
    return (
        isinstance(entry.get("dialect"), str)
        and all(whole(entry.get(name)) for name in ("encoding", "acquire", "preamble", "data"))
        and all(truth(entry.get(name)) for name in ("signed", "big_endian", "windows"))
        and isinstance(entry.get("asks_errors", True), bool)
        and isinstance(entry.get("settled", ""), str)
        and isinstance(unanswered, list)
        and all(isinstance(name, str) for name in unanswered)
    )
