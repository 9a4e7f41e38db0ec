"""Calls to the file system with an end to the wait: a share that is gone may never answer."""

from __future__ import annotations

import threading
from collections.abc import Callable
from typing import Any, Generic, TypeVar

T = TypeVar("T")


class NoAnswer(Exception):
    """The call has not come back within the wait; it goes on aside."""


class _Call(Generic[T]):
    """One call in a thread of its own, which dies with the program."""

    def __init__(self, what: object, function: Callable[[], T]) -> None:
        self.what = what
        self._function = function
        self._result: list[T] = []
        self._error: BaseException | None = None
        self.done = threading.Event()
        threading.Thread(target=self._run, daemon=True, name="files aside").start()

    def _run(self) -> None:
        try:
            self._result.append(self._function())
        except BaseException as error:  # noqa: BLE001 - handed to the caller's thread
            self._error = error
        finally:
            self.done.set()

    def outcome(self) -> T:
        """Give the result, or raise what the call raised."""
        if self._error is not None:
            raise self._error
        return self._result[0]


class Aside:
    """At most one call at a time; one that hangs is picked up again, not started anew."""

    def __init__(self) -> None:
        self._pending: _Call[Any] | None = None

    def ask(self, what: object, function: Callable[[], T], wait_s: float) -> T:
        """Call a function and wait for its answer.

        Parameters
        ----------
        what
            Names the question: the answer to an earlier call of the same name will do.
        function
            The call.
        wait_s
            Longest wait, seconds.

        Raises
        ------
        NoAnswer
            It, or a call before it, has not come back yet.
        """
        if self._pending is not None and self._pending.what != what:
            if not self._pending.done.wait(wait_s):
                raise NoAnswer
            self._pending = None
        call: _Call[T] = self._pending or _Call(what, function)
        self._pending = call
        if not call.done.wait(wait_s):
            raise NoAnswer
        self._pending = None
        return call.outcome()
