"""Rows on their way to a server: kept in a local file first, delivered in order, once.

Every row has an id that no other bench gives, and delivery leaves a row that is there already alone.
So a delivery that broke off at any moment, even between the server's commit and the word of it, is
simply made again.
"""

from __future__ import annotations

from collections.abc import Sequence

import sqlalchemy as sa
import sqlalchemy.exc as sa_exc

from trimmer.book import tables as t
from trimmer.book.faults import book_error, is_lost
from trimmer.book.store import Row, Store, by_id, insert

_AT_ONCE = 64


class ServerLost(Exception):
    """The server cannot be reached now."""


class Outbox:
    """What a server does not have yet.

    Parameters
    ----------
    local
        The file that keeps it.
    server
        Where it is to go.
    """

    def __init__(self, local: Store, server: Store) -> None:
        self.local = local
        self.server = server
        self.refused: dict[str, str] = {}
        """Sheets and records that the server will not take, each with what it said."""

    def waiting(self) -> int:
        """Count the sheets and records that are not delivered whole."""
        owners = sa.select(sa.func.count(sa.distinct(t.waiting.c.owner_id)))
        with self.local.reading() as connection:
            return connection.scalar(owners) or 0

    def deliver(self) -> int:
        """Deliver all that can be delivered.

        Returns
        -------
        int
            Sheets and records touched.

        Raises
        ------
        ServerLost
            The server went away; what was not delivered still waits.
        BookError
            The local file failed.
        """
        owners: set[str] = set()
        while tickets := self._next():
            if not self._hand_over(tickets):
                for owner in {ticket["owner_id"] for ticket in tickets}:
                    self._hand_over_one(owner, tickets)
            owners |= {ticket["owner_id"] for ticket in tickets}
        return len(owners - set(self.refused))

    def _next(self) -> Sequence[sa.RowMapping]:
        query = sa.select(t.waiting).order_by(t.waiting.c.number).limit(_AT_ONCE)
        if self.refused:
            query = query.where(t.waiting.c.owner_id.not_in(list(self.refused)))
        with self.local.reading() as connection:
            return connection.execute(query).mappings().all()

    def _hand_over_one(self, owner: str, tickets: Sequence[sa.RowMapping]) -> None:
        """Deliver one sheet's rows alone, so that one the server refuses does not hold up the rest."""
        self._hand_over([each for each in tickets if each["owner_id"] == owner], owner)

    def _hand_over(self, tickets: Sequence[sa.RowMapping], alone: str | None = None) -> bool:
        try:
            with self.server.writing() as connection:
                insert(connection, self._rows(tickets))
        except (sa_exc.SQLAlchemyError, OSError) as error:
            if is_lost(error):
                raise ServerLost(str(book_error(error, self.server.shown))) from error
            if alone is not None:
                self.refused[alone] = str(book_error(error, self.server.shown))
            return False
        self._forget(tickets)
        return True

    def _rows(self, tickets: Sequence[sa.RowMapping]) -> list[Row]:
        found: dict[str, Row] = {}
        with self.local.reading() as connection:
            for table in t.RECORDS:
                ids = [each["row_id"] for each in tickets if each["table_name"] == table.name]
                if ids:
                    found |= by_id(connection, table, ids)
        return [found[each["row_id"]] for each in tickets if each["row_id"] in found]

    def _forget(self, tickets: Sequence[sa.RowMapping]) -> None:
        numbers = [each["number"] for each in tickets]
        with self.local.writing() as connection:
            connection.execute(t.waiting.delete().where(t.waiting.c.number.in_(numbers)))
