"""A watch over the sockets of a session: no call outlives its deadline, no dead peer is asked.

The library below waits in loops of its own. Some of them have no end (a header that arrives a
byte at a time keeps a read alive for ever; a message out of step is thrown away from a closed
socket for ever), and one asks a closed socket at full speed until its time-out. A read cannot be
bounded from inside such a loop, so it is bounded from outside: a thread of its own sleeps in the
operating system's `poll` until the peer hangs up or a deadline passes, and then shuts the
sockets, which ends every such loop with an error. It never reads or writes.
"""

from __future__ import annotations

import contextlib
import select
import socket
import threading
import time
from collections.abc import Iterator, Sequence

_LOOK_S = 0.2
"""Seconds between looks at the deadline; a hang-up is noticed at once."""

_LEFTOVERS_S = 0.1
"""Seconds a reader may still take what a peer sent before it hung up."""

_HANG_UP = getattr(select, "POLLRDHUP", 0)


def sockets_of(interface: object) -> list[socket.socket]:
    """Find the sockets a session of the library works on."""
    if isinstance(interface, socket.socket):
        return [interface]
    held = getattr(interface, "__dict__", {})
    return [value for value in held.values() if isinstance(value, socket.socket)]


class Guard:
    """Shuts a session's sockets when a call is overdue or the peer has gone.

    Parameters
    ----------
    sockets
        The session's. With none (a serial line, USB), the guard only keeps the state.
    """

    def __init__(self, sockets: Sequence[socket.socket]) -> None:
        self._sockets = tuple(sockets)
        self._due: float | None = None
        self._done = threading.Event()
        self.gone = False
        """The peer hung up."""
        self.overdue = False
        """A call did not come back by its deadline."""
        self._thread: threading.Thread | None = None
        if self._sockets:
            self._bell, self._button = socket.socketpair()
            self._thread = threading.Thread(target=self._watch, name="link guard", daemon=True)
            self._thread.start()

    @contextlib.contextmanager
    def until(self, deadline: float) -> Iterator[None]:
        """Bound one call by `time.monotonic()` seconds."""
        self._due = deadline
        try:
            yield
        finally:
            self._due = None

    def close(self) -> None:
        """End the watch; the sockets are left to their owner."""
        self._done.set()
        if self._thread is not None:
            self._button.close()  # wakes the watch
            self._thread.join(timeout=1.0)
            self._bell.close()
            self._thread = None

    def _watch(self) -> None:
        while not self._done.is_set():
            if self._hung_up():
                self.gone = True
                self._end_after(time.monotonic() + _LEFTOVERS_S)
                return
            due = self._due
            if due is not None and time.monotonic() > due:
                self.overdue = True
                self._cut()
                return

    def _hung_up(self) -> bool:
        """Sleep until a peer hangs up, the watch is to end, or the next look."""
        if not _HANG_UP:
            select.select([self._bell], [], [], _LOOK_S)
            return False
        poller = select.poll()
        poller.register(self._bell, select.POLLIN)
        watched = {used.fileno() for used in self._sockets} - {-1}
        for number in watched:
            poller.register(number, _HANG_UP)
        return any(number in watched for number, _ in poller.poll(_LOOK_S * 1000.0))

    def _end_after(self, moment: float) -> None:
        """Leave a reader the bytes that came before the hang-up, then cut it off."""
        while not self._done.is_set():
            if self._due is not None and time.monotonic() > moment:
                self._cut()
                return
            self._done.wait(0.02 if self._due is not None else _LOOK_S)

    def _cut(self) -> None:
        for watched in self._sockets:
            with contextlib.suppress(OSError):
                watched.shutdown(socket.SHUT_RDWR)
        # A reader inside the system call needs a moment to come out before the number of its
        # socket may be used again; a loop that asks a shut socket for ever ends only by closing.
        self._done.wait(0.02)
        for watched in self._sockets:
            with contextlib.suppress(OSError):
                watched.close()
