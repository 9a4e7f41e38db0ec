"""One instrument spoken to in one dialect: set up, arm, read, leave as it was found."""

from __future__ import annotations

import contextlib
import math
import time
from dataclasses import dataclass
from typing import Any

from drivers.contract import SourceError, SourceRefused, SourceTimeout
from drivers.visa import answers, ways
from drivers.visa.acquisition import acquire
from drivers.visa.blocks import BlockError
from drivers.visa.conversation import Conversation
from drivers.visa.dialect import Average, Dialect, Encoding
from drivers.visa.formula import FormulaError
from drivers.visa.frame import Converted, Reading, convert
from drivers.visa.kept import KeptSettings
from drivers.visa.memory import Known
from drivers.visa.optional import OptionalFields
from drivers.visa.preamble import ask_fields, fields_in_block
from drivers.visa.record import Record


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
        self.kept = kept
        self._known = known
        self._channel = channel
        self._optional = OptionalFields(talk, dialect, known.unanswered)
        self._record = Record(talk, dialect, known)
        self._proven = known.preamble is not None
        self._averages = 1
        talk.asks_errors = known.asks_errors

    @property
    def known(self) -> Known:
        """What is known of this instrument by now."""
        return self._known.changed(
            asks_errors=self.talk.asks_errors,
            data=self._record.data,
            windows=self._record.windows,
            unanswered=tuple(sorted(self._optional.unanswered)),
        )

    def learn(self, **parts: Any) -> None:
        """Add to what is known."""
        self._known = self._known.changed(**parts)

    # Setting up ----------------------------------------------------------------------------

    def set_up(self, deadline: float) -> None:
        """Prepare the instrument; finds out what is not known yet.

        Raises
        ------
        SourceRefused
            It refuses a command it cannot do without.
        """
        talk, dialect = self.talk, self.dialect
        talk.tell("*CLS", deadline)
        fresh = self._known.encoding is None
        for command in dialect.setup.must:
            if fresh:
                ways.must(talk, dialect, command, deadline)
            else:
                talk.tell(command, deadline)
        for command in dialect.setup.attempt:
            talk.tell(command, deadline)
        talk.faults(dialect.errors, deadline)  # those of the attempts do not count
        if fresh:
            self.learn(encoding=ways.find_encoding(talk, dialect, deadline))
        else:
            ways.choose(talk, self._encoding(), deadline)
        if self._known.acquire is None:
            self.learn(acquire=ways.find_acquire(talk, dialect, deadline))
        if self._record.windows is None:
            self._record.find_windows(deadline)
        self._record.ask_points(None, self.kept, deadline)
        if fresh:
            self._find_out(deadline)
        if not dialect.errors.asked:
            talk.tell("*CLS", deadline)  # from now on the event register tells of captures

    def _find_out(self, deadline: float) -> None:
        """Sit out the silences now that a first capture would have to sit out otherwise."""
        self._optional.ask(deadline)
        if len(self.dialect.preamble) > 1:
            # There may be nothing to describe before the first acquisition.
            with contextlib.suppress(SourceRefused):
                self.learn(preamble=ways.find_preamble(self.talk, self.dialect, deadline)[0])

    def ask_points(self, points: int | None, deadline: float) -> None:
        """Ask for so many samples, where the dialect can."""
        self._record.ask_points(points, self.kept, deadline)

    def ask_average(self, count: int, deadline: float) -> None:
        """Ask for the average of `count` frames, where it gives true bits.

        Bytes of an averaged frame are cut to whole codes again: without a wider way to send
        them, nothing is gained, and nothing is asked.
        """
        average = self.dialect.average
        if average is None or self._known.encoding:
            return
        wanted = _count(average, count)
        if wanted == self._averages:
            return
        self.forget_optional()
        if wanted == 1 or not self._average(average, wanted, deadline):
            self.kept.put_back(self.talk, average.keep, deadline)
        self._averages = wanted  # a refusal is not asked for again with every frame

    def forget_optional(self) -> None:
        """Ask the optional fields again with the next frame: a setting was changed."""
        self._optional.forget()

    # Frames --------------------------------------------------------------------------------

    def take(self, deadline: float) -> Frame:
        """Arm, wait, and read one frame.

        Raises
        ------
        SourceError
            One of its leaves.
        """
        try:
            acquire(self.talk, self.dialect.acquire[self._place("acquire")], deadline)
        except SourceTimeout:
            self.try_another_way()  # its query is answered, but may not mean what it should
            raise
        complete_at = time.monotonic()
        try:
            frame = self._read(complete_at, deadline)
        except FormulaError as error:
            raise SourceRefused(f"the preamble cannot be used: {error}") from error
        return frame

    @property
    def sure_of_its_way(self) -> bool:
        """Whether the instrument answered the poll of the way in use: no guess, and one frame proves it."""
        return self.dialect.acquire[self._place("acquire")].poll is not None

    def try_another_way(self) -> bool:
        """Arm and wait in the next way from now on; False where the one in use has proved good."""
        if self._proven or len(self.dialect.acquire) == 1:
            return False
        self.learn(acquire=(self._place("acquire") + 1) % len(self.dialect.acquire))
        return True

    def stay(self) -> None:
        """Keep to the way of arming and waiting: it brought a frame that is good and new."""
        self._proven = True

    def convert(self, frame: Frame) -> Converted:
        """Turn a frame into volts."""
        reading = Reading(self._known.signed, self._known.big_endian)
        return convert(self.dialect, frame.fields, frame.payload, reading)

    def faults(self, deadline: float) -> list[str]:
        """Empty the error queue."""
        return self.talk.faults(self.dialect.errors, deadline)

    def text_values(self, deadline: float) -> list[float] | None:
        """Read the stopped frame once more, as text in volts; None where that cannot be."""
        text = self.dialect.text
        if text is None:
            return None
        values = None
        if ways.accepts(self.talk, self.dialect, text, deadline):
            try:
                self.talk.tell(self.dialect.data[self._record.data or 0], deadline)
                values = answers.numbers(self.talk.link.values(deadline, self._record.expect * 16))
            except answers.AnswerError:
                values = None
            except (SourceTimeout, BlockError):
                self.talk.step_in(deadline)
        ways.choose(self.talk, self._encoding(), deadline)
        return values

    def leave(self, deadline: float) -> None:
        """Write back what was changed, and let the instrument run again."""
        with contextlib.suppress(SourceError):
            self.kept.put_all_back(self.talk, deadline)
            for command in self.dialect.leave:
                self.talk.tell(command, deadline)
            # Closing at once could lose what is still on its way. *OPC? would wait for a run.
            self.talk.ask("*IDN?", deadline)

    # Inside --------------------------------------------------------------------------------

    def _read(self, complete_at: float, deadline: float) -> Frame:
        fields: dict[str, Any] = {
            "channel": float(self._channel),
            "encoding": float(self._known.encoding or 0),
            **self._optional.ask(deadline),
        }
        self._record.open_window(fields, deadline)
        if self._known.preamble is None:
            place, told = ways.find_preamble(self.talk, self.dialect, deadline)
            self.learn(preamble=place)
        else:
            told = ask_fields(self.talk, self.dialect.preamble[self._place("preamble")], deadline)
        fields |= told
        block = self._record.read(fields, deadline)
        inside, payload = fields_in_block(self.dialect.preamble[self._place("preamble")], block)
        return Frame({**fields, **inside}, payload, complete_at)

    def _place(self, part: str) -> int:
        """Give the place of the way chosen; what is remembered may be of a longer file."""
        return min(getattr(self._known, part) or 0, len(getattr(self.dialect, part)) - 1)

    def _encoding(self) -> Encoding | None:
        return self.dialect.encoding[self._place("encoding")] if self.dialect.encoding else None

    def _average(self, average: Average, count: int, deadline: float) -> bool:
        for setting in average.keep:
            self.kept.keep(self.talk, setting, deadline)
        for command in average.attempt:
            self.talk.tell(command, deadline, count=count)
        self.faults(deadline)  # those of the attempts do not count
        for command in average.send:
            self.talk.tell(command, deadline, count=count)
        return not self.faults(deadline)


def _count(average: Average, count: int) -> int:
    """Give the count the instrument can average that is nearest above the one asked for."""
    wanted = max(1, min(count, average.most))
    return 1 << math.ceil(math.log2(wanted)) if average.powers_of_two else wanted
