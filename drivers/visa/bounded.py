"""Calls whose own waits nothing bounds: made in a thread, waited for only so long."""

from __future__ import annotations

import threading
from collections.abc import Callable
from typing import Any


class Overdue(Exception):
    """The call did not come back in time; it is left to itself."""


def bounded(work: Callable[[], Any], timeout_s: float, *, too_late: Callable[[Any], None]) -> Any:
    """Call `work` in a thread of its own, and wait for it at most `timeout_s`.

    Parameters
    ----------
    work
        What is called: a name look-up, a handshake, a broadcast inside the library below.
    timeout_s
        Longest wait, s.
    too_late
        Given a result that comes after it was given up, to close it.

    Raises
    ------
    Overdue
        It did not come back in time.
    Exception
        Whatever `work` raises.
    """
    outcome: list[Any] = []
    failure: list[Exception] = []
    arrived = threading.Event()
    given_up = threading.Event()
    turn = threading.Lock()

    def run() -> None:
        try:
            outcome.append(work())
        except Exception as error:  # noqa: BLE001 - carried to the caller, whatever it is
            failure.append(error)
        with turn:
            arrived.set()
            if given_up.is_set() and outcome:
                too_late(outcome[0])

    threading.Thread(target=run, name="bounded call", daemon=True).start()
    if not arrived.wait(timeout_s):
        with turn:
            given_up.set()
            if not arrived.is_set():
                raise Overdue
    if failure:
        raise failure[0]
    return outcome[0]
