"""The hand on the keyboard, for the simulated unit: it holds the screwdriver to one trim at a time."""

from __future__ import annotations

from trimmer.guidance.advice import Sense, Trim
from trimmer.reports import Screwdriver

COARSE = 1 / 90
"""A coarse step, share of the travel: 3 degrees of a single-turn trim."""
FINE = 1 / 360
"""A fine step, share of the travel: three quarters of a degree of a single-turn trim."""


class KeyedHand:
    """Turns whichever trim the screwdriver is on.

    Parameters
    ----------
    screwdriver
        What turns the trims.
    travel
        Whole mechanical travel of a trim, turns.
    """

    def __init__(self, screwdriver: Screwdriver, travel: float) -> None:
        self._screwdriver = screwdriver
        self._travel = travel
        self.trim: Trim = "upper"
        """Where the screwdriver is."""

    def turn(self, sense: Sense, fine: bool) -> None:
        """Turn by one step; returns at once."""
        step = self._travel * (FINE if fine else COARSE)
        self._screwdriver.turn(self.trim, step if sense == "clockwise" else -step)
