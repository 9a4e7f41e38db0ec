"""What the tests of sound know of the loop-back they run on."""

from __future__ import annotations

import subprocess
from dataclasses import dataclass

RATE_HZ = 48000.0
TONE_HZ = 1000.3
PEAK = 0.5


@dataclass(frozen=True, slots=True)
class Loop:
    """A running loop-back."""

    name: str
    """The device's name."""
    process: subprocess.Popen[str]
    """The player."""

    def say(self, words: str) -> float:
        """Command the player; gives the monotonic time at which it obeyed."""
        assert self.process.stdin is not None
        assert self.process.stdout is not None
        self.process.stdin.write(words + "\n")
        self.process.stdin.flush()
        return float(self.process.stdout.readline().split()[1])
