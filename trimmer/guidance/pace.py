"""The pace of a hand: when to say *slow* and *stop*, by the person's own lag, and when it is still."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Final, Literal

FIRST_LAG_S: Final = 0.25
"""Lag from word to hand before it is known, seconds (a common figure, no source)."""
LONGEST_LAG_S: Final = 1.5
"""No overshoot is put down to more lag than this."""
SLOW_S: Final = 0.7
"""*Slow* is said when the target is nearer than this many seconds, the lag not counted."""
SLOW_SHARE: Final = 0.12
"""*Slow* is said in any case over the last share of the way."""
CREEP_LEARNED: Final = 0.4
"""Share of an overshoot that is learned from each turn."""
MOST_CREEP: Final = 0.012
"""No more creep is believed in, share of the travel: 3 degrees of a single-turn trim."""
CLEAR_SPEED: Final = 0.03
"""Speed from which on an overshoot says what the lag is, shares of the travel a second."""
SPEED_S: Final = 0.45
"""Speed is taken over so many seconds."""


@dataclass(slots=True)
class Lag:
    """A person's lag from *stop* to the hand's rest, seconds, learned from overshoot."""

    mean_s: float = FIRST_LAG_S
    count: float = 2.0
    """How many overshoots the mean counts for."""
    creep: float = 0.0
    """How far a turn goes beyond its target for all that, share of the travel: a small turn is half made
    before it can be seen."""

    def overshot(self, beyond: float) -> None:
        """Take in by how much a turn went beyond its target (negative: short of it)."""
        self.creep += CREEP_LEARNED * (min(max(beyond, -MOST_CREEP), MOST_CREEP))
        self.creep = min(max(self.creep, 0.0), MOST_CREEP)

    def learn(self, lag_s: float) -> None:
        """Take one overshoot in; older ones fade, people warm up."""
        self.count = min(self.count + 1.0, 6.0)
        self.mean_s += (min(max(lag_s, 0.0), LONGEST_LAG_S) - self.mean_s) / self.count


@dataclass(slots=True)
class Pace:
    """The way a trim has gone over time, towards a target."""

    lag: Lag
    times: list[float] = field(default_factory=list)
    ways: list[float] = field(default_factory=list)
    """Way in the asked sense, shares of the travel."""
    target: float = 0.0
    """Way to go in all, as last worked out."""
    stopped_at: tuple[float, float] | None = None
    """Way and speed when *stop* was first said."""

    def say(self, way: float, target: float, time_s: float) -> Literal["turn", "slow", "stop"]:
        """Take where the trim is, and give the word."""
        self.times.append(time_s)
        self.ways.append(way)
        speed = max(0.0, self.speed())
        self.target = target
        left = target - way - self.lag.creep
        if left <= speed * self.lag.mean_s:
            if self.stopped_at is None:
                self.stopped_at = way, speed
            return "stop"
        if left <= speed * (self.lag.mean_s + SLOW_S) or left <= SLOW_SHARE * target:
            return "slow"
        return "turn"

    def speed(self) -> float:
        """Shares of the travel a second, over the last few readings."""
        since = self.times[-1] - SPEED_S
        first = next(i for i, t in enumerate(self.times) if t >= since)
        if first == len(self.times) - 1:
            first = max(0, first - 1)
        passed = self.times[-1] - self.times[first]
        return (self.ways[-1] - self.ways[first]) / passed if passed > 0.0 else 0.0

    def rest(self) -> None:
        """Learn the lag, and what it leaves, once the hand is still."""
        if self.stopped_at is None:
            return
        way, speed = self.stopped_at
        if speed < CLEAR_SPEED:
            self.lag.overshot(self.ways[-1] - self.target)
        else:
            self.lag.learn((self.ways[-1] - way) / speed)
        self.stopped_at = None
