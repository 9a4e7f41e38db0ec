"""A book several benches share on a server, which no loss of the server can keep from being written."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from typing import Any, TypeVar

import sqlalchemy as sa

from trimmer.book import tables as t
from trimmer.book.book import Book
from trimmer.book.courier import Courier
from trimmer.book.engines import server_engine
from trimmer.book.entries import Learned, Merged, Notice, SheetEnd
from trimmer.book.faults import is_lost, turned_away
from trimmer.book.opening import open_store
from trimmer.book.outbox import Outbox
from trimmer.book.places import Place
from trimmer.book.store import Row, Store, by_id, unknown
from trimmer.errors import BookError

T = TypeVar("T")

_UNDER_WAY = Notice(
    "What was written here is still on its way to the server, and may be missing from what is shown.",
    "Look again in a moment.",
)
_SETTLE_S = 2.0
_CLOSE_S = 6.0
_PARENTS = {"sheet_id": t.sheet, "record_id": t.record}


class SharedBook(Book):
    """A book on a server.

    A row is first committed to a file on this machine, with a note that it waits; then the courier
    delivers it. Reads go to the server, once what was written here is there; while it is away they
    go to the local file, which knows what this bench has written itself and what it has learned.

    Parameters
    ----------
    local
        The file on this machine.
    server
        The server.
    lost
        Why the server could not be reached; None where it answered and its schema is up to date.
    """

    def __init__(self, local: Store, server: Store, lost: BookError | None) -> None:
        super().__init__(local)
        self._server = server
        self._outbox = Outbox(local, server)
        self._courier = Courier(self._outbox, lost)

    @property
    def location(self) -> str:
        """Where the book is, without its password."""
        return self._server.shown

    @property
    def waiting(self) -> int:
        """How many sheets and records the server does not have whole yet."""
        return self._outbox.waiting()

    def notices(self) -> list[Notice]:
        """Give what the book wants said since it was last asked: a lost server, a delivery."""
        return self._courier.notices()

    def settle(self, wait_s: float = _SETTLE_S) -> bool:
        """Wait until all is delivered; False where it is not yet."""
        return self._courier.settle(wait_s)

    def close(self) -> None:
        """Deliver what can be delivered within a few seconds, then close. Safe to call twice."""
        self._courier.close(_CLOSE_S)
        self._server.close()
        super().close()

    def finish_sheet(self, sheet: str, end: SheetEnd) -> None:
        """End a sheet, and give the courier a moment, so that a notice comes before the farewell."""
        super().finish_sheet(sheet, end)
        self.settle()

    def learned_of(
        self, kind: str | None = None, *, unit: str | None = None, limit: int = 200
    ) -> list[Learned]:
        """Give what sheets taught, and keep it here for when the server is away."""
        found = super().learned_of(kind, unit=unit, limit=limit)
        self._keep_learned(found)
        return found

    # -- writing and reading -------------------------------------------------------------------

    def _write(self, *rows: Row) -> None:
        self._fetch_parents(rows)
        self._store.add(rows, waits=True)
        self._courier.wake()

    def merge(self, batches: Iterable[Sequence[Row]]) -> Merged:
        """Add rows of another bench's book, all of them or none; they are delivered like one's own."""
        merged = self._store.merge(map(self._checked, batches), waits=True)
        self._courier.wake()
        return merged

    def _checked(self, batch: Sequence[Row]) -> Sequence[Row]:
        """Refuse rows that say something else than those the server has."""
        if not self._courier.away:
            with self._server.reading() as connection:
                unknown(connection, batch)
        return batch

    def _ask(self, question: Callable[[sa.Connection], T]) -> T:
        settled = self._courier.settle(_SETTLE_S)
        if not self._courier.away:
            if not settled:
                self._courier.say(_UNDER_WAY)
            try:
                with self._server.reading() as connection:
                    return question(connection)
            except BookError as error:
                if error.__cause__ is None or not is_lost(error.__cause__):
                    raise
                self._courier.wake()
        self._courier.say(
            Notice(
                f"The book {self.location} cannot be reached; shown is what this machine has kept.",
                "Look again once the server answers.",
            )
        )
        return super()._ask(question)

    # -- rows of other benches -----------------------------------------------------------------

    def _fetch_parents(self, rows: Sequence[Row]) -> None:
        """Copy the sheets and records that `rows` refer to and that only the server has."""
        new = {row.values["id"] for row in rows}
        for column, table in _PARENTS.items():
            wanted = {row.values.get(column) for row in rows} - new - {None}
            missing = wanted - self._known(table, wanted)
            if missing:
                self._copy(table, missing)

    def _known(self, table: sa.Table, ids: set[Any]) -> set[Any]:
        if not ids:
            return set()
        with self._store.reading() as connection:
            query = sa.select(table.c.id).where(table.c.id.in_(ids))
            return set(connection.scalars(query))

    def _copy(self, table: sa.Table, ids: set[Any]) -> None:
        with self._server.reading() as connection:
            rows = list(by_id(connection, table, ids).values())
        self._fetch_parents(rows)
        self._store.add(rows)

    def _keep_learned(self, found: list[Learned]) -> None:
        missing = {each.id for each in found} - self._known(t.learned, {each.id for each in found})
        if not missing:
            return
        sheets = {each.sheet for each in found if each.id in missing}
        with self._server.reading() as connection:
            ends = sa.select(t.sheet_end).where(t.sheet_end.c.sheet_id.in_(sheets))
            rows = [
                *by_id(connection, t.sheet, sheets).values(),
                *(Row(t.sheet_end, dict(row)) for row in connection.execute(ends).mappings()),
                *by_id(connection, t.learned, missing).values(),
            ]
        self._store.add(rows)


def open_shared(place: Place) -> SharedBook:
    """Open a book on a server, whether it answers now or not.

    Raises
    ------
    BookError
        The server answered, but refused the user, has no such database, or has a newer book; or the
        local file cannot be opened.
    """
    assert place.url is not None, "a server's place has an address"
    server = Store(server_engine(place.url), place.shown)
    local = open_store(place.path, str(place.path), writes=True)
    lost: BookError | None = None
    try:
        server.prepare()
    except BookError as error:
        cause = error.__cause__
        if cause is None or not is_lost(cause) or turned_away(cause):
            server.close()
            local.close()
            raise
        lost = error
    return SharedBook(local, server, lost)
