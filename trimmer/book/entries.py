"""What goes into the book and comes out of it, as values; no database in sight."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from trimmer.guidance.advice import Advice, Done, Trim
    from trimmer.measurement.reading import Reading

Document = Mapping[str, Any]
"""A JSON-able mapping: text keys; text, numbers, booleans, None, lists and mappings as values."""

What = Literal["warmup", "survey", "recheck", "note", "limits"]
"""What a record besides a sheet is about."""


@dataclass(frozen=True, slots=True)
class SheetStart:
    """What is known when a sheet is begun."""

    taken_at: datetime
    """When it was begun, with time zone."""
    unit: str = ""
    """Unit's name; empty where none was given."""
    kind: str = ""
    """The shop's name for the kind of unit; empty where none was given."""
    source: str = ""
    """SOURCE word."""
    identity: str = ""
    """Who answered, cleaned."""
    dialect: str | None = None
    """Waveform dialect, where there is one."""
    settings: Mapping[str, str] = field(default_factory=dict)
    """The source's settings: range, rate, coupling and the like."""
    notes: Mapping[str, str] = field(default_factory=dict)
    """KEY=VALUE notes: ambient, supply, load, level, wiper readings, minutes since switch-on."""
    travel_turns: float | None = None
    """Whole mechanical travel of the trims, turns of the screw."""
    orders: int | None = None
    """Highest harmonic order asked for; None for the default."""
    versions: Mapping[str, str] = field(default_factory=dict)
    """Versions of the program and of what it computes with."""


@dataclass(frozen=True, slots=True, eq=False)
class TurnEntry:
    """A still reading, and the turn that led to it."""

    turn: int
    """Turns made before the reading; 0 is the setting as found."""
    taken_at: datetime
    """When the capture was taken, with time zone."""
    reading: Reading
    """The reading."""
    source: str = ""
    """Cleaned name of what was read (a file's name where each capture is a file)."""
    advice: Advice | None = None
    """The advice that preceded it; None for the first reading."""
    made_turns: float | None = None
    """Turn of the advised trim estimated as really made, in the sense advised; None if unknown."""
    word: str = ""
    """What the person said of the turn: ``moved``, ``back``, ``at-stop``, ``skip``; empty for none."""
    waveform: NDArray[np.float64] | None = None
    """Shape (n,), samples of the capture; None where they are not kept."""
    interval_s: float | None = None
    """Seconds between the samples of `waveform`."""
    notes: tuple[str, ...] = ()
    """The source's remarks on the capture."""


@dataclass(frozen=True, slots=True, eq=False)
class SheetEnd:
    """How a sheet ended."""

    ended_at: datetime
    """When, with time zone."""
    done: Done
    """Verdict, floor, net turns, remainder."""
    reading: Reading | None = None
    """The final reading; None where there never was one."""


@dataclass(frozen=True, slots=True)
class SheetRow:
    """One line of the list of sheets."""

    id: str
    """Sheet's id: sorts by time, differs between any two benches."""
    unit: str
    """Unit's name, as last corrected."""
    kind: str
    """Its kind, as last corrected."""
    taken_at: datetime
    """When the sheet was begun (UTC)."""
    fundamental_hz: float | None
    """Fundamental of the last reading, Hz."""
    thd: float | None
    """THD of the last reading, ratio."""
    thd_sigma: float | None
    """Its standard uncertainty."""
    verdict: str
    """How it ended; ``stopped`` where it was never finished."""
    finished: bool
    """False where the session broke off (interrupted, killed) or still runs."""
    turns: int
    """Turns made."""

    @property
    def short(self) -> str:
        """The id's last eight characters: random, so they tell sheets of the same day apart."""
        return self.id[-8:]


@dataclass(frozen=True, slots=True)
class SheetFilter:
    """Which sheets to list; what is None does not count."""

    unit: str | None = None
    """Only this unit's."""
    kind: str | None = None
    """Only this kind's."""
    since: datetime | None = None
    """Begun at or after this instant."""
    until: datetime | None = None
    """Begun before this instant."""
    limit_thd: float | None = None
    """Only sheets whose last THD is above this limit, ratio."""
    within_thd: float | None = None
    """Only sheets whose last THD is at most this, ratio."""
    verdict: str | None = None
    """Only this verdict; ``stopped`` takes the unfinished ones in."""
    finished: bool | None = None
    """Only finished sheets, or only unfinished ones."""


@dataclass(frozen=True, slots=True)
class Correction:
    """A later word on a sheet; the sheet itself is never changed."""

    at: datetime
    """When (UTC)."""
    field: str
    """``unit``, ``kind``, or ``note:KEY``."""
    value: str
    """What it should say."""
    reason: str
    """Why, in the person's words."""


@dataclass(frozen=True, slots=True, eq=False)
class Sheet:
    """A whole sheet, corrections applied."""

    row: SheetRow
    """Its line in the list."""
    start: SheetStart
    """How it began, with unit, kind and notes as last corrected."""
    turns: tuple[TurnEntry, ...]
    """Its readings in the order they were taken."""
    end: SheetEnd | None
    """How it ended; None where it did not."""
    corrections: tuple[Correction, ...] = ()
    """All corrections, oldest first."""

    @property
    def net_turns(self) -> dict[Trim, float]:
        """Turns of each trim from start to end; empty where the sheet did not end."""
        return dict(self.end.done.net_turns) if self.end else {}


@dataclass(frozen=True, slots=True, eq=False)
class Resumed:
    """A sheet taken up again."""

    sheet: Sheet
    """All that was acknowledged."""
    state: dict[str, Any] | None
    """The guide's state as last saved; None where none was."""


@dataclass(frozen=True, slots=True)
class UnitRow:
    """One unit the book knows."""

    unit: str
    """Its name."""
    kind: str
    """Its kind by the latest sheet that names one; empty where none does."""
    sheets: int
    """How many sheets it has."""
    last_id: str
    """Its latest sheet."""
    last_taken_at: datetime
    """When that was begun (UTC)."""
    thd: float | None
    """THD of the latest sheet, ratio."""
    thd_sigma: float | None
    """Its standard uncertainty."""
    verdict: str
    """Verdict of the latest sheet."""


@dataclass(frozen=True, slots=True)
class Learned:
    """What one finished sheet taught of a kind's trims."""

    id: str
    """Row's id."""
    sheet: str
    """The sheet it comes from."""
    unit: str
    """The unit."""
    kind: str
    """The kind."""
    at: datetime
    """When it was stored (UTC)."""
    document: Document
    """Columns and belief, as the guide wrote them."""


@dataclass(frozen=True, slots=True, eq=False)
class Reference:
    """A clean source's reading under a name: what the measuring chain itself adds."""

    name: str
    """Its name."""
    taken_at: datetime
    """When it was measured."""
    source: str
    """What was read."""
    reading: Reading
    """The reading."""
    document: Document = field(default_factory=dict)
    """Whatever else belongs to it."""


@dataclass(frozen=True, slots=True)
class RecordStart:
    """What is known when a warm-up, survey, recheck or note is begun."""

    what: What
    """What it is about."""
    taken_at: datetime
    """When it was begun, with time zone."""
    unit: str = ""
    """Unit's name."""
    kind: str = ""
    """Unit's kind."""
    source: str = ""
    """SOURCE word."""
    sheet: str | None = None
    """The sheet it refers to, where it does."""
    document: Document = field(default_factory=dict)
    """Whatever is known at the start."""


@dataclass(frozen=True, slots=True)
class RecordPoint:
    """One point of a warm-up or a survey."""

    taken_at: datetime
    """When (UTC)."""
    document: Document
    """Its figures."""


@dataclass(frozen=True, slots=True)
class Record:
    """A warm-up, survey, recheck or note as the book has it."""

    id: str
    """Its id."""
    start: RecordStart
    """How it began."""
    points: tuple[RecordPoint, ...]
    """Its points in the order they were taken; empty in a list."""
    verdict: str | None
    """How it ended; None where it did not."""
    document: Document
    """Its result; empty where it did not end."""
    ended_at: datetime | None
    """When it ended; None where it did not."""


@dataclass(frozen=True, slots=True)
class Notice:
    """Something the book wants said to the person."""

    message: str
    """What is the matter."""
    remedy: str
    """What to do, or that nothing needs to be done."""


@dataclass(frozen=True, slots=True)
class Merged:
    """What an import brought."""

    sheets: int
    """Sheets in the file."""
    rows: int
    """Rows in the file."""
    new: int
    """Rows that the book did not have."""
