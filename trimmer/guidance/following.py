"""While the hand turns: how far each trim has gone, and the one word for the hand.

The change of the parts since the turn began is laid on the two columns. The trim that was asked for
alone, the other alone: whichever explains the change is the one that moves.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Final

import numpy as np

from trimmer.guidance.advice import Follow, Say
from trimmer.guidance.field import Array, FieldBelief
from trimmer.guidance.seen import Seen
from trimmer.guidance.words import TRIMS

STILL_S: Final = 0.6
"""A reading unchanged for so long is still, seconds."""
FIRST_LAG_S: Final = 0.25
"""Lag of a person from word to hand before it is known, seconds (a common figure, no source)."""
SLOW_S: Final = 0.7
"""`slow` is said when the target is nearer than this many seconds."""
BENT: Final = 0.2
"""A change may bend away from its column by this share of itself."""


@dataclass(slots=True)
class Lag:
    """A person's lag from `stop` to the hand's rest, seconds, learned from overshoot."""

    mean_s: float = FIRST_LAG_S
    count: float = 2.0

    def learn(self, lag_s: float) -> None:
        """Take one overshoot in."""
        self.count += 1.0
        self.mean_s += (min(max(lag_s, 0.0), 1.5) - self.mean_s) / self.count


@dataclass(slots=True)
class Following:
    """One turn being watched."""

    turn: int
    trim: int
    asked: float
    """Signed share of the travel asked for, without the play."""
    base: Seen
    here: Array
    belief: FieldBelief
    known: tuple[bool, bool]
    lag: Lag
    times: list[float] = field(default_factory=list)
    ways: list[float | None] = field(default_factory=list)
    seen: list[Seen] = field(default_factory=list)
    stop_said: tuple[float, float, float] | None = None
    """Time, way and speed when `stop` was first said."""
    moved: bool = False
    wrong: int = 0

    def take(self, reading: Seen, time_s: float) -> Follow:
        """Take a live reading."""
        self.times.append(time_s)
        self.seen.append(reading)
        size = min(reading.parts.size, self.base.parts.size)
        change = reading.parts[:size] - self.base.parts[:size]
        variance = reading.variance[:size] + self.base.variance[:size]
        self.moved = self.moved or _stands_out(change, variance)
        way, say = self._judge(change, variance)
        self.ways.append(way)
        still = self.moved and self._still()
        if say is None:
            say = self._pace(way, time_s)
        if still:
            say = "stop" if say in ("stop", "slow") else say
            self._learn_lag()
        share = None if way is None else way / self.asked
        return Follow(self.turn, TRIMS[self.trim], share, say, still, reading.thd)

    def _judge(self, change: Array, variance: Array) -> tuple[float | None, Say | None]:
        """Give the way made by the asked trim, and a word where the hand errs."""
        columns = self.belief.columns(self.here)[:, : change.size]
        own, misfit = _explain(change, variance, columns[self.trim])
        if not self.moved:
            return (0.0 if self.known[self.trim] else None), "turn"
        if not self.known[self.trim]:
            if self.known[1 - self.trim]:
                _, other = _explain(change, variance, columns[1 - self.trim])
                if _is_clear(change, variance) and other < 0.05:
                    return None, self._wrong("wrong-trim")
            return None, None
        if self.known[1 - self.trim]:
            _, other = _explain(change, variance, columns[1 - self.trim])
            if misfit > BENT**2 and other < 0.5 * misfit:
                return own, self._wrong("wrong-trim")
        elif misfit > 0.3 and _is_clear(change, variance):
            return own, self._wrong("wrong-trim")
        if own * self.asked < 0.0 and misfit < 0.5:
            return own, self._wrong("wrong-way")
        self.wrong = 0
        return own, None

    def _wrong(self, say: Say) -> Say | None:
        self.wrong += 1
        return say if self.wrong >= 2 else None

    def _pace(self, way: float | None, time_s: float) -> Say:
        if way is None:
            return "turn"
        left = (self.asked - way) * np.sign(self.asked)
        speed = self._speed()
        if left <= max(0.0, speed) * self.lag.mean_s:
            if self.stop_said is None:
                self.stop_said = (time_s, way, speed)
            return "stop"
        if left <= max(0.0, speed) * (self.lag.mean_s + SLOW_S):
            return "slow"
        return "turn"

    def _speed(self) -> float:
        """Shares of the travel a second, in the asked sense, over the last few readings."""
        recent = [
            (t, w) for t, w in zip(self.times[-4:], self.ways[-4:], strict=True) if w is not None
        ]
        if len(recent) < 2 or recent[-1][0] <= recent[0][0]:
            return 0.0
        return float(
            np.sign(self.asked) * (recent[-1][1] - recent[0][1]) / (recent[-1][0] - recent[0][0])
        )

    def _still(self) -> bool:
        if self.times[-1] - self.times[0] < STILL_S:
            return False
        size = self.base.parts.size
        recent = [
            s for s, t in zip(self.seen, self.times, strict=True) if self.times[-1] - t <= STILL_S
        ]
        if len(recent) < 3:
            return False
        first, last = recent[0], recent[-1]
        size = min(first.parts.size, last.parts.size)
        return not _stands_out(
            last.parts[:size] - first.parts[:size], last.variance[:size] + first.variance[:size]
        )

    def _learn_lag(self) -> None:
        if self.stop_said is None or self.ways[-1] is None:
            return
        _, way, speed = self.stop_said
        if speed > 1e-4:
            self.lag.learn(abs(self.ways[-1] - way) / speed)
        self.stop_said = None


def _explain(change: Array, variance: Array, column: Array) -> tuple[float, float]:
    """Way along one column, and the share of the squared change it leaves."""
    weight = 1.0 / variance
    strength = float(column @ (weight * column))
    if strength == 0.0:
        return 0.0, 1.0
    way = float(column @ (weight * change)) / strength
    left = change - way * column
    total = float(change @ change)
    return way, float(left @ left) / total if total > 0.0 else 1.0


def _stands_out(change: Array, variance: Array) -> bool:
    """Whether a change is no chance: squared length in sigmas far out for its number of parts."""
    n = change.size
    return float(np.sum(change**2 / variance)) > n + 6.0 * float(np.sqrt(2.0 * n))


def _is_clear(change: Array, variance: Array) -> bool:
    """Whether the change is large enough for its direction to be read within some per cent."""
    return float(change @ change) > 400.0 * float(np.sum(variance)) / 4.0
