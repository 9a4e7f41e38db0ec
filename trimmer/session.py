"""The one engine under every face: waveforms in, reports out, each turn kept before it is told.

A session is a generator of frozen reports. It owns the source, the guide and the sheet; it knows
no screen. Words from the person come through a thread-safe inbox.
"""

from __future__ import annotations

import math
import queue
import time
from collections import deque
from collections.abc import Callable, Generator, Iterator
from dataclasses import dataclass, field
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from drivers import SourceError, SourceTimeout, WaveformSource
from trimmer.errors import BookError
from trimmer.guidance import Guide
from trimmer.guidance.advice import Advice, Confirm, Done
from trimmer.guidance.latch import Latch
from trimmer.intake import Intake, Taken, Wanted, picture, signal_at_fault
from trimmer.keeping import Keeper
from trimmer.measurement import MeasurementError, Reading
from trimmer.reports import (
    Advised,
    Awaiting,
    Failed,
    Finished,
    Followed,
    Measured,
    Report,
    Word,
)

PATIENCE_S = 30.0
"""A lost source or signal is waited for so long."""
RETRY_S = 0.4
"""Pause between tries while something is lost."""
AT_STOP_FILE_S = 3.0
"""After `at-stop` a folder is given so long to show a new file; then the last reading stands."""

Step = Advice | Confirm | Done
T = TypeVar("T")
Reports = Generator[Report, None, T]


@dataclass(frozen=True, slots=True)
class Manner:
    """How a session is held."""

    wanted: Wanted = field(default_factory=lambda: Wanted(frames=4))
    """What is asked of each reading."""
    follow: bool = False
    """True to watch the hand while it turns and take the turn as made when still."""
    patience_s: float = PATIENCE_S
    """How long a lost source or signal is waited for."""


def same_setting(before: Reading, now: Reading) -> bool:
    """Say whether two readings may be of one setting: chi-square of their difference, 4 sigma wide."""
    size = min(before.parts.size, now.parts.size)
    variances = (reading.random_covariance.diagonal()[:size] for reading in (before, now))
    variance = np.sum(np.array(list(variances)), axis=0)
    chance = float(np.sum((now.parts[:size] - before.parts[:size]) ** 2 / variance))
    return chance < size + 4.0 * math.sqrt(2.0 * size)


class _GiveUp(Exception):
    """The session cannot go on."""

    def __init__(self, failed: Failed) -> None:
        super().__init__(failed.message)
        self.failed = failed


class _Left(Exception):
    """The person, or the face, ended the session."""


class Session:
    """Guide a person through one unit, from the first reading to the finished sheet.

    Parameters
    ----------
    source
        An open source; closed by the caller.
    guide
        The guidance, fresh or taken up from an earlier session.
    keeper
        The sheet in the bench book.
    manner
        How the session is held.
    before
        The last reading of a session that is taken up; None for a new one.
    """

    def __init__(
        self,
        source: WaveformSource,
        guide: Guide,
        keeper: Keeper,
        manner: Manner | None = None,
        before: Reading | None = None,
    ) -> None:
        self.manner = manner or Manner()
        self.guide = guide
        self.keeper = keeper
        self.source = source
        self._intake = Intake(source, self.manner.wanted)
        self._inbox: queue.SimpleQueue[Word] = queue.SimpleQueue()
        self._kept: deque[Word] = deque()
        self._stop: Callable[[], bool] = lambda: False
        self._last: Taken | None = None
        self._before = before

    def say(self, word: Word) -> None:
        """Take a word from the person. Safe from any thread."""
        self._inbox.put(word)

    def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
        """Give reports until the session ends or `stop` says so.

        Whatever ends it, also an interrupt, the sheet is closed with what was measured.
        """
        self._stop = stop
        ended = False
        try:
            yield self.keeper.open(self.source.info)
            done = yield from self._guided()
            finished = self._finish(done)
            ended = True
            yield from self.keeper.notices()
            yield finished
        except _Left:
            yield self._finish(self._quit())
            ended = True
        except _GiveUp as end:
            yield end.failed
        except BookError as error:
            yield Failed(error.exit_status, str(error), error.remedy)
        finally:
            if not ended:
                self.keeper.abandon(self._quit, self._last)

    # -- the course of a session ---------------------------------------------------------------

    def _guided(self) -> Reports[Done]:
        taken = yield from self._measured(self._first())
        step = self._first_step(taken.reading)
        while True:
            settled = yield from self._confirmed(step)
            if isinstance(settled, Done):
                return settled
            self.keeper.advised(settled, self.guide)
            yield Advised(settled, follows=self._follows, reach=self._reach())
            step = yield from self._answered()

    def _first_step(self, reading: Reading) -> Step:
        """Begin; or go on with a session taken up: with the same advice where nothing was turned."""
        before, answer = self._before, self.guide.answer
        if before is not None and answer is not None and same_setting(before, reading):
            return answer
        return self.guide.observe(reading)

    @property
    def _follows(self) -> bool:
        info = self.source.info
        return self.manner.follow and not (info.paced_by_person or info.finite)

    def _first(self) -> Reports[Taken]:
        if self.source.info.paced_by_person:
            return (yield from self._next_file())
        return (yield from self._still())

    def _confirmed(self, step: Step) -> Reports[Advice | Done]:
        """Take the longer readings that the guide asks for before it calls the setting final."""
        while isinstance(step, Confirm):
            if self.source.info.paced_by_person and self._last is not None:
                step = self.guide.observe(self._last.reading, longer=True)
                continue
            yield Awaiting("confirming", step.reason, "Leave the trims alone for a moment.")
            sigma = step.sigma_thd
            taken = yield from self._measured(self._still(frames=8, sigma=sigma))
            step = self.guide.observe(taken.reading, longer=True)
        return step

    def _answered(self) -> Reports[Step]:
        """Wait for the turn that was asked for, in the way of this session."""
        while True:
            if self._follows:
                word: Word = yield from self._followed()
                early = None
            else:
                word, early = yield from self._word_or_file()
            step = yield from self._take(word, early)
            if step is not None:
                return step

    def _take(self, word: Word, early: Taken | None) -> Reports[Step | None]:
        """Answer one word; None where it changes nothing."""
        match word:
            case "moved":
                since = time.monotonic()
                fresh = self._given(early) if early else self._still(fresh_after=since)
                taken = yield from self._measured(fresh, moved=True)
                return self.guide.observe(taken.reading)
            case "at-stop":
                taken = yield from self._measured(self._at_stop(), moved=True)
                return self.guide.at_stop(taken.reading)
            case "back":
                return self.guide.back(self._reading())
            case "skip":
                return self.guide.skip(self._reading())
            case "quit":
                raise _Left

    def _word_or_file(self) -> Reports[tuple[Word, Taken | None]]:
        """Wait for a word; in a folder, a new file says *moved* with its own reading."""
        if not self.source.info.paced_by_person:
            while True:
                if (word := self._heard(0.1)) is not None:
                    return word, None
        taken_or_word = yield from self._file_or_word()
        if isinstance(taken_or_word, Taken):
            return "moved", taken_or_word
        if taken_or_word == "moved":
            yield Awaiting(
                "file", "The turn is taken as made with the next file.", "Save a capture."
            )
            return (yield from self._word_or_file())
        return taken_or_word, None

    def _followed(self) -> Reports[Word]:
        """Read while the hand turns, until the turn counts as made or a word is said."""
        latch = Latch()
        while True:
            if (word := self._heard(0.0)) is not None:
                return word
            taken = yield from self._patiently(lambda: self._intake.frame())
            word_now = latch.hold(self.guide.follow(taken.reading, time.monotonic()))
            yield Followed(
                word_now,
                taken.reading,
                picture(taken.waveform, taken.reading),
                taken.waveform.interval_s,
                taken.waveform.age_s,
            )
            if word_now.still:
                return "moved"

    # -- readings ------------------------------------------------------------------------------

    def _measured(self, fresh: Reports[Taken], *, moved: bool = False) -> Reports[Taken]:
        """Report a reading, once it is in the book."""
        taken = yield from fresh
        self._last = taken
        turn = self.guide.turns_made + (1 if moved else 0)
        self.keeper.measured(turn, taken)
        yield from self.keeper.notices()
        yield Measured(
            turn=turn,
            taken_at=taken.waveform.taken_at,
            source=taken.waveform.source,
            reading=taken.reading,
            waveform=picture(taken.waveform, taken.reading),
            interval_s=taken.waveform.interval_s,
            notes=taken.waveform.notes,
        )
        return taken

    def _given(self, taken: Taken) -> Reports[Taken]:
        yield from ()
        return taken

    def _still(
        self,
        *,
        frames: int | None = None,
        sigma: float | None = None,
        fresh_after: float | None = None,
    ) -> Reports[Taken]:
        return (
            yield from self._patiently(
                lambda: self._intake.still(
                    frames=frames, sigma=sigma, fresh_after=fresh_after, stop=self._stop
                )
            )
        )

    def _at_stop(self) -> Reports[Taken]:
        """Read at the end stop: a new file if one comes at once, else the last reading again."""
        if not self.source.info.paced_by_person or self._last is None:
            return (yield from self._still(fresh_after=time.monotonic()))
        deadline = time.monotonic() + AT_STOP_FILE_S
        while time.monotonic() < deadline:
            self._check()
            try:
                return self._intake.frame(timeout_s=0.3)
            except SourceTimeout:
                continue
        yield Awaiting("file", "No new file: the last reading stands.", "Go on with the next turn.")
        return self._last

    def _next_file(self) -> Reports[Taken]:
        """Wait for the next file, however long the person takes."""
        while True:
            answer = yield from self._file_or_word()
            if isinstance(answer, Taken):
                return answer
            if answer == "quit":
                raise _Left
            yield Awaiting("file", "No capture yet.", "Save the first capture into the folder.")

    def _file_or_word(self) -> Reports[Taken | Word]:
        def once() -> Taken | Word | None:
            if (word := self._heard(0.0)) is not None:
                return word
            try:
                return self._intake.frame(timeout_s=0.25)
            except SourceTimeout:
                return None

        while True:
            answer = yield from self._patiently(once)
            if answer is not None:
                return answer

    def _patiently(self, take: Callable[[], T]) -> Reports[T]:
        """Try again while a source or signal is lost, saying so, until patience runs out."""
        deadline: float | None = None
        said = ""
        while True:
            self._check()
            try:
                return take()
            except (SourceError, MeasurementError) as error:
                now = time.monotonic()
                deadline = now + self.manner.patience_s if deadline is None else deadline
                status = 3 if signal_at_fault(error) else 4
                if now >= deadline:
                    raise _GiveUp(Failed(status, str(error), error.remedy)) from error
                if str(error) != said:
                    said = str(error)
                    code = "signal" if status == 3 else "source-lost"
                    yield Awaiting(code, said, error.remedy, deadline - now)
            self._pause(RETRY_S)

    def _reading(self) -> Reading:
        assert self._last is not None, "an advice follows a reading"
        return self._last.reading

    # -- the person, and the end ---------------------------------------------------------------

    def _heard(self, wait_s: float) -> Word | None:
        self._check()
        if self._kept:
            return self._kept.popleft()
        try:
            return self._inbox.get(timeout=wait_s) if wait_s > 0 else self._inbox.get_nowait()
        except queue.Empty:
            return None

    def _pause(self, wait_s: float) -> None:
        """Wait while something is lost; only *quit* is answered now, other words are kept."""
        end = time.monotonic() + wait_s
        while (left := end - time.monotonic()) > 0:
            self._check()
            try:
                word = self._inbox.get(timeout=min(left, 0.1))
            except queue.Empty:
                continue
            if word == "quit":
                raise _Left
            self._kept.append(word)

    def _check(self) -> None:
        if self._stop():
            raise _Left

    def _reach(self) -> NDArray[np.float64] | None:
        """Give what the trims reach, as rows; None until the guide knows both columns."""
        basis = self.guide.basis
        return None if basis is None else np.ascontiguousarray(basis.T)

    def _quit(self) -> Done:
        return self.guide.quit(self._last.reading if self._last else None)

    def _finish(self, done: Done) -> Finished:
        sheet = self.keeper.finish(done, self._last, self.guide)
        thd = self._last.reading.thd if self._last else None
        return Finished(done, thd.value if thd else None, thd.sigma if thd else None, sheet)
