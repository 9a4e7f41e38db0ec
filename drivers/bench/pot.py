"""A trim as a screw: end stops, backlash, uneven track, sense of rotation, motion in time."""

from __future__ import annotations

from dataclasses import dataclass
from math import copysign, cos, inf, isfinite, pi, sin

RUNS = 60
"""Halvings that find a mechanical position from an electrical one: to 1e-18 of the travel."""


@dataclass(frozen=True, slots=True)
class Track:
    """How the wiper's electrical share follows its mechanical one. Both run from 0 to 1."""

    bow: float = 0.0
    """Share by which the middle runs ahead of an even track."""
    ripple: float = 0.0
    """Share of an S-shaped unevenness over the whole travel."""
    reverse: bool = False
    """True where clockwise leads to the electrical end 0."""

    def __post_init__(self) -> None:
        slopes = [
            1.0 + pi * self.bow * cos(pi * m / 50) + 2 * pi * self.ripple * cos(2 * pi * m / 50)
            for m in range(51)
        ]
        if min(slopes) < 0.2:
            raise ValueError("the track is so uneven that it stands still or runs back")

    def electrical(self, mechanical: float) -> float:
        """Share of the track behind the wiper at a mechanical position (0 to 1, clockwise)."""
        at = 1.0 - mechanical if self.reverse else mechanical
        return at + self.bow * sin(pi * at) + self.ripple * sin(2.0 * pi * at)

    def mechanical(self, electrical: float) -> float:
        """Invert `electrical`, by halving: the track is monotone."""
        low, high = 0.0, 1.0
        for _ in range(RUNS):
            middle = 0.5 * (low + high)
            if (self.electrical(middle) < electrical) is not self.reverse:
                low = middle
            else:
                high = middle
        return 0.5 * (low + high)


class Screw:
    """A trim's screw and the wiper it drags along.

    The wiper follows the screw with play: on reversal the screw first turns through the backlash.
    At an end the wiper stands, and the screw with it.

    Parameters
    ----------
    position
        Where the wiper stands at first, share of the mechanical travel, clockwise positive.
    backlash
        Whole play, share of the travel.
    travel_turns
        Turns of the screw over the whole travel.
    """

    def __init__(self, position: float, *, backlash: float, travel_turns: float) -> None:
        if not 0.0 <= position <= 1.0:
            raise ValueError(f"a wiper stands between 0 and 1, not at {position}")
        if not 0.0 <= backlash < 0.5:
            raise ValueError(f"backlash is a share of the travel below 0.5, not {backlash}")
        if not (isfinite(travel_turns) and travel_turns > 0.0):
            raise ValueError(f"the travel is a positive number of turns, not {travel_turns}")
        self.travel_turns = travel_turns
        self._backlash = backlash
        self._screw = position
        self._wiper = position
        self._last_sense = 0.0
        self._rate = 0.0
        self._since = 0.0
        self._until = inf

    def _advance(self, share: float) -> None:
        half = 0.5 * self._backlash
        self._screw = min(max(self._screw + share, -half), 1.0 + half)
        self._wiper = min(max(self._wiper, self._screw - half), self._screw + half)
        if share:
            self._last_sense = copysign(1.0, share)

    def _catch_up(self, now_s: float) -> None:
        """Carry a motion under way up to now. Each motion is one way, so one step is exact."""
        end = min(now_s, self._until)
        if self._rate and end > self._since:
            self._advance(self._rate * (end - self._since) / self.travel_turns)
            self._since = end
        if now_s >= self._until:
            self._rate, self._until = 0.0, inf

    def turn(self, turns: float, now_s: float, seconds: float = 0.0) -> None:
        """Turn the screw, at once or evenly over a time; a motion under way ends first, unfinished.

        Parameters
        ----------
        turns
            Turns of the screw, clockwise positive.
        now_s
            The bench's time.
        seconds
            How long the turn takes.
        """
        if not (isfinite(turns) and isfinite(seconds) and seconds >= 0.0):
            raise ValueError(f"{turns} turns in {seconds} s cannot be made")
        self._catch_up(now_s)
        if seconds > 0.0:
            self._rate, self._since, self._until = turns / seconds, now_s, now_s + seconds
        else:
            self._rate, self._until = 0.0, inf
            self._advance(turns / self.travel_turns)

    def drive(self, turns_per_s: float, now_s: float) -> None:
        """Turn on and on at a rate; 0 stops at once."""
        if not isfinite(turns_per_s):
            raise ValueError(f"{turns_per_s} turns a second cannot be made")
        self._catch_up(now_s)
        self._rate, self._since, self._until = turns_per_s, now_s, inf

    def slow(self, share: float, now_s: float) -> None:
        """Go on turning at a share of the rate."""
        self._catch_up(now_s)
        self._rate *= share

    def finish(self, now_s: float, after_s: float) -> None:
        """Let a motion under way go on for so long, and no longer."""
        self._catch_up(now_s)
        self._until = min(self._until, now_s + max(after_s, 0.0))

    def position(self, now_s: float) -> float:
        """Where the wiper stands, share of the mechanical travel (0 to 1, clockwise)."""
        self._catch_up(now_s)
        return self._wiper

    def at_stop(self, now_s: float) -> bool:
        """Say whether the screw stands against a stop, in the sense it was last turned."""
        self._catch_up(now_s)
        half = 0.5 * self._backlash
        end = 1.0 + half if self._last_sense > 0.0 else -half
        return self._last_sense != 0.0 and abs(self._screw - end) < 1e-9
