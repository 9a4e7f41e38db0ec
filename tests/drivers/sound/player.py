"""Play a tone into a named pipe at the pace of real time, as a sound server would hand it on.

Run as a program. Commands, one a line on stdin: `second RATIO` sets the second harmonic, `hold`
keeps what is played back, `release` hands it over in one go (and goes on), `quit` ends.
"""

from __future__ import annotations

import contextlib
import fcntl
import os
import select
import sys
import time

import numpy as np

PIPE_BYTES = 1 << 20


def main(path: str, block: int, rate_hz: float, tone_hz: float, peak: float) -> None:
    """Play until told to quit, or for two minutes."""
    pipe = os.open(path, os.O_RDWR | os.O_NONBLOCK)
    fcntl.fcntl(pipe, fcntl.F_SETPIPE_SZ, PIPE_BYTES)
    played, second, held = 0, 0.01, None
    began = time.monotonic()
    while time.monotonic() - began < 120.0:
        if select.select([sys.stdin], [], [], 0)[0]:
            word, _, value = sys.stdin.readline().strip().partition(" ")
            if word in ("quit", ""):
                return
            if word == "second":
                second = float(value)
            elif word == "hold":
                held = []
            elif word == "release":
                for old in held or ():
                    _write(pipe, old)
                held = None
            print(word, time.monotonic(), flush=True)
        data = frames(played, block, rate_hz, tone_hz, peak, second)
        if held is None:
            _write(pipe, data)
        else:
            held.append(data)
        played += block
        time.sleep(max(0.0, began + played / rate_hz - time.monotonic()))


def frames(
    first: int, count: int, rate_hz: float, tone_hz: float, peak: float, second: float
) -> bytes:
    """Give frames of two channels: the tone with its second harmonic in 24 bits, and silence."""
    angle = 2 * np.pi * tone_hz / rate_hz * np.arange(first, first + count)
    wave = peak * (np.cos(angle) + second * np.cos(2 * angle))
    both = np.zeros((count, 2), "<i4")
    both[:, 0] = np.round(wave * 2**23).astype(np.int32) << 8
    return both.tobytes()


def _write(pipe: int, data: bytes) -> None:
    with contextlib.suppress(BlockingIOError):  # nobody reads: the pipe is full of old sound
        os.write(pipe, data)


if __name__ == "__main__":
    main(sys.argv[1], int(sys.argv[2]), float(sys.argv[3]), float(sys.argv[4]), float(sys.argv[5]))
