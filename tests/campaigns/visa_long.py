"""Ten thousand frames over each link: memory, descriptors and threads stay as they were.

Run ``python -m tests.campaigns.visa_long [frames] [--faults]``. With ``--faults``, every
twentieth frame meets a fault drawn at random; each frame that comes must be the one the instrument
meant since the capture was asked for, and no capture may outlast its time-out by more than 1 s.
"""

from __future__ import annotations

import gc
import os
import random
import sys
import threading
import time
from pathlib import Path

import numpy as np

from drivers.contract import CaptureRequest, SourceError
from drivers.visa import open_instrument
from tests.benchmarks.visa_frames import LINKS, Ready
from tests.drivers.visa.servers.speakers import TenField
from tests.drivers.visa.servers.wire import Fault

TIMEOUT_S = 0.6
FAULTS: list[Fault] = [
    "silence", "short-block", "long-block", "wrong-digits", "indefinite", "huge", "drop",
    "reset", "late", "garbage",
]  # fmt: skip


def memory_mib() -> float:
    """Resident memory of this process, instrument included."""
    pages = int(Path("/proc/self/statm").read_text(encoding="ascii").split()[1])
    return pages * os.sysconf("SC_PAGE_SIZE") / 2**20


def state() -> str:
    """Memory, descriptors and threads."""
    gc.collect()
    descriptors = len(os.listdir("/proc/self/fd"))
    return f"{memory_mib():6.1f} MiB, {descriptors} descriptors, {threading.active_count()} threads"


def steady(name: str, frames: int) -> None:
    """Frames one after the other, nothing going wrong."""
    with (
        LINKS[name](Ready(10_000)) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
    ):
        begun = time.monotonic()
        for number in range(frames):
            source.capture()
            if number in (frames // 10, frames // 2, frames - 1):
                print(f"  {name:7} after {number + 1:6} frames: {state()}")
        print(f"  {name:7} {frames / (time.monotonic() - begun):.0f} frames/s")


def faulty(name: str, frames: int) -> None:
    """Frames with faults among them."""
    rng = random.Random(frames)
    brain = TenField(points=200)
    longest, sound, failed = 0.0, 0, 0
    with (
        LINKS[name](brain) as server,
        open_instrument(server.resource, dialect="ten-field") as source,
    ):
        for number in range(frames):
            if number % 20 == 19:
                server.faults.put(rng.choice(FAULTS))
            armed, begun = brain.armed, time.monotonic()
            try:
                taken = source.capture(CaptureRequest(timeout_s=TIMEOUT_S))
            except SourceError:
                failed += 1
            else:
                sound += 1
                assert brain.armed > armed, "an old frame passed for a new one"
                meant = np.array([float(volts) for volts in brain.meant])
                assert np.abs(taken.samples - meant).max() < 1e-9
            longest = max(longest, time.monotonic() - begun)
        assert longest < TIMEOUT_S + 1.0
        print(
            f"  {name:7} {sound} sound, {failed} failed, longest {longest:.2f} s of "
            f"{TIMEOUT_S} s, {server.connections} connections: {state()}"
        )


def main() -> None:
    """Run the campaign."""
    numbers = [int(word) for word in sys.argv[1:] if word.isdigit()]
    print(f"at the start: {state()}")
    for name in LINKS:
        if "--faults" in sys.argv:
            faulty(name, numbers[0] if numbers else 2000)
        else:
            steady(name, numbers[0] if numbers else 10_000)
    print(f"at the end: {state()}")


if __name__ == "__main__":
    main()
