"""A scripted conversation in place of a link.

It fails on a line that was not expected, on an answer that was not read before the next line is
sent, and on what is left over at the end.
"""

from __future__ import annotations

from collections.abc import Sequence

from drivers.visa.blocks import Block, MessageFeed, read_block

Line = tuple[str, bytes | str | None]
"""What must be sent, and what is answered; None where nothing is."""


class Mismatch(AssertionError):
    """The conversation went another way."""


class ScriptedLink:
    """A link that plays one side of a conversation."""

    resource = "SCRIPT"
    kind = "SOCKET"
    stream = True

    def __init__(self, lines: Sequence[Line]) -> None:
        self._lines = list(lines)
        self._pending: bytes | None = None
        self._at = 0
        self.broken = False

    def write(self, text: str, deadline: float) -> None:
        """Expect the next line."""
        if self._pending is not None:
            raise Mismatch(f"{text!r} is sent before the answer {self._pending!r} was read")
        if self._at == len(self._lines):
            raise Mismatch(f"{text!r} is sent after the end")
        expected, answer = self._lines[self._at]
        if text != expected:
            raise Mismatch(f"line {self._at}: {text!r} is sent, not {expected!r}")
        self._at += 1
        self._pending = answer.encode() if isinstance(answer, str) else answer

    def _answer(self) -> bytes:
        if self._pending is None:
            raise Mismatch(f"an answer is read after line {self._at - 1}, where none comes")
        answer, self._pending = self._pending, None
        return answer

    def line(self, deadline: float, most: int = 0) -> str:
        return self._answer().decode("latin-1").strip()

    def values(self, deadline: float, expect: int = 0, most: int = 0) -> str:
        return self.line(deadline)

    def block(self, deadline: float, expect: int = 0, most: int = 1 << 20) -> Block:
        return read_block(MessageFeed(self._answer(), has_end=False), most)

    def drain(self) -> bytes:
        return b""

    def resume(self) -> None:
        self.broken = False

    def freshen(self, deadline: float) -> None:
        """Nothing is pending."""

    def close(self) -> None:
        """The end is checked by `finished`, not here: a test may fail before."""

    def finished(self) -> None:
        """Fail on what is left over."""
        if self._pending is not None:
            raise Mismatch(f"the answer {self._pending!r} was never read")
        if self._at < len(self._lines):
            left = [sent for sent, _ in self._lines[self._at :]]
            raise Mismatch(f"never sent: {left}")
