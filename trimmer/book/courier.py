"""A thread that delivers an outbox, so that no session ever waits for a server."""

from __future__ import annotations

import threading
from typing import Literal

from trimmer.book.entries import Notice
from trimmer.book.outbox import Outbox
from trimmer.errors import BookError

_FIRST_PAUSE_S = 0.5
_LONGEST_PAUSE_S = 15.0

State = Literal["working", "idle", "lost"]


class Courier:
    """Delivers when woken, and again after pauses while the server is away.

    Parameters
    ----------
    outbox
        What is to be delivered.
    lost
        Why the server could not be reached when the book was opened; None where it answered and its
        schema is up to date.
    """

    def __init__(self, outbox: Outbox, lost: BookError | None) -> None:
        self._outbox = outbox
        self._prepared = lost is None
        self._change = threading.Condition()
        self._state: State = "working"
        self._wanted = True
        self._closing = False
        self._away = False
        self._notices: list[Notice] = []
        self._refusals = 0
        if lost is not None:
            self._gone(lost)
        self._thread = threading.Thread(target=self._run, name="book-courier", daemon=True)
        self._thread.start()

    def wake(self) -> None:
        """Say that there is something to deliver."""
        with self._change:
            self._wanted = True
            if self._state == "idle":
                self._state = "working"
            self._change.notify_all()

    def settle(self, wait_s: float) -> bool:
        """Wait until all is delivered, the server is away, or the time is over.

        Returns
        -------
        bool
            True where all that was written before has been delivered or refused.
        """
        with self._change:
            self._change.wait_for(lambda: self._state != "working", wait_s)
            return self._state == "idle"

    @property
    def away(self) -> bool:
        """Whether the server could not be reached when it was last tried."""
        with self._change:
            return self._away

    def say(self, notice: Notice) -> None:
        """Have a notice given to the person."""
        with self._change:
            self._notices.append(notice)

    def notices(self) -> list[Notice]:
        """Give the notices since last asked."""
        with self._change:
            given, self._notices = self._notices, []
        return given

    def close(self, wait_s: float) -> None:
        """Deliver what can be delivered in the time given, then stop. Safe to call twice."""
        self.settle(wait_s)
        with self._change:
            self._closing = True
            self._change.notify_all()
        self._thread.join(wait_s)

    # -- the thread ----------------------------------------------------------------------------

    def _run(self) -> None:
        pause = _FIRST_PAUSE_S
        while self._called(pause if self._state == "lost" else None):
            try:
                delivered = self._deliver()
            except Exception as error:  # noqa: BLE001 (said to the person; the rows wait on)
                self._gone(error)
                pause = min(2 * pause, _LONGEST_PAUSE_S)
            else:
                self._done(delivered)
                pause = _FIRST_PAUSE_S

    def _called(self, pause: float | None) -> bool:
        """Wait to be woken (or for the pause to pass while the server is away); False at the end."""
        with self._change:
            if pause is None:
                self._change.wait_for(lambda: self._wanted or self._closing)
            else:
                self._change.wait_for(lambda: self._closing, pause)
            self._wanted = False
            return not self._closing

    def _deliver(self) -> int:
        if not self._prepared:
            self._outbox.server.prepare()
            self._prepared = True
        return self._outbox.deliver()

    def _gone(self, error: Exception) -> None:
        shown = self._outbox.server.shown
        with self._change:
            if not self._away:
                self._notices.append(
                    Notice(
                        f"{error} What is measured is kept on this machine meanwhile.",
                        f"Go on; it is delivered by itself once {shown} answers.",
                    )
                )
            self._away, self._state = True, "lost"
            self._change.notify_all()

    def _done(self, delivered: int) -> None:
        shown = self._outbox.server.shown
        with self._change:
            if self._away:
                self._notices.append(
                    Notice(
                        f"The book {shown} answers again; {delivered} kept entries were delivered.",
                        "Nothing needs to be done.",
                    )
                )
            for said in list(self._outbox.refused.values())[self._refusals :]:
                self._notices.append(
                    Notice(
                        f"{said} The sheet is kept on this machine.",
                        "Have whoever looks after the server see to it; the next start tries again.",
                    )
                )
            self._refusals = len(self._outbox.refused)
            self._away = False
            self._state = "working" if self._wanted else "idle"
            self._change.notify_all()
