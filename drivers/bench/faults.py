"""What the simulated instrument can be told to get wrong, by name."""

from __future__ import annotations

import threading
from dataclasses import dataclass
from math import inf

import numpy as np

from drivers.bench.scpi import Block, Reply

FAULTS = {
    "silence": "answers nothing any more",
    "slow-drip": "waveforms come in drops, 400 bytes a second",
    "short-block": "waveforms end 100 bytes before their count, and nothing follows",
    "long-block": "waveforms go on 37 bytes past their count",
    "wrong-digits": "the block's header says one digit too few",
    "indefinite-block": "waveforms come as blocks without a count",
    "drop": "the connection is closed in the middle of a waveform",
    "reset": "the connection is reset in the middle of a waveform",
    "late-answer": "waveforms come late",
    "error-queue": "waveforms are refused, with an error in the queue",
    "reboot": "restarts in the middle of a session: connections lost, settings forgotten",
    "garbage": "answers are random bytes",
    "stale": "arming does nothing: the frame of before is handed out again",
    "clipped": "the signal is larger than the range",
    "low-level": "the signal uses a twentieth of the range",
    "no-signal": "nothing but noise at the input",
}
"""Every fault, and what it does."""

EVERY_ANSWER = {"silence", "garbage"}
"""Faults of every answer; the other faults of the wire concern waveforms only."""
GAINS = {"clipped": 1.6, "low-level": 0.05, "no-signal": 0.0}
"""What the signal goes through before the input."""
STARTS_AFTER = {"reboot": 8}
"""Waveforms handed out before a fault given from the start shows: a session must be under way."""

DRIP_BYTES, DRIP_S = 20, 0.05
LATE_S = 7.0
SHORT_BY, LONG_BY = 100, 37


def check(name: str) -> str:
    """Check a fault's name.

    Raises
    ------
    ValueError
        There is no such fault.
    """
    if name not in FAULTS:
        raise ValueError(f"there is no fault {name!r}; there are: {', '.join(sorted(FAULTS))}")
    return name


@dataclass(frozen=True, slots=True)
class Delivery:
    """How an answer goes out on the wire."""

    data: bytes
    """What is sent."""
    drip: bool = False
    """True to send it in drops."""
    late_s: float = 0.0
    """Wait before it is sent."""
    then: str = ""
    """`drop`, `reset` or `reboot` after it, or nothing."""


class FaultSwitch:
    """The fault in force, and for how many waveforms (or answers) still.

    Parameters
    ----------
    seed
        Of the garbage.
    """

    def __init__(self, seed: int) -> None:
        self._lock = threading.Lock()
        self._rng = np.random.default_rng((seed, 3))
        self._name: str | None = None
        self._left = inf
        self._after = 0
        self._late_s = LATE_S

    def set(self, name: str | None, times: int | None, after: int, late_s: float) -> None:
        """Put a fault in force; see `Bench.fail`."""
        if name is not None:
            check(name)
        if times is not None and times < 1:
            raise ValueError(f"a fault shows at least once, not {times} times")
        with self._lock:
            self._name = name
            self._left = inf if times is None else times
            self._after = after
            self._late_s = late_s
            if name == "reboot":
                self._left = 1  # comes up sound

    def active(self) -> str | None:
        """Name the fault in force now."""
        with self._lock:
            return self._name if self._after <= 0 else None

    def count(self, *, waveform: bool) -> str | None:
        """Count an answer, and say which fault it suffers.

        Parameters
        ----------
        waveform
            True where the answer carries a waveform.
        """
        with self._lock:
            name = self._name
            if name is None:
                return None
            if self._after > 0:
                self._after -= waveform
                return None
            if not waveform and name not in EVERY_ANSWER:
                return None
            self._left -= 1
            if self._left <= 0:
                self._name = None
            return name

    def spoil(self, replies: list[Reply], whole: bytes) -> Delivery:
        """Give an answer the fault in force.

        Parameters
        ----------
        replies
            The answers of one message.
        whole
            The same, as a sound instrument would send it.
        """
        block = next((reply for reply in replies if isinstance(reply, Block)), None)
        match self.count(waveform=block is not None):
            case "silence":
                return Delivery(b"")
            case "garbage":
                return Delivery(self._rng.bytes(max(1, min(len(whole), 4096))) + b"\n")
            case "slow-drip":
                return Delivery(whole, drip=True)
            case "late-answer":
                return Delivery(whole, late_s=self._late_s)
            case "drop" | "reset" | "reboot" as name:
                return Delivery(whole[: len(whole) // 2], then=name)
            case "short-block" | "long-block" | "wrong-digits" | "indefinite-block" as name:
                assert block is not None
                return Delivery(_misshapen(name, block, self._rng))
        return Delivery(whole)


def _misshapen(name: str, block: Block, rng: np.random.Generator) -> bytes:
    data, count = block.payload, len(block.payload)
    sound = bytes(block)
    if name == "short-block":
        return sound[: max(len(sound) - len(block.after) - SHORT_BY, 0)]
    if name == "long-block":
        head = sound[: len(sound) - len(block.after)]
        return head + rng.bytes(LONG_BY) + block.after + b"\n"
    if name == "indefinite-block":
        return block.before + b"#0" + data + b"\n"
    digits = len(str(count))
    return block.before + f"#{max(digits - 1, 1)}{count}".encode() + data + block.after + b"\n"
