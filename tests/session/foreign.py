"""A bare instrument of the tests: the ten-field preamble and hardly anything else, on loopback.

It shares no code with the drivers or the simulated bench. What it does not know it puts in its error
queue where it has one, and never answers; it sends one byte a sample and frames only when armed.
"""

from __future__ import annotations

import socket
import threading
import time
from typing import Literal, Self

import numpy as np

from tests.session.sources import INTERVAL_S, StraightUnit

CODE_V = 0.04


class BareInstrument:
    """Serves a straight unit's waveform.

    Parameters
    ----------
    unit
        The unit; the test turns its trims.
    has_queue
        False for an instrument without an error queue.
    arms_by
        The one command that it takes for a new frame.
    says_text
        True where it sends samples as text too.
    slow_s
        Seconds it takes over each answer.
    """

    def __init__(
        self,
        unit: StraightUnit,
        *,
        has_queue: bool = True,
        arms_by: Literal[":DIGITIZE", ":SINGLE"] = ":DIGITIZE",
        says_text: bool = False,
        slow_s: float = 0.0,
    ) -> None:
        self.unit = unit
        self.frames = 0
        self._has_queue = has_queue
        self._arms_by = arms_by
        self._says_text = says_text
        self._slow_s = slow_s
        self._as_text = False
        self._errors: list[str] = []
        self._codes = np.zeros(0, np.uint8)
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.resource = f"TCPIP::127.0.0.1::{self._listener.getsockname()[1]}::SOCKET"
        threading.Thread(target=self._accept, daemon=True).start()

    def _accept(self) -> None:
        while True:
            try:
                connection, _ = self._listener.accept()
            except OSError:
                return
            threading.Thread(target=self._serve, args=(connection,), daemon=True).start()

    def _serve(self, connection: socket.socket) -> None:
        with connection, connection.makefile("rb") as lines:
            try:
                for line in lines:
                    for message in line.decode("ascii").strip().split(";"):
                        if (reply := self._answer(message.strip().upper())) is not None:
                            time.sleep(self._slow_s)
                            connection.sendall(reply)
            except OSError:
                return

    def _answer(self, message: str) -> bytes | None:
        words = message if message.startswith((":", "*")) else f":{message}"
        match words.split(" ")[0]:
            case "*IDN?":
                return b"EXAMPLE WORKS,BARE SCOPE,7,0.1\n"
            case "*OPC?":
                return b"1\n"
            case "*CLS":
                self._errors.clear()
            case ":SYSTEM:ERROR?" | ":SYST:ERR?" if self._has_queue:
                return (self._errors.pop(0) if self._errors else '0,"No error"').encode() + b"\n"
            case word if word == self._arms_by:
                volts = self.unit.samples()
                self._codes = np.clip(np.round(volts / CODE_V) + 128, 0, 255).astype(np.uint8)
                self.frames += 1
            case ":WAVEFORM:SOURCE" | ":WAV:SOUR" | ":STOP":
                pass
            case ":WAVEFORM:FORMAT" if "WORD" in words:
                pass  # ignored without a word: it takes only bytes, and text where it can
            case ":WAVEFORM:FORMAT":
                self._as_text = self._says_text and "ASC" in words
            case ":WAVEFORM:PREAMBLE?" | ":WAV:PRE?":
                axes = f"{INTERVAL_S:.6E},0.0,0,{CODE_V:.6E},0.0,128"
                return f"{4 * self._as_text},0,{self._codes.size},1,{axes}\n".encode()
            case ":WAVEFORM:DATA?" | ":WAV:DATA?":
                if self._as_text:
                    volts = (self._codes.astype(float) - 128) * CODE_V
                    return ",".join(f"{value:.5E}" for value in volts).encode() + b"\n"
                data = self._codes.tobytes()
                return b"#8%08d" % len(data) + data + b"\n"
            case _:
                self._errors.append('-113,"Undefined header"')
        return None

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self._listener.close()
