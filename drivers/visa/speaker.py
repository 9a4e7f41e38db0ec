"""One instrument spoken to in one dialect: set up, arm, read, leave as it was found."""

from __future__ import annotations

import contextlib
import math
import time
from dataclasses import dataclass
from typing import Any

from drivers.contract import SourceError, SourceRefused, SourceTimeout, UnusableCapture
from drivers.visa import answers
from drivers.visa.acquisition import acquire, answers_poll
from drivers.visa.blocks import MOST_BYTES, Block
from drivers.visa.conversation import Conversation
from drivers.visa.dialect import Acquire, Dialect, Encoding
from drivers.visa.formula import FormulaError
from drivers.visa.frame import Converted, Reading, convert
from drivers.visa.kept import KeptSettings
from drivers.visa.memory import Known
from drivers.visa.preamble import ask_fields, fields_in_block, matches

PROBE_S = 0.7
"""Longest wait for an answer that may not come."""

_ALSO_S = 1.0
"""Seconds for which the optional fields (coupling) are taken as still true."""

_SPARE_BYTES = 4096
"""More than the samples that a reply may hold: headers, a descriptor."""


@dataclass(frozen=True, slots=True, eq=False)
class Frame:
    """One frame as it came."""

    fields: dict[str, Any]
    """The preamble."""
    payload: bytes
    """The bytes of the samples."""
    complete_at: float
    """`time.monotonic()` seconds when the acquisition was known to be complete."""


class Speaker:
    """Speaks one dialect over one conversation.

    Parameters
    ----------
    talk
        The conversation.
    dialect
        The dialect.
    known
        What is known of this instrument; grows while it is found out.
    channel
        The channel read.
    kept
        Settings touched, to be written back at the end; outlives a link.
    """

    def __init__(
        self,
        talk: Conversation,
        dialect: Dialect,
        known: Known,
        channel: int,
        kept: KeptSettings,
    ) -> None:
        self.talk = talk
        self.dialect = dialect
        self.known = known
        self.kept = kept
        self._channel = channel
        self._also: dict[str, Any] = {}
        self._also_at = -math.inf
        self._expect = 1 << 16
        self._points: int | None = None
        self.averages = 1
        """Frames the instrument has been asked to average."""
        talk.asks_errors = known.asks_errors

    # Setting up ----------------------------------------------------------------------------

    def set_up(self, deadline: float) -> None:
        """Prepare the instrument; finds out what is not known yet.

        Raises
        ------
        SourceRefused
            It refuses a command it cannot do without.
        """
        self.talk.tell("*CLS", deadline)
        fresh = self.known.encoding is None
        for command in self.dialect.setup.must:
            self.talk.tell(command, deadline)
            if fresh:
                self._must(command, deadline)
        for command in self.dialect.setup.attempt:
            self.talk.tell(command, deadline)
        self.talk.faults(self.dialect.errors, deadline)  # those of the attempts do not count
        if fresh:
            self._find_encoding(deadline)
        else:
            self._choose(self._encoding(), deadline)
        if self.known.acquire is None:
            self._find_acquire(deadline)
        if self.known.windows is None:
            self._find_windows(deadline)
        self._points = None
        if self.dialect.length is not None and self.dialect.length.default is not None:
            self.ask_points(self.dialect.length.default, deadline)
        self.known = self.known.changed(asks_errors=self.talk.asks_errors)

    def ask_points(self, points: int, deadline: float) -> None:
        """Ask for so many samples, where the dialect can."""
        length = self.dialect.length
        if length is None or points == self._points:
            return
        self._points = points
        if not length.send:
            return
        for setting in length.keep:
            self.kept.keep(self.talk, setting, deadline)
        for command in length.send:
            self.talk.tell(command, deadline, points=points)
        self.talk.faults(self.dialect.errors, deadline)  # an instrument may have fewer

    def ask_average(self, count: int, deadline: float) -> None:
        """Ask for the average of `count` frames, where it gives true bits.

        Bytes of an averaged frame are cut to whole codes again: without a wider way to send
        them, nothing is gained, and nothing is asked.
        """
        average = self.dialect.average
        if average is None or count == self.averages or self.known.encoding:
            return
        self.forget_optional()
        if count <= 1:
            self.kept.put_back(self.talk, average.keep, deadline)
            self.averages = 1
            return
        wanted = min(count, average.most)
        if average.powers_of_two:
            wanted = min(1 << math.ceil(math.log2(wanted)), average.most)
        if wanted == self.averages:
            return
        for setting in average.keep:
            self.kept.keep(self.talk, setting, deadline)
        for command in average.attempt:
            self.talk.tell(command, deadline, count=wanted)
        self.talk.faults(self.dialect.errors, deadline)
        for command in average.send:
            self.talk.tell(command, deadline, count=wanted)
        if self.talk.faults(self.dialect.errors, deadline):
            self.kept.put_back(self.talk, average.keep, deadline)
            wanted = 1
        self.averages = wanted

    def forget_optional(self) -> None:
        """Ask the optional fields again with the next frame: a setting was changed."""
        self._also_at = -math.inf

    # Frames --------------------------------------------------------------------------------

    def take(self, deadline: float) -> Frame:
        """Arm, wait, and read one frame.

        Raises
        ------
        SourceError
            One of its leaves.
        """
        acquire(self.talk, self._acquire(), deadline)
        return self.read_frame(time.monotonic(), deadline)

    def read_frame(self, complete_at: float, deadline: float) -> Frame:
        """Read the frame that the stopped instrument holds."""
        fields: dict[str, Any] = {
            "channel": float(self._channel),
            "encoding": float(self.known.encoding or 0),
            **self._optional(deadline),
        }
        self._open_window(fields, deadline)
        if self.known.preamble is None:
            fields |= self._find_preamble(deadline)
        else:
            fields |= ask_fields(self.talk, self.dialect.preamble[self.known.preamble], deadline)
        preamble = self.dialect.preamble[self.known.preamble or 0]
        inside, payload = fields_in_block(preamble, self._blocks(fields, deadline))
        return Frame({**fields, **inside}, payload, complete_at)

    def convert(self, frame: Frame) -> Converted:
        """Turn a frame into volts."""
        reading = Reading(self.known.signed, self.known.big_endian)
        return convert(self.dialect, frame.fields, frame.payload, reading)

    def faults(self, deadline: float) -> list[str]:
        """Empty the error queue."""
        return self.talk.faults(self.dialect.errors, deadline)

    def text_values(self, deadline: float) -> list[float] | None:
        """Read the stopped frame once more, as text in volts; None where that cannot be."""
        if self.dialect.text is None:
            return None
        try:
            if not self._accepts(self.dialect.text, deadline):
                return None
            self.talk.tell(self.dialect.data, deadline)
            text = self.talk.link.values(deadline, self._expect * 16)
            return answers.numbers(text)
        except (answers.AnswerError, SourceTimeout):
            self.talk.step_in(deadline)
            return None
        finally:
            self._choose(self._encoding(), deadline)

    def leave(self, deadline: float) -> None:
        """Write back what was changed, and let the instrument run again."""
        with contextlib.suppress(SourceError):
            self.kept.put_all_back(self.talk, deadline)
            for command in self.dialect.leave:
                self.talk.tell(command, deadline)

    # Inside --------------------------------------------------------------------------------

    def _must(self, command: str, deadline: float) -> None:
        faults = self.talk.faults(self.dialect.errors, deadline)
        if faults:
            raise SourceRefused(
                f"the instrument refuses {self.talk.filled(command)}: {faults[0]}",
                "Check the channel with `--channel`, or choose another dialect with `--dialect`.",
            )

    def _accepts(self, encoding: Encoding, deadline: float) -> bool:
        self._choose(encoding, deadline)
        if self.talk.faults(self.dialect.errors, deadline):
            return False
        if encoding.ask is None or encoding.matches is None:
            return True
        answer = self.talk.quietly(encoding.ask, PROBE_S, deadline)
        return answer is not None and matches(answer, encoding.matches)

    def _choose(self, encoding: Encoding | None, deadline: float) -> None:
        for command in encoding.send if encoding is not None else ():
            self.talk.tell(command, deadline)

    def _encoding(self) -> Encoding | None:
        ways = self.dialect.encoding
        return ways[min(self.known.encoding or 0, len(ways) - 1)] if ways else None

    def _acquire(self) -> Acquire:
        ways = self.dialect.acquire
        return ways[min(self.known.acquire or 0, len(ways) - 1)]

    def _find_encoding(self, deadline: float) -> None:
        ways = self.dialect.encoding
        found = next((k for k, way in enumerate(ways) if self._accepts(way, deadline)), None)
        if ways and found is None:
            raise SourceRefused(
                "the instrument refuses every way of sending samples that this dialect has",
                "Choose another dialect with `--dialect`.",
            )
        self.known = self.known.changed(encoding=found or 0)

    def _find_acquire(self, deadline: float) -> None:
        ways = self.dialect.acquire
        for index, way in enumerate(ways):
            if len(ways) == 1 or answers_poll(self.talk, way, PROBE_S, deadline):
                if way.poll is not None or index > 0:  # those of the silent ones do not count
                    self.talk.faults(self.dialect.errors, deadline)
                self.known = self.known.changed(acquire=index)
                return
        raise SourceRefused(
            "the instrument knows no way of waiting that this dialect has",
            "Choose another dialect with `--dialect`.",
        )

    def _find_preamble(self, deadline: float) -> dict[str, Any]:
        """Try the ways of asking for the preamble; the first that gives every field is kept."""
        ways = self.dialect.preamble
        last: SourceError | None = None
        for index, way in enumerate(ways):
            only = len(ways) == 1
            try:
                brief = deadline if only else min(deadline, time.monotonic() + 2.0 * PROBE_S)
                fields = ask_fields(self.talk, way, brief)
            except (SourceTimeout, SourceRefused) as error:
                if only:
                    raise
                last = error
                if isinstance(error, SourceTimeout):
                    self.talk.step_in(deadline)
                self.talk.faults(self.dialect.errors, deadline)
                continue
            self.known = self.known.changed(preamble=index)
            return fields
        raise SourceRefused(f"no way of asking for the preamble works; last: {last}")

    def _optional(self, deadline: float) -> dict[str, Any]:
        """Ask for the optional fields, not more often than they matter."""
        if time.monotonic() - self._also_at < _ALSO_S:
            return self._also
        asked: dict[str, Any] = dict.fromkeys(self.dialect.also)
        unanswered = list(self.known.unanswered)
        for name, query in self.dialect.also.items():
            if name in unanswered:
                continue
            answer = self.talk.quietly(query, PROBE_S, deadline)
            if answer is None:
                unanswered.append(name)
                self.talk.faults(self.dialect.errors, deadline)
            else:
                asked[name] = answers.field(answer)
        self.known = self.known.changed(unanswered=tuple(unanswered))
        self._also, self._also_at = asked, time.monotonic()
        return asked

    def _find_windows(self, deadline: float) -> None:
        """See whether the instrument knows windows on its record."""
        length = self.dialect.length
        known = length is not None and bool(length.window)
        if known:
            self._window(1, 1000, deadline)
            known = not self.talk.faults(self.dialect.errors, deadline)
        self.known = self.known.changed(windows=known)

    def _window(self, first: int, last: int, deadline: float) -> None:
        assert self.dialect.length is not None
        for command in self.dialect.length.window:
            self.talk.tell(command, deadline, first=first, last=last)

    def _open_window(self, fields: dict[str, Any], deadline: float) -> None:
        """Before the preamble is asked for: the window must span what will be read."""
        length = self.dialect.length
        if length is None or not self.known.windows:
            return
        record = None
        if length.record is not None:
            with contextlib.suppress(FormulaError):
                record = int(length.record.number(fields))
        wanted = self._points or record or length.window_points
        self._window(1, min(wanted, record or wanted), deadline)

    def _blocks(self, fields: dict[str, Any], deadline: float) -> Block:
        """Read the samples: one block, or windows one after the other."""
        length, points = self.dialect.length, self.dialect.codes.points
        if length is not None and self.known.windows and points is not None:
            total = int(points.number(fields))
            if total > length.window_points:
                return self._windows(fields, total, length.window_points, deadline)
        block = self.talk.ask_block(self.dialect.data, deadline, self._expect)
        self._expect = len(block.payload) + _SPARE_BYTES
        return block

    def _windows(self, fields: dict[str, Any], total: int, most: int, deadline: float) -> Block:
        width = int(self.dialect.codes.width.number(fields))
        if total * width > MOST_BYTES:
            raise UnusableCapture(
                f"the record has {total} samples", "Choose a shorter record on the instrument."
            )
        parts = []
        for first in range(1, total + 1, most):
            last = min(total, first + most - 1)
            self._window(first, last, deadline)
            expect = (last - first + 1) * width
            block = self.talk.ask_block(self.dialect.data, deadline, expect + _SPARE_BYTES)
            if len(block.payload) != expect:
                raise SourceRefused(
                    f"samples {first} to {last} came as {len(block.payload)} bytes, not {expect}"
                )
            parts.append(block.payload)
        return Block("", b"".join(parts))
