"""A scripted stand-in for `sounddevice`, for what no loop-back can do: unplugging, missing, busy."""

from __future__ import annotations

import threading
import time
from dataclasses import dataclass, field
from types import SimpleNamespace
from typing import Any

import numpy as np


class PortAudioError(Exception):
    """As the real one: words and a code."""


@dataclass
class Status:
    """Flags of a callback."""

    input_overflow: bool = False


@dataclass
class FakeSound:
    """The module, with a tone of whole numbers on the first of its channels."""

    devices: list[dict[str, Any]]
    rates: tuple[float, ...] = (48000.0,)
    refusal: tuple[str, int] | None = None
    plugged: bool = True
    overflow_next: bool = False
    peak: float = 0.25
    bits: int = 16
    opened: list[Any] = field(default_factory=list)
    PortAudioError: type[Exception] = PortAudioError

    def __post_init__(self) -> None:
        self.default = SimpleNamespace(device=(0, 0))

    def query_devices(self) -> list[dict[str, Any]]:
        return self.devices if self.plugged else []

    def check_input_settings(self, *, samplerate: float, **_: object) -> None:
        if samplerate not in self.rates:
            raise PortAudioError("Invalid sample rate", -9997)

    def _terminate(self) -> None:
        pass

    _initialize = _terminate

    def InputStream(self, **wanted: Any) -> Stream:
        if self.refusal:
            raise PortAudioError(*self.refusal)
        stream = Stream(self, **wanted)
        self.opened.append(stream)
        return stream


class Stream:
    """Brings blocks from a thread at the pace of sound, until unplugged."""

    latency = 0.01

    def __init__(self, module: FakeSound, *, channels, samplerate, callback, **_: object) -> None:
        self._module, self._channels, self._rate, self._callback = (
            module, channels, samplerate, callback,
        )  # fmt: skip
        self._stop = threading.Event()
        self._thread = threading.Thread(target=self._play, daemon=True)

    @property
    def active(self) -> bool:
        return self._module.plugged and not self._stop.is_set()

    def start(self) -> None:
        self._thread.start()

    def close(self, ignore_errors: bool) -> None:
        self._stop.set()
        self._thread.join(2.0)
        if not self._module.plugged:
            raise PortAudioError("Invalid stream pointer", -9988)

    def _play(self) -> None:
        made, began = 0, time.monotonic()
        while not self._stop.wait(0.005) and self._module.plugged:
            due = int((time.monotonic() - began) * self._rate) - made
            angle = 2 * np.pi * 1000.0 / self._rate * np.arange(made, made + due)
            top = 2 ** (self._module.bits - 1)
            values = np.clip(np.round(self._module.peak * top * np.cos(angle)), -top, top - 1)
            block = np.zeros((due, self._channels), np.int32)
            block[:, 0] = values.astype(np.int64) << (32 - self._module.bits)
            overflow, self._module.overflow_next = self._module.overflow_next, False
            self._callback(block, due, None, Status(overflow))
            made += due
