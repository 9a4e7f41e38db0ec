"""A hand with a screwdriver: it turns about as far as it was asked, and stops a little late."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from drivers.bench.assembly import Bench

SINGLE_TURN = 0.75
"""Turns of a common single-turn trim over its whole travel."""
FINER = 3.5
"""How much finer a 25-turn trim is set than a single-turn one. Common practice, no source: 3 to 4."""
UNHURRIED_S = 1.5
"""A short turn is given this long."""
SLOWEST = 0.05
"""Slowest that a hand turns, share of its full speed."""
OTHER = {"upper": "lower", "lower": "upper"}


def fineness(travel_turns: float) -> float:
    """How much finer than a single-turn trim one of this travel is set.

    A power of the travel through 1 at 0.75 turns and 3.5 at 25 turns: the hand's errors are
    smaller shares of a longer travel, but by far not in proportion.
    """
    power = np.log(FINER) / np.log(25.0 / SINGLE_TURN)
    return float(max(1.0, (travel_turns / SINGLE_TURN) ** power))


class Hand:
    """Turns a bench's trims as a person does.

    Parameters
    ----------
    bench
        Whose trims it turns.
    rng
        Its randomness: a seed or a generator.
    scatter, slack_deg
        Blind: standard deviation of a turn as a share of what was asked, and in degrees of a
        single-turn trim's screw.
    followed_scatter, followed_slack_deg
        The same when the hand is told where to stop.
    lag_s, lag_scatter
        Reaction time from the word to the hand's standing still, and its relative scatter.
    speed_deg_s
        How fast it turns while followed, degrees a second of a single-turn trim's screw.
    wrong_trim, wrong_way
        Probability of taking the other trim, or the other sense.
    """

    def __init__(
        self,
        bench: Bench,
        rng: int | np.random.Generator | None = None,
        *,
        scatter: float = 0.15,
        slack_deg: float = 1.5,
        followed_scatter: float = 0.03,
        followed_slack_deg: float = 0.7,
        lag_s: float = 0.18,
        lag_scatter: float = 0.1,
        speed_deg_s: float = 15.0,
        wrong_trim: float = 0.0,
        wrong_way: float = 0.0,
    ) -> None:
        self._bench = bench
        # Tagged apart from the bench's own draws, since both may be given the same seed.
        seed = (rng, 4) if isinstance(rng, int) else rng
        self._rng = np.random.default_rng(seed)
        self._blind = (scatter, slack_deg)
        self._followed = (followed_scatter, followed_slack_deg)
        self._lag = (lag_s, lag_scatter)
        self._wrong = (wrong_trim, wrong_way)
        self._fineness = fineness(bench.travel_turns)
        # Degrees of a single-turn screw are shares of its travel; those are what the hand sees.
        self._degree = bench.travel_turns / (360.0 * SINGLE_TURN) / self._fineness
        self._speed = speed_deg_s * self._degree
        self._turning: str | None = None

    def make(
        self, trim: str, turns: float, *, followed: bool = False, seconds: float = 0.0
    ) -> tuple[str, float]:
        """Make a turn as asked, with the hand's errors.

        Parameters
        ----------
        trim
            Which was asked for.
        turns
            Screw turns asked for, clockwise positive.
        followed
            True for the errors of a hand that is told where to stop.
        seconds
            How long it takes over it; 0 for at once.

        Returns
        -------
        trim, turns
            Which screw it took, and how far it turned it (backlash and stops come after that).
        """
        trim, sense = self._take(trim, 1.0)
        scatter, slack_deg = self._followed if followed else self._blind
        spread = np.hypot(scatter / self._fineness * turns, slack_deg * self._degree)
        made = sense * (turns + float(spread * self._rng.standard_normal()))
        self._bench.turn(trim, made, seconds)
        return trim, made

    def start(self, trim: str, sense: float, turns: float | None = None) -> str:
        """Begin to turn and go on until `stop`.

        Parameters
        ----------
        trim
            Which was asked for.
        sense
            Positive for clockwise.
        turns
            Screw turns asked for, where they are known: a short turn is made slowly, in about
            the time of a longer one. None turns at full speed.

        Returns
        -------
        str
            The trim it really took.
        """
        self.stop()
        trim, sense = self._take(trim, 1.0 if sense > 0.0 else -1.0)
        self._turning = trim
        speed = self._speed
        if turns is not None:
            speed = min(speed, max(abs(turns) / UNHURRIED_S, SLOWEST * speed))
        self._bench.drive(trim, sense * speed)
        return trim

    def slow(self) -> None:
        """Go on a third as fast."""
        if self._turning is not None:
            self._bench.slow(self._turning, 1.0 / 3.0)

    def stop(self) -> None:
        """Hear the word to stop: the hand stands still a reaction time later."""
        if self._turning is None:
            return
        lag_s, scatter = self._lag
        late = lag_s * max(0.0, 1.0 + scatter * float(self._rng.standard_normal()))
        self._bench.finish(self._turning, late)
        self._turning = None

    def _take(self, trim: str, sense: float) -> tuple[str, float]:
        wrong_trim, wrong_way = self._wrong
        # Both are drawn every time, so that the same seed makes the same errors of size.
        takes, goes = self._rng.random(2)
        return (OTHER[trim] if takes < wrong_trim else trim), (
            -sense if goes < wrong_way else sense
        )
