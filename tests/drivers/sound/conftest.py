"""A real loop-back for sound: ALSA's `file` plug-in reads a pipe into which a player plays."""

from __future__ import annotations

import collections
import ctypes.util
import os
import subprocess
import sys
import threading
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.drivers.sound import player
from tests.drivers.sound.loopback import PEAK, RATE_HZ, TONE_HZ, Loop

CONFIG = """\
</usr/share/alsa/alsa.conf>
pcm.trimloop {{
  type file
  slave.pcm "null"
  file "/dev/null"
  infile "{infile}"
  format "raw"
}}
"""


@pytest.fixture(scope="session")
def alsa_loop(tmp_path_factory: pytest.TempPathFactory) -> Iterator[tuple[Path, int]]:
    """Set up the ALSA device; gives its pipe and the frames PortAudio takes at a time."""
    if not sys.platform.startswith("linux") or ctypes.util.find_library("asound") is None:
        pytest.skip("the loop-back needs ALSA (Debian: libasound2)")
    sounddevice = pytest.importorskip("sounddevice", exc_type=(ImportError, OSError))
    folder = tmp_path_factory.mktemp("alsa")
    config, pipe = folder / "asound.conf", folder / "played"
    plain = folder / "plain.raw"
    plain.write_bytes(bytes(1 << 22))
    before = os.environ.get("ALSA_CONFIG_PATH")
    os.environ["ALSA_CONFIG_PATH"] = str(config)
    try:
        config.write_text(CONFIG.format(infile=plain))
        block = _frames_at_a_time(sounddevice)
        os.mkfifo(pipe)
        config.write_text(CONFIG.format(infile=pipe))
        yield pipe, block
    finally:
        if before is None:
            del os.environ["ALSA_CONFIG_PATH"]
        else:
            os.environ["ALSA_CONFIG_PATH"] = before


def _frames_at_a_time(sounddevice: object) -> int:
    """Find PortAudio's period. Blocks of just that many frames never part a read."""
    sounddevice._terminate()
    sounddevice._initialize()
    seen: collections.Counter[int] = collections.Counter()
    enough = threading.Event()

    def count(_block: object, frames: int, *_: object) -> None:
        seen[frames] += 1
        if seen.total() >= 50:
            enough.set()

    with sounddevice.InputStream(
        device="trimloop", channels=2, samplerate=RATE_HZ, dtype="int32", callback=count
    ):
        assert enough.wait(5.0)
    (block,) = seen
    return block


@pytest.fixture
def loop(alsa_loop: tuple[Path, int]) -> Iterator[Loop]:
    """A tone with 1 % of second harmonic, playing."""
    pipe, block = alsa_loop
    words = [sys.executable, player.__file__, pipe, block, RATE_HZ, TONE_HZ, PEAK]
    process = subprocess.Popen(
        [str(word) for word in words], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    )
    try:
        running = Loop("trimloop", process)
        running.say("second 0.01")
        import sounddevice

        sounddevice._terminate()
        sounddevice._initialize()
        yield running
    finally:
        process.terminate()
        process.communicate(timeout=5.0)
