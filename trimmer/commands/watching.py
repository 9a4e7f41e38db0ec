"""Readings of a unit for as long as wanted: with patience for what is lost, and an ear for the person."""

from __future__ import annotations

import queue
import sys
import threading
import time
from collections.abc import Callable, Sequence
from typing import Any, TextIO, TypeVar

from drivers import SourceError, SourceTimeout, WaveformSource
from trimmer.console import SIGNAL_UNUSABLE, SOURCE_FAILED, complain
from trimmer.events import Event, line
from trimmer.intake import Intake, Taken, Wanted, signal_at_fault
from trimmer.measurement import MeasurementError

PATIENCE_S = 30.0
"""A lost source or signal is waited for so long."""
RETRY_S = 0.3
"""Pause between tries while something is lost."""
LOOK_S = 0.25
"""How long a folder is looked at before the person is listened to again."""

T = TypeVar("T")


class Left(Exception):
    """The person ended the watch."""


class GivenUp(Exception):
    """The source or the signal did not come back."""

    def __init__(self, error: SourceError | MeasurementError) -> None:
        super().__init__(str(error))
        self.remedy = error.remedy
        self.exit_status = SIGNAL_UNUSABLE if signal_at_fault(error) else SOURCE_FAILED


class Inbox:
    """Words of the person on stdin, read by a thread that dies with the process.

    The end of stdin ends nothing: nothing is waited for from it.
    """

    def __init__(self, words: Sequence[str], lines: TextIO | None = None) -> None:
        self._words = tuple(words)
        self._said: queue.SimpleQueue[str] = queue.SimpleQueue()
        source = lines or sys.stdin
        threading.Thread(target=self._listen, args=(source,), name="words", daemon=True).start()

    def _listen(self, lines: TextIO) -> None:
        for text in lines:
            word = text.strip().lower()
            if word in self._words:
                self._said.put(word)
            elif word:
                known = ", ".join(self._words)
                complain(f"{text.strip()[:40]!r} is no word here", f"Say {known}.")

    def heard(self, wait_s: float = 0.0) -> str | None:
        """Give the next word, waiting at most so long.

        Raises
        ------
        Left
            The word is *quit*.
        """
        try:
            word = self._said.get(timeout=wait_s) if wait_s > 0.0 else self._said.get_nowait()
        except queue.Empty:
            return None
        if word == "quit":
            raise Left
        return word


class Watch:
    """Takes readings from one source, one after the other.

    Parameters
    ----------
    source
        An open source; closed by the caller.
    wanted
        What is asked of a reading.
    inbox
        The person's words.
    patience_s
        How long a lost source is waited for.
    signal_patience_s
        How long a signal that cannot be used is waited for.
    """

    def __init__(
        self,
        source: WaveformSource,
        wanted: Wanted,
        inbox: Inbox,
        *,
        patience_s: float = PATIENCE_S,
        signal_patience_s: float = PATIENCE_S,
    ) -> None:
        self.source = source
        self.inbox = inbox
        self.intake = Intake(source, wanted)
        self._patience = {SOURCE_FAILED: patience_s, SIGNAL_UNUSABLE: signal_patience_s}
        self._since: float | None = None
        self._said = ""

    @property
    def paced(self) -> bool:
        """Whether each capture is the person's own act."""
        return self.source.info.paced_by_person

    def frame(self) -> Taken | None:
        """Take one capture; None where there is none yet.

        Raises
        ------
        Left
            The person said *quit*.
        GivenUp
            What was lost did not come back in time.
        """
        return self._tried(lambda: self.intake.frame(timeout_s=LOOK_S if self.paced else 5.0))

    def still(self, frames: int, sigma: float | None = None) -> Taken | None:
        """Combine captures of a unit that nobody touches; None where something was lost meanwhile."""
        return self._tried(lambda: self.intake.still(frames=frames, sigma=sigma))

    def _tried(self, take: Callable[[], T]) -> T | None:
        try:
            taken = take()
        except (SourceError, MeasurementError) as error:
            if not (self.paced and isinstance(error, SourceTimeout)):
                self._lost(error)
                self.inbox_pause(RETRY_S)
            return None
        self._since, self._said = None, ""
        return taken

    def _lost(self, error: SourceError | MeasurementError) -> None:
        now = time.monotonic()
        self._since = now if self._since is None else self._since
        failed = GivenUp(error)
        left = self._since + self._patience[failed.exit_status] - now
        if left <= 0.0:
            raise failed from error
        if str(error) != self._said:
            self._said = str(error)
            complain(error, f"{error.remedy} (waiting {left:.0f} s more)")

    def inbox_pause(self, seconds: float) -> None:
        """Wait a little; *quit* is answered at once."""
        end = time.monotonic() + seconds
        while (left := end - time.monotonic()) > 0.0:
            self.inbox.heard(left)


class Lines:
    """Shows events: as JSON, or as the sentences that a function makes of them."""

    def __init__(self, *, json: bool, words: Callable[[Event], Sequence[str]]) -> None:
        self.json = json
        self._words = words

    def show(self, event: Event) -> None:
        """Show one event on stdout."""
        for text in [line(event)] if self.json else self._words(event):
            print(text, flush=True)

    def say(self, *sentences: Any) -> None:
        """Say something that is no event: in JSON it goes to stderr."""
        out = sys.stderr if self.json else sys.stdout
        for text in sentences:
            print(text, file=out, flush=True)
