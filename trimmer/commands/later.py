"""A session whose source and book are opened where it runs: the screen stands before anything answers.

Opening an instrument means loading a driver library and asking it questions, which may take seconds. In
the screen's worker that is no wait for the person, and what fails is said where the eyes are.
"""

from __future__ import annotations

import contextlib
import threading
from collections.abc import Callable, Iterator
from dataclasses import dataclass

from drivers import SourceError, UnusableCapture
from trimmer.console import SIGNAL_UNUSABLE, SOURCE_FAILED
from trimmer.errors import TrimmerError
from trimmer.guidance.advice import Trim
from trimmer.measurement.reading import MeasurementError
from trimmer.reports import Conversation, Failed, Report, Screwdriver, Word


@dataclass(frozen=True, slots=True)
class Begun:
    """An open session, and what turns the simulated unit's trims where there is one."""

    session: Conversation
    """The session."""
    hand: Screwdriver | None = None
    """Turns the simulated unit's trims."""


class Later:
    """A conversation that opens everything when it is run, and closes it at its end.

    Parameters
    ----------
    begin
        Opens source and book on the stack it is given, and builds the session.
    """

    def __init__(self, begin: Callable[[contextlib.ExitStack], Begun]) -> None:
        self._begin = begin
        self._begun: Begun | None = None
        self._early: list[Word] = []
        self._lock = threading.Lock()

    def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
        """Open, then give the session's reports; what cannot be opened is a `Failed`."""
        with contextlib.ExitStack() as stack:
            try:
                begun = self._begin(stack)
            except (TrimmerError, SourceError, MeasurementError) as error:
                yield Failed(_status(error), str(error), error.remedy)
                return
            with self._lock:
                self._begun = begun
                for word in self._early:
                    begun.session.say(word)
            yield from begun.session.run(stop)

    def say(self, word: Word) -> None:
        """Pass a word on; one that comes before the session stands is kept for it."""
        with self._lock:
            if self._begun is None:
                self._early.append(word)
            else:
                self._begun.session.say(word)

    def turn(self, trim: Trim, turns: float) -> None:
        """Turn a trim of the simulated unit; nothing to turn is there before it stands."""
        if self._begun is not None and self._begun.hand is not None:
            self._begun.hand.turn(trim, turns)


def _status(error: TrimmerError | SourceError | MeasurementError) -> int:
    if isinstance(error, TrimmerError):
        return error.exit_status
    return (
        SIGNAL_UNUSABLE if isinstance(error, MeasurementError | UnusableCapture) else SOURCE_FAILED
    )
