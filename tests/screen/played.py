"""A small session that watches its hand: run as a program in a real terminal, or inside a test.

``python -m tests.screen.played [--real-hand]`` shows it on the screen and gives the exit status.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field

from tests.screen.scripted import CONFIRMING, FINISHED, OPENED, advised, followed, measured
from trimmer.guidance.advice import Say, Sense, Trim
from trimmer.reports import Advised, Report, Word
from trimmer.screen import run_tune

ASKED: tuple[tuple[Trim, Sense, float], ...] = (
    ("upper", "clockwise", 0.05),
    ("lower", "counter-clockwise", 0.04),
)
"""The turns it asks for."""
FRAME_S = 0.04


@dataclass
class Played:
    """Asks for two turns and follows them; both ends of it, the session and the simulated trims."""

    at: dict[Trim, float] = field(default_factory=lambda: {"upper": 0.0, "lower": 0.0})
    """Where the trims are, turns."""
    said: list[Say] = field(default_factory=list)
    """Words said to the hand, each when it changed."""
    heard: list[Word] = field(default_factory=list)
    """Words of the person."""
    moved_at: float = field(default_factory=time.monotonic)
    """When a trim was last turned."""

    def turn(self, trim: Trim, turns: float) -> None:
        """Turn a trim."""
        self.at[trim] += turns
        self.moved_at = time.monotonic()

    def say(self, word: Word) -> None:
        """Take a word."""
        self.heard.append(word)

    def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
        """Ask for the turns, follow them, end with a sheet."""
        yield OPENED
        yield measured(0, 0.05, -0.04)
        for number, (trim, sense, turns) in enumerate(ASKED):
            yield advised(number, trim, sense, turns)
            yield from self._followed(advised(number, trim, sense, turns), stop)
            if stop():
                return
            yield measured(number + 1, 0.0, -0.04 if number == 0 else 0.0)
        yield CONFIRMING
        time.sleep(0.3)
        yield measured(len(ASKED), 0.0, 0.0)
        yield FINISHED

    def _followed(self, asked: Advised, stop: Callable[[], bool]) -> Iterator[Report]:
        """Give live readings until the turn counts as made."""
        advice = asked.advice
        begun = dict(self.at)
        sign = 1.0 if advice.sense == "clockwise" else -1.0
        other: Trim = "lower" if advice.trim == "upper" else "upper"
        while not stop():
            share = sign * (self.at[advice.trim] - begun[advice.trim]) / advice.turns
            strayed = abs(self.at[other] - begun[other]) > 0.004
            say = self._word(share, strayed)
            still = share > 0.9 and time.monotonic() - self.moved_at > 0.5
            yield followed(share, say, advice.turn, advice.trim, still=still)
            if still:
                return
            time.sleep(FRAME_S)

    def _word(self, share: float, strayed: bool) -> Say:
        if strayed:
            say: Say = "wrong-trim"
        elif share < -0.05:
            say = "wrong-way"
        else:
            say = "stop" if share > 0.95 else "slow" if share > 0.75 else "turn"
        if not self.said or self.said[-1] != say:
            self.said.append(say)
        return say


if __name__ == "__main__":
    session = Played()
    real = "--real-hand" in sys.argv
    status = run_tune(session, source="played", hand=None if real else session, travel=0.75)
    print(f"ended with {status} after {' '.join(session.heard) or 'no word'}")
    sys.exit(status)
