"""The instrument's end of SCPI: messages taken apart, headers matched, errors queued.

After IEEE 488.2 (program messages, common commands, status bytes, blocks) and SCPI-1999 volume 1
(header forms, compound headers, error numbers).
"""

from __future__ import annotations

import re
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

QUEUE_LENGTH = 16
"""Errors kept; the last place then says that more were lost (SCPI-1999, 21.8)."""
LONGEST_MESSAGE = 1 << 16
"""Bytes of a message without its end after which it is thrown away."""

# Standard event status register (IEEE 488.2, 11.5.1).
OPERATION_COMPLETE, QUERY_ERROR, DEVICE_ERROR = 1, 4, 8
EXECUTION_ERROR, COMMAND_ERROR, POWER_ON = 16, 32, 128

MESSAGES = {
    0: "No error",
    -102: "Syntax error",
    -104: "Data type error",
    -108: "Parameter not allowed",
    -109: "Missing parameter",
    -113: "Undefined header",
    -221: "Settings conflict",
    -222: "Data out of range",
    -223: "Too much data",
    -224: "Illegal parameter value",
    -230: "Data corrupt or stale",
    -310: "System error",
    -350: "Queue overflow",
}


class ScpiError(Exception):
    """A command that this instrument refuses, with its SCPI error number."""

    def __init__(self, code: int) -> None:
        super().__init__(f'{code},"{MESSAGES[code]}"')
        # 0 stands for an error that its speaker has noted already.
        self.code = code


@dataclass(frozen=True, slots=True)
class Block:
    """A definite-length block (IEEE 488.2, 8.7.9), and what stands around it on the wire."""

    payload: bytes
    """The bytes counted."""
    before: bytes = b""
    """Text before the block."""
    digits: int = 9
    """Digits of the byte count, leading zeros included."""
    after: bytes = b""
    """Bytes after the block, before the message's end."""

    def __bytes__(self) -> bytes:
        count = f"#{self.digits}{len(self.payload):0{self.digits}d}".encode()
        return self.before + count + self.payload + self.after


Reply = str | Block


@dataclass(frozen=True, slots=True)
class Call:
    """One command or query as it came, for its handler."""

    arguments: tuple[str, ...]
    """Parameters, blanks around them taken off."""
    suffixes: tuple[int, ...]
    """Numbers in the header, in order; 1 where none was written."""

    def word(self, *choices: str) -> str:
        """Read a parameter that is one of some words, in short or long form.

        Parameters
        ----------
        choices
            In the mixed case of SCPI: capitals are the short form.

        Returns
        -------
        str
            The short form.
        """
        given = self.text().upper()
        for choice in choices:
            if given in (short_form(choice), choice.upper()):
                return short_form(choice)
        raise ScpiError(-224)

    def text(self) -> str:
        """Read the only parameter as it stands, quotes taken off."""
        if not self.arguments or not self.arguments[0]:
            raise ScpiError(-109)
        if len(self.arguments) > 1:
            raise ScpiError(-108)
        return self.arguments[0].strip("\"'")

    def number(self, least: float, most: float) -> float:
        """Read a number within limits; a unit of volts, seconds or hertz may follow."""
        match = NUMBER.fullmatch(self.text())
        if not match:
            raise ScpiError(-104)
        value = float(match[1]) * SCALES[(match[2] or "").upper()]
        if not least <= value <= most:
            raise ScpiError(-222)
        return value

    def whole(self, least: int, most: int) -> int:
        """Read a whole number within limits."""
        return round(self.number(least, most))

    def switch(self) -> bool:
        """Read ON, OFF, 1 or 0."""
        return self.word("ON", "OFF", "1", "0") in ("ON", "1")


NUMBER = re.compile(
    r"([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*([unmkMG]?)(?:V|S|Hz|PTS|SA)?", re.I
)
SCALES = {"": 1.0, "N": 1e-9, "U": 1e-6, "M": 1e-3, "K": 1e3, "G": 1e9}

Handler = Callable[[Call], "Reply | None"]


def real(value: float) -> str:
    """Print a number with all the digits that count, and no more: twelve at most (NR3)."""
    rounded = float(f"{value:.12g}") + 0.0  # turns a negative zero into a plain one
    return np.format_float_scientific(rounded, unique=True, min_digits=6, exp_digits=2, sign=True)


def short_form(node: str) -> str:
    """Give the short form of a keyword written in the mixed case of SCPI."""
    return re.sub(r"[a-z]+", "", node).upper()


def _pattern(header: str) -> re.Pattern[str]:
    """Compile a header such as ``[SENSe:]SWEep:POINts`` or ``CHANnel<n>:SCALe``."""
    parts: list[str] = []
    for optional, plain in re.findall(r"\[:?([^\]]+?):?\]|([^:\[\]]+)", header):
        name = optional or plain
        numbered = name.endswith("<n>")
        name = name.removesuffix("<n>")
        either = sorted({short_form(name), name.upper()}, key=len, reverse=True)
        node = "(?:" + "|".join(map(re.escape, either)) + ")" + (r"(\d*)" if numbered else "") + ":"
        parts.append(f"(?:{node})?" if optional else node)
    return re.compile("".join(parts), re.I)


class Commands:
    """The commands that an instrument knows."""

    def __init__(self) -> None:
        self._known: list[tuple[re.Pattern[str], bool, Handler]] = []
        self._found: dict[str, tuple[Handler, tuple[int, ...]] | None] = {}

    def add(self, header: str, handler: Handler) -> None:
        """Teach a command, or with ``?`` at its end a query."""
        query = header.endswith("?")
        self._known.append((_pattern(header.removesuffix("?")), query, handler))
        self._found.clear()

    def find(self, header: str) -> tuple[Handler, tuple[int, ...]] | None:
        """Find the handler of a header as it came, and the numbers in it."""
        if header not in self._found:
            if len(self._found) > 1000:
                self._found.clear()
            self._found[header] = self._search(header)
        return self._found[header]

    def _search(self, header: str) -> tuple[Handler, tuple[int, ...]] | None:
        query = header.endswith("?")
        name = header.removesuffix("?").lstrip(":") + ":"
        # The latest comes first, so that a dialect can replace a common command.
        for pattern, is_query, handler in reversed(self._known):
            if is_query is query and (match := pattern.fullmatch(name)):
                return handler, tuple(int(n or 1) for n in match.groups())
        return None


def split(message: str, mark: str) -> list[str]:
    """Split at a mark that stands outside quotes."""
    parts, start, quote = [], 0, ""
    for at, character in enumerate(message):
        if quote:
            quote = "" if character == quote else quote
        elif character in "\"'":
            quote = character
        elif character == mark:
            parts.append(message[start:at])
            start = at + 1
    parts.append(message[start:])
    return parts


def take_apart(unit: str) -> tuple[str, tuple[str, ...]]:
    """Take one message unit apart: its header, and its parameters."""
    header, _, rest = unit.strip().partition(" ") if " " in unit.strip() else (unit.strip(), "", "")
    arguments = tuple(part.strip() for part in split(rest, ",")) if rest.strip() else ()
    return header, arguments


class Status:
    """The error queue and the event register behind ``*ESR?``."""

    def __init__(self) -> None:
        self._errors: deque[int] = deque()
        self.events = POWER_ON

    def fail(self, code: int) -> None:
        """Note an error."""
        if len(self._errors) < QUEUE_LENGTH:
            self._errors.append(code)
        else:
            self._errors[-1] = -350
        hundred = -code // 100
        bits = {1: COMMAND_ERROR, 2: EXECUTION_ERROR, 3: DEVICE_ERROR, 4: QUERY_ERROR}
        self.events |= bits.get(hundred, DEVICE_ERROR)

    def next_error(self) -> int:
        """Take the oldest error out of the queue, 0 when it is empty."""
        return self._errors.popleft() if self._errors else 0

    def read_events(self) -> int:
        """Read the event register, which clears it."""
        events, self.events = self.events, 0
        return events

    def clear(self) -> None:
        """Do what ``*CLS`` does."""
        self._errors.clear()
        self.events = 0
