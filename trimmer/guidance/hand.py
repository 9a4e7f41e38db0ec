"""What a hand does with what it is asked: scatter, play of the screw, and how fine it can set."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

ONE_TURN: Final = 0.75
"""Mechanical travel of a single-turn trim, turns of the screw (common practice, no source)."""
FINER: Final = 0.357
"""Power of the travel by which a multi-turn trim can be set finer than a single-turn one: 3.5 times
at 25 turns, not 33 (common practice, no source)."""
BLIND: Final = (0.15, 1.5)
"""Scatter of a turn made by what was said: relative, and degrees of a single-turn screw."""
FOLLOWED: Final = (0.03, 0.7)
"""The same of a turn made until told to stop."""
UNSEEN: Final = 0.05
"""Relative scatter of a careful turn that cannot be followed, in between the two."""
UNEVEN: Final = 0.05
"""Relative scatter of the wiper's path over a turn, for the unevenness of the track."""


@dataclass(frozen=True, slots=True)
class Hand:
    """Errors of a hand on a trim of a given travel, as shares of the travel."""

    scatter: float
    """Relative scatter of a turn."""
    jitter: float
    """Scatter of any turn, however small."""
    followed: bool
    """Whether it turns until told to stop, where that can be told."""
    unseen_scatter: float
    """Relative scatter of a turn that cannot be followed, its trim's column not being known."""
    unseen_jitter: float
    """Scatter of any such turn."""
    backlash: float
    """Play of the screw that a reversal loses, as expected."""
    backlash_sigma: float
    """Its standard deviation."""

    def sigma(self, share: float, *, unseen: bool = False) -> float:
        """Give the standard deviation of a turn of `share` of the travel."""
        scatter = self.unseen_scatter if unseen else self.scatter
        jitter = self.unseen_jitter if unseen else self.jitter
        return float(((scatter**2 + UNEVEN**2) * share**2 + jitter**2) ** 0.5)


def hand_for(travel_turns: float, followed: bool) -> Hand:
    """Give the hand that turns a trim with `travel_turns` turns from end to end.

    Parameters
    ----------
    travel_turns
        Turns of the screw.
    followed
        Whether it turns until told to stop, where that can be told.
    """
    finer = max(1.0, travel_turns / ONE_TURN) ** FINER
    degree = 1.0 / (360.0 * ONE_TURN) / finer
    scatter, jitter = FOLLOWED if followed else BLIND
    return Hand(
        scatter=scatter,
        jitter=jitter * degree,
        followed=followed,
        unseen_scatter=UNSEEN if followed else scatter,
        unseen_jitter=BLIND[1] * degree,
        backlash=1.5 * degree,
        backlash_sigma=1.0 * degree,
    )
