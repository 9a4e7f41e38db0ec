"""The bench book on one database: what is written is kept when the call returns."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from datetime import UTC, datetime
from typing import Any, Self, TypeVar

import sqlalchemy as sa

from trimmer.book import queries as q
from trimmer.book import rows as r
from trimmer.book import tables as t
from trimmer.book.entries import (
    Document,
    Learned,
    Merged,
    Notice,
    Record,
    RecordPoint,
    RecordStart,
    Reference,
    Resumed,
    Sheet,
    SheetEnd,
    SheetFilter,
    SheetRow,
    SheetStart,
    TurnEntry,
    UnitRow,
    What,
)
from trimmer.book.faults import legible
from trimmer.book.ids import Ids
from trimmer.book.store import Row, Store
from trimmer.errors import BookError

T = TypeVar("T")

_EVERY = SheetFilter()


class Book:
    """The memory of the shop: sheets and their turns, what they taught, warm-ups, surveys, notes.

    Rows are only ever added. Every write is one transaction, on the disk when the call returns; every
    method raises `BookError` and nothing else where the database fails. Safe from any thread.

    Parameters
    ----------
    store
        The database.
    """

    def __init__(self, store: Store) -> None:
        self._store = store
        self._ids = Ids()

    @property
    def location(self) -> str:
        """Where the book is, in words that are safe to show."""
        return self._store.shown

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()

    def close(self) -> None:
        """Close the book. Safe to call twice."""
        self._store.close()

    def notices(self) -> list[Notice]:
        """Give what the book wants said since it was last asked. A book in one file is silent."""
        return []

    @property
    def waiting(self) -> int:
        """How many sheets and records a server does not have yet. Always 0 for a book in one file."""
        return 0

    # -- writing -------------------------------------------------------------------------------

    def _write(self, *rows: Row) -> None:
        self._store.add(rows)

    def begin_sheet(self, start: SheetStart) -> str:
        """Begin a sheet and give its id."""
        new = self._ids.new()
        self._write(r.sheet_row(new, start))
        return new

    def add_turn(self, sheet: str, entry: TurnEntry, *, state: Document | None = None) -> None:
        """Add a reading and the turn that led to it, and with it the guide's state, both or neither."""
        rows = [r.turn_row(self._ids.new(), sheet, entry)]
        if state is not None:
            rows.append(self._state_row(sheet, state))
        self._write(*rows)

    def save_state(self, sheet: str, document: Document) -> None:
        """Keep the guide's state, for the session to be taken up again."""
        self._write(self._state_row(sheet, document))

    def _state_row(self, sheet: str, document: Document) -> Row:
        values = {
            "id": self._ids.new(),
            "sheet_id": sheet,
            "saved_at": datetime.now(UTC),
            "document": dict(document),
        }
        return Row(t.state, values)

    def finish_sheet(self, sheet: str, end: SheetEnd) -> None:
        """End a sheet. Ending it again is a new row; the last one counts."""
        self._write(r.end_row(self._ids.new(), sheet, end))

    def correct(
        self,
        sheet: str,
        *,
        unit: str | None = None,
        kind: str | None = None,
        notes: Mapping[str, str] | None = None,
        reason: str = "",
    ) -> None:
        """Correct a sheet's unit, kind or notes; what it said before stays in the book."""
        given = {"unit": unit, "kind": kind}
        given |= {f"note:{key}": value for key, value in (notes or {}).items()}
        now = datetime.now(UTC)
        rows = [
            Row(
                t.correction,
                {
                    "id": self._ids.new(),
                    "sheet_id": sheet,
                    "at": now,
                    "field": name,
                    "value": value.strip(),
                    "reason": reason,
                },
            )
            for name, value in given.items()
            if value is not None
        ]
        if rows:
            self._write(*rows)

    def add_learned(self, sheet: str, unit: str, kind: str, document: Document) -> None:
        """Keep what a sheet taught of its kind."""
        values = {
            "id": self._ids.new(),
            "sheet_id": sheet,
            "at": datetime.now(UTC),
            "unit": unit.strip(),
            "kind": kind.strip(),
            "document": dict(document),
        }
        self._write(Row(t.learned, values))

    def add_reference(self, reference: Reference) -> None:
        """Keep a clean source's reading under its name; the newest of a name counts."""
        self._write(r.reference_row(self._ids.new(), reference))

    def begin_record(self, start: RecordStart) -> str:
        """Begin a warm-up, survey, recheck or note and give its id."""
        new = self._ids.new()
        self._write(r.record_row(new, start))
        return new

    def add_point(self, record: str, taken_at: datetime, document: Document) -> None:
        """Add a point to a warm-up or survey."""
        values = {
            "id": self._ids.new(),
            "record_id": record,
            "taken_at": taken_at,
            "document": dict(document),
        }
        self._write(Row(t.record_point, values))

    def finish_record(self, record: str, verdict: str, document: Document) -> None:
        """End a warm-up, survey, recheck or note."""
        self._write(self._record_end(record, verdict, document))

    def add_record(self, start: RecordStart, verdict: str = "", document: Document = {}) -> str:  # noqa: B006
        """Begin and end a record that has no points, in one."""
        new = self._ids.new()
        self._write(r.record_row(new, start), self._record_end(new, verdict, document))
        return new

    def _record_end(self, record: str, verdict: str, document: Document) -> Row:
        values = {
            "id": self._ids.new(),
            "record_id": record,
            "ended_at": datetime.now(UTC),
            "verdict": verdict,
            "document": dict(document),
        }
        return Row(t.record_end, values)

    def merge(self, batches: Iterable[Sequence[Row]]) -> Merged:
        """Add rows of another bench's book, all of them or none."""
        return self._store.merge(batches)

    # -- reading -------------------------------------------------------------------------------

    def _ask(self, question: Callable[[sa.Connection], T]) -> T:
        """Put a question to the database; a question may be put again elsewhere."""
        with self._store.reading() as connection:
            return question(connection)

    def examine(self, question: Callable[[sa.Connection], T]) -> T:
        """Put a question of one's own to the database; it sees one moment of the book."""
        return self._ask(question)

    def _rows(self, query: sa.Select[Any]) -> list[sa.RowMapping]:
        return self._ask(lambda connection: list(connection.execute(query).mappings()))

    def _first(self, query: sa.Select[Any]) -> sa.RowMapping | None:
        rows = self._rows(query)
        return rows[0] if rows else None

    def sheets(
        self, which: SheetFilter = _EVERY, *, limit: int | None = None, offset: int = 0
    ) -> list[SheetRow]:
        """List sheets, newest first."""
        query = q.sheets(which, limit, offset)
        cards = self._ask(lambda connection: connection.execute(query).all())
        return [r.listed(card) for card in cards]

    def count(self, which: SheetFilter = _EVERY) -> int:
        """Count sheets."""
        return self._ask(lambda connection: connection.scalar(q.count(which)) or 0)

    def open_sheets(self, unit: str | None = None) -> list[SheetRow]:
        """List sheets that were never finished, newest first."""
        return self.sheets(SheetFilter(unit=unit, finished=False))

    def find(self, fragment: str) -> str:
        """Give the id of the one sheet whose id begins or ends with `fragment`.

        Raises
        ------
        BookError
            There is none, or more than one.
        """
        return self._ask(lambda connection: self._found(connection, fragment))

    def _found(self, connection: sa.Connection, fragment: str) -> str:
        sought = fragment.strip().lower()
        ids = list(connection.scalars(q.like_id(sought))) if sought else []
        if not ids:
            raise BookError(
                f"No sheet's id begins or ends with {fragment!r} in {self.location}.",
                "`trimmer log list` lists the sheets with their ids.",
            )
        if len(ids) > 1:
            some = ", ".join(ids[:4]) + (", ..." if len(ids) > 4 else "")
            raise BookError(
                f"{fragment!r} may be any of {some}.", "Give more of the id, from its end."
            )
        return str(ids[0])

    def sheet(self, fragment: str) -> Sheet:
        """Give a whole sheet by its id, or by the beginning or end of it that no other shares."""
        return self._ask(lambda connection: self._gathered(connection, fragment))

    def _gathered(self, connection: sa.Connection, fragment: str) -> Sheet:
        sheet = self._found(connection, fragment)

        def rows(query: sa.Select[Any]) -> Sequence[sa.RowMapping]:
            return connection.execute(query).mappings().all()

        card = connection.execute(sa.select(t.card).where(t.card.c.sheet_id == sheet)).one()
        start = rows(sa.select(t.sheet).where(t.sheet.c.id == sheet))[0]
        turns = rows(q.of_sheet(t.turn, sheet))
        ends = rows(q.latest_of_sheet(t.sheet_end, sheet))
        wrong = rows(q.of_sheet(t.correction, sheet))
        for seen in (*turns[-1:], *wrong[-1:], *ends):
            self._ids.after(seen["id"])
        with legible(f"Sheet {sheet} in {self.location}"):
            corrections = tuple(r.correction_from(each) for each in wrong)
            return Sheet(
                row=r.listed(card),
                start=r.corrected(r.start_from(start), corrections),
                turns=tuple(r.turn_from(each) for each in turns),
                end=r.end_from(ends[0]) if ends else None,
                corrections=corrections,
            )

    def resume(self, fragment: str) -> Resumed:
        """Take a sheet up again: all that was acknowledged, and the guide's last state."""
        sheet = self.sheet(fragment)
        state = self._first(q.latest_of_sheet(t.state, sheet.row.id))
        if state is not None:
            self._ids.after(state["id"])
        return Resumed(sheet, state["document"] if state is not None else None)

    def units(self) -> list[UnitRow]:
        """List the units that have a name, by name."""
        return [r.unit_from(row) for row in self._rows(q.units())]

    def kind_of(self, unit: str) -> str | None:
        """Give the kind of a unit by its latest sheet that names one."""
        row = self._first(q.kind_of(unit.strip()))
        return None if row is None else str(row["kind"])

    def learned_of(
        self, kind: str | None = None, *, unit: str | None = None, limit: int = 200
    ) -> list[Learned]:
        """Give what sheets of a kind (or of one unit) taught, newest first, one a sheet."""
        rows = self._rows(q.learned(kind, unit, limit))
        newest: dict[str, Learned] = {}
        for row in rows:
            newest.setdefault(row["sheet_id"], r.learned_from(row))
        return list(newest.values())

    def reference(self, name: str) -> Reference | None:
        """Give the newest reference of a name."""
        row = self._first(q.reference(name.strip()))
        with legible(f"Reference {name!r} in {self.location}"):
            return None if row is None else r.reference_from(row)

    def references(self) -> list[str]:
        """List the names of references."""
        return [str(row["name"]) for row in self._rows(q.reference_names())]

    def records(
        self,
        what: What,
        *,
        unit: str | None = None,
        kind: str | None = None,
        sheet: str | None = None,
        limit: int | None = None,
    ) -> list[Record]:
        """Give warm-ups, surveys, rechecks, notes or limits, newest first, with their points."""
        rows = self._rows(q.records(what, unit, kind, sheet, limit))
        return [self._record(row) for row in rows]

    def _record(self, row: sa.RowMapping) -> Record:
        points = self._rows(q.of_record(t.record_point, row["id"]))
        end = self._first(q.latest_end(row["id"]))
        return Record(
            id=row["id"],
            start=r.record_start_from(row),
            points=tuple(RecordPoint(each["taken_at"], each["document"]) for each in points),
            verdict=end["verdict"] if end else None,
            document=end["document"] if end else {},
            ended_at=end["ended_at"] if end else None,
        )
