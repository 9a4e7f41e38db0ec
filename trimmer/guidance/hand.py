"""What a hand does with what it is asked: scatter, play of the screw, and how fine it can set."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

ONE_TURN: Final = 0.75
"""Mechanical travel of a single-turn trim, turns of the screw (common practice, no source)."""
FINER: Final = 0.357
"""Power of the travel by which a multi-turn trim can be set finer than a single-turn one: 3.5 times
at 25 turns, not 33 (common practice, no source)."""
UNEVEN: Final = 0.05
"""Relative scatter of the wiper's path over a turn, for the unevenness of the track."""


@dataclass(frozen=True, slots=True)
class Hand:
    """Errors of a hand on a trim of a given travel, as shares of the travel."""

    scatter: float
    """Relative scatter of a turn."""
    jitter: float
    """Scatter of any turn, however small."""
    backlash: float
    """Play of the screw that a reversal loses, as expected."""
    backlash_sigma: float
    """Its standard deviation."""

    def sigma(self, share: float) -> float:
        """Give the standard deviation of a turn of `share` of the travel."""
        return float(((self.scatter**2 + UNEVEN**2) * share**2 + self.jitter**2) ** 0.5)


def hand_for(travel_turns: float, followed: bool) -> Hand:
    """Give the hand that turns a trim with `travel_turns` turns from end to end.

    Turning by what was said has some 15 % of scatter and 1.5 degrees besides, turning until told to
    stop some 3 % and 0.7 degrees, on a single-turn trim.
    """
    finer = max(1.0, travel_turns / ONE_TURN) ** FINER
    degree = 1.0 / (360.0 * ONE_TURN) / finer
    scatter, jitter = (0.03, 0.7) if followed else (0.15, 1.5)
    return Hand(scatter, jitter * degree, 1.5 * degree, 1.0 * degree)
