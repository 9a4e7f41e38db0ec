"""The samples of a record: how many, and in how many blocks."""

from __future__ import annotations

import contextlib
import time
from typing import Any

from drivers.contract import SourceRefused, SourceTimeout, UnusableCapture
from drivers.visa.blocks import MOST_BYTES, Block
from drivers.visa.conversation import Conversation
from drivers.visa.dialect import Dialect
from drivers.visa.formula import FormulaError
from drivers.visa.kept import KeptSettings
from drivers.visa.memory import Known

_SPARE_BYTES = 4096
"""More than the samples that a reply may hold: headers, a descriptor."""

_SHORTER = (250_000, 100_000, 25_000, 10_000, 2_500, 1_000)
"""Samples asked for where the record is not known and more was refused."""

_BRIEF_S = 1.5
"""Seconds for the first byte and the last of a block whose query may not be known."""


class Record:
    """Reads the samples of a stopped instrument.

    Parameters
    ----------
    talk
        The conversation.
    dialect
        The dialect.
    known
        What is known of this instrument.
    """

    def __init__(self, talk: Conversation, dialect: Dialect, known: Known) -> None:
        self._talk = talk
        self._dialect = dialect
        self._points: int | None = None
        self._longest: int | None = None
        self.data = known.data if len(dialect.data) > 1 else 0
        """Place of the query for the samples; None while none was answered."""
        self.windows = known.windows
        """Whether the instrument knows windows on its record."""
        self.expect = 1 << 16
        """Bytes the next reply will probably have."""

    def find_windows(self, deadline: float) -> None:
        """See whether the instrument knows windows on its record."""
        length = self._dialect.length
        self.windows = length is not None and bool(length.window)
        if self.windows:
            self._window(1, 1000, deadline)
            self.windows = not self._talk.faults(self._dialect.errors, deadline)

    def ask_points(self, points: int | None, kept: KeptSettings, deadline: float) -> None:
        """Ask for so many samples where the dialect can; None for its usual number."""
        length = self._dialect.length
        if length is None:
            return
        points = points if points is not None else length.default
        if points is None or points == self._points:
            return
        self._points = points
        if not length.send:
            return
        for setting in length.keep:
            kept.keep(self._talk, setting, deadline)
        for command in length.send:
            self._talk.tell(command, deadline, points=points)
        self._talk.faults(self._dialect.errors, deadline)  # an instrument may have fewer

    def open_window(self, fields: dict[str, Any], deadline: float) -> None:
        """Before the preamble is asked for: the window must span what will be read."""
        length = self._dialect.length
        if length is None or not self.windows:
            return
        record = None
        if length.record is not None:
            with contextlib.suppress(FormulaError):
                record = int(length.record.number(fields))
        wanted = self._points or record or length.window_points
        if record is not None:
            self._window(1, min(wanted, record), deadline)
            return
        wanted = min(wanted, self._longest or wanted)
        for last in (wanted, *(shorter for shorter in _SHORTER if shorter < wanted)):
            self._window(1, last, deadline)
            if not self._talk.faults(self._dialect.errors, deadline):
                self._longest = last
                return

    def read(self, fields: dict[str, Any], deadline: float) -> Block:
        """Read the samples: one block, or windows one after the other.

        Raises
        ------
        SourceRefused
            A window came with another number of bytes than it should have.
        UnusableCapture
            The record is longer than what is accepted.
        """
        length, points = self._dialect.length, self._dialect.codes.points
        if length is not None and self.windows and points is not None:
            total = int(points.number(fields))
            if total > length.window_points:
                return self._in_windows(fields, total, length.window_points, deadline)
        block = self._one_block(deadline)
        self.expect = len(block.payload) + _SPARE_BYTES
        return block

    def _one_block(self, deadline: float) -> Block:
        if self.data is not None:
            return self._talk.ask_block(self._dialect.data[self.data], deadline, self.expect)
        for place, query in enumerate(self._dialect.data):
            brief = min(deadline, time.monotonic() + _BRIEF_S)
            try:
                block = self._talk.ask_block(query, brief, self.expect)
            except SourceTimeout:
                self._talk.step_in(deadline)
                self._talk.faults(self._dialect.errors, deadline)
                continue
            self.data = place
            return block
        raise SourceTimeout("the instrument sends no samples in any way this dialect has")

    def _in_windows(self, fields: dict[str, Any], total: int, most: int, deadline: float) -> Block:
        width = int(self._dialect.codes.width.number(fields))
        if total * width > MOST_BYTES:
            raise UnusableCapture(
                f"the record has {total} samples", "Choose a shorter record on the instrument."
            )
        parts = []
        for first in range(1, total + 1, most):
            last = min(total, first + most - 1)
            self._window(first, last, deadline)
            expect = (last - first + 1) * width
            query = self._dialect.data[self.data or 0]
            block = self._talk.ask_block(query, deadline, expect + _SPARE_BYTES)
            if len(block.payload) != expect:
                raise SourceRefused(
                    f"samples {first} to {last} came as {len(block.payload)} bytes, not {expect}"
                )
            parts.append(block.payload)
        return Block("", b"".join(parts))

    def _window(self, first: int, last: int, deadline: float) -> None:
        assert self._dialect.length is not None
        for command in self._dialect.length.window:
            self._talk.tell(command, deadline, first=first, last=last)
