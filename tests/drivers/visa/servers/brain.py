"""Instruments of the tests: what they mean is worked out in exact fractions.

They share no code with the drivers and none with the simulated bench. Each keeps the volts it
meant by its latest frame, so that a test can hold what was read against them.
"""

from __future__ import annotations

import re
from collections import deque
from collections.abc import Callable
from fractions import Fraction

import numpy as np

IDENTITY = "EXAMPLE WORKS,SCOPE 10,SN0001,1.00"


def forms(pattern: str) -> re.Pattern[str]:
    """Compile `:WAVeform:PREamble?` into an expression for its short and long forms."""
    nodes = []
    for node in pattern.lstrip(":").split(":"):
        short = "".join(letter for letter in node if not letter.islower())
        query = "\\?" if node.endswith("?") else ""
        short, long = short.rstrip("?"), node.rstrip("?").upper()
        nodes.append(f"(?:{re.escape(long)}|{re.escape(short)}){query}")
    return re.compile(":?" + ":".join(nodes), re.IGNORECASE)


class Brain:
    """An instrument: messages in, replies out.

    Parameters
    ----------
    seed
        Of its signal.
    points
        Samples of its record.
    """

    identity = IDENTITY
    has_queue = True

    def __init__(self, seed: int = 1, points: int = 500) -> None:
        self.rng = np.random.default_rng(seed)
        self.points = points
        self.errors: deque[int] = deque()
        self.events = 0
        self.armed = 0
        self.frozen = False
        self.log: list[str] = []
        self.settings: dict[str, str] = {}
        self.codes = np.zeros(0, dtype=np.int64)
        self.meant: list[Fraction] = []
        self.interval = Fraction(1, 1_000_000)
        self.new_frame()

    # Frames --------------------------------------------------------------------------------

    def draw(self, low: int, high: int, step: int = 1) -> np.ndarray:
        """Draw codes of a sine with noise between two codes, in whole steps."""
        phase = self.rng.uniform(0.0, 6.28)
        middle, half = 0.5 * (low + high), 0.5 * (high - low)
        wave = middle + half * np.sin(0.05 * np.arange(self.points) + phase)
        codes = np.round((wave + self.rng.normal(0.0, 1.0, self.points) * step) / step)
        return np.clip(codes * step, low, high).astype(np.int64)

    def new_frame(self) -> None:
        """Take a frame: sets `codes` and `meant`."""
        raise NotImplementedError

    def mean(self, volts: Callable[[int], Fraction]) -> None:
        """Work out what each code means; every code but once."""
        values = {code: volts(code) for code in set(self.codes.tolist())}
        self.meant = [values[code] for code in self.codes.tolist()]

    def arm(self) -> None:
        """Take a new frame, unless the instrument is told to hand out the one of before."""
        self.armed += 1
        if not self.frozen:
            self.new_frame()

    # Messages ------------------------------------------------------------------------------

    def message(self, text: str) -> bytes | None:
        """Carry out one message; None where nothing is answered."""
        self.log.append(text)
        replies = [self.unit(unit.strip()) for unit in text.split(";") if unit.strip()]
        given = [reply for reply in replies if reply is not None]
        return b";".join(given) if given else None

    def unit(self, text: str) -> bytes | None:
        """Carry out one message unit."""
        head, _, argument = text.partition(" ")
        match head.upper():
            case "*IDN?":
                return self.identity.encode()
            case "*OPC?":
                return b"1"
            case "*CLS":
                self.errors.clear()
                self.events = 0
                return None
            case "*ESR?":
                events, self.events = self.events, 0
                return str(events).encode()
        if self.has_queue and forms(":SYSTem:ERRor?").fullmatch(head):
            code = self.errors.popleft() if self.errors else 0
            return f'{code:+d},"{"No error" if code == 0 else "Something"}"'.encode()
        return self.own(head, argument.strip())

    def own(self, head: str, argument: str) -> bytes | None:
        """Carry out a unit of the dialect."""
        raise NotImplementedError

    def fail(self, code: int = -113) -> None:
        """Note an error."""
        self.errors.append(code)
        self.events |= {1: 32, 2: 16, 3: 8, 4: 4}[-code // 100]

    def setting(self, head: str, argument: str, *patterns: str) -> bool | bytes:
        """Keep or give a plain setting; False where the header is none of these."""
        for pattern in patterns:
            if forms(pattern + "?").fullmatch(head):
                return self.settings.get(pattern, "0").encode()
            if forms(pattern).fullmatch(head):
                self.settings[pattern] = argument
                return True
        return False


def block(payload: bytes, digits: int | None = None) -> bytes:
    """Wrap bytes into a definite block."""
    count = str(len(payload)) if digits is None else f"{len(payload):0{digits}d}"
    return f"#{len(count)}{count}".encode() + payload


def packed(codes: np.ndarray, width: int, *, signed: bool, big: bool) -> bytes:
    """Write codes one by one, by Python's own integers."""
    order = "big" if big else "little"
    written = {c: c.to_bytes(width, order, signed=signed) for c in set(codes.tolist())}
    return b"".join(map(written.__getitem__, codes.tolist()))
