"""What goes wrong on a wire: the same faults for every link."""

from __future__ import annotations

import socket
import struct
import threading
import time
from dataclasses import dataclass, field
from typing import Literal

Fault = Literal[
    "none",
    "silence",
    "slow-drip",
    "short-block",
    "long-block",
    "wrong-digits",
    "indefinite",
    "huge",
    "drop",
    "reset",
    "late",
    "garbage",
]

LATE_S = 0.7


class Dropped(Exception):
    """The server hangs up on purpose."""


@dataclass(slots=True)
class Faults:
    """The fault in force for replies that carry a block, and for how many of them."""

    kind: Fault = "none"
    left: int = 0
    shown: int = 0
    lock: threading.Lock = field(default_factory=threading.Lock)

    def put(self, kind: Fault, times: int = 1) -> None:
        """Put a fault in force."""
        with self.lock:
            self.kind, self.left, self.shown = kind, times, 0

    def take(self, reply: bytes) -> Fault:
        """Give the fault this reply suffers."""
        with self.lock:
            of_a_block = b"#" in reply and len(reply) > 100
            if self.left <= 0 or of_a_block is (self.kind == "garbage"):
                return "none"
            self.left -= 1
            self.shown += 1
            return self.kind


def misshapen(fault: Fault, reply: bytes) -> bytes:
    """Give the reply a malformed block, or too many lines, where that is the fault."""
    if fault == "garbage":
        return b"\x9c\x00 7\n" + reply[::-1]
    if fault not in ("short-block", "long-block", "wrong-digits", "indefinite", "huge"):
        return reply
    at = reply.index(b"#")
    before, digits = reply[:at], int(chr(reply[at + 1]))
    payload = reply[at + 2 + digits :]
    match fault:
        case "short-block":
            return reply[:-40]
        case "long-block":
            return reply + bytes(range(65, 102))
        case "wrong-digits":
            return before + f"#{digits + 1}".encode() + reply[at + 2 :]
        case "indefinite":
            return before + b"#0" + payload
    return before + b"#9" + b"999999999" + payload


def put_on(connection: socket.socket, raw: bytes, fault: Fault) -> None:
    """Send bytes as a fault will have it."""
    match fault:
        case "silence":
            return
        case "late":
            time.sleep(LATE_S)
            connection.sendall(raw)
        case "slow-drip":
            for at in range(0, len(raw), 8):
                connection.sendall(raw[at : at + 8])
                time.sleep(0.05)
        case "drop":
            connection.sendall(raw[: len(raw) // 2])
            raise Dropped
        case "reset":
            connection.sendall(raw[: len(raw) // 2])
            linger = struct.pack("ii", 1, 0)
            connection.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, linger)
            raise Dropped
        case _:
            connection.sendall(raw)
