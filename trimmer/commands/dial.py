"""A simulated dial: turns the simulated unit's frequency to where it is asked to go, as a person does."""

from __future__ import annotations

import math
from typing import Final

import numpy as np

from drivers.bench import Bench

PART: Final = 0.3
"""Part of the way, on a log scale, that is made from one frame to the next."""
MISS: Final = 0.02
"""How far from where it was asked it stops, relative, standard deviation."""
THERE: Final = 0.01
"""Near enough to stop, relative."""


class SimulatedDial:
    """Turned towards a frequency, a step for each frame that is read meanwhile.

    Parameters
    ----------
    bench
        Whose dial it is.
    seed
        Of its errors.
    """

    def __init__(self, bench: Bench, seed: int) -> None:
        self._bench = bench
        self._rng = np.random.default_rng((seed, 5))
        self._goal_hz: float | None = None

    def towards(self, hertz: float) -> None:
        """Begin to turn."""
        self._goal_hz = hertz * math.exp(MISS * float(self._rng.standard_normal()))

    def step(self) -> None:
        """Turn on for about the time of a frame; stop once there."""
        if self._goal_hz is None:
            return
        left = math.log(self._goal_hz / self._bench.frequency_hz)
        if abs(left) <= THERE:
            self._goal_hz = None
            return
        move = left if abs(left) < 0.05 else PART * left
        self._bench.set_frequency(self._bench.frequency_hz * math.exp(move))
