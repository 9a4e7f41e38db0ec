"""The far end of the bench's socket, written for the tests with nothing but a socket."""

from __future__ import annotations

import socket
from types import TracebackType
from typing import Self

import numpy as np
from numpy.typing import NDArray

from drivers.bench import Bench


class Talker:
    """Says lines to a bench and reads what comes."""

    def __init__(self, bench: Bench, timeout_s: float = 5.0) -> None:
        self.socket = socket.create_connection(("127.0.0.1", bench.port), timeout=timeout_s)
        self._kept = b""

    def say(self, *messages: str) -> None:
        """Send messages, each a line."""
        self.socket.sendall("".join(f"{message}\n" for message in messages).encode())

    def line(self) -> str:
        """Read one line."""
        while b"\n" not in self._kept:
            self._more()
        line, _, self._kept = self._kept.partition(b"\n")
        return line.decode("latin-1")

    def ask(self, message: str) -> str:
        """Send one message and read its line."""
        self.say(message)
        return self.line()

    def bytes(self, count: int) -> bytes:
        """Read exactly so many bytes."""
        while len(self._kept) < count:
            self._more()
        taken, self._kept = self._kept[:count], self._kept[count:]
        return taken

    def block(self, message: str, after: bytes = b"\n") -> tuple[bytes, str]:
        """Ask for a block: its payload, and the text before it."""
        self.say(message)
        text = b""
        while (byte := self.bytes(1)) != b"#":
            text += byte
        count = int(self.bytes(int(self.bytes(1))))
        payload = self.bytes(count)
        assert self.bytes(len(after)) == after
        return payload, text.decode("latin-1")

    def silent(self, seconds: float = 0.3) -> bool:
        """Say whether nothing comes for so long."""
        self.socket.settimeout(seconds)
        try:
            self._more()
        except TimeoutError:
            return True
        finally:
            self.socket.settimeout(5.0)
        return False

    def _more(self) -> None:
        came = self.socket.recv(1 << 20)
        if not came:
            raise ConnectionAbortedError("the bench hung up")
        self._kept += came

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        value: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.socket.close()


def meant(bench: Bench) -> NDArray[np.float64]:
    """What the digitiser means by the frame in its memory, volts."""
    return bench.instrument.frame().volts()
