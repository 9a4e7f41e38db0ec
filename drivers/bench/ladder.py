"""The two resistor ladders whose nodes set the breakpoints, and the trims that pull at them.

Each half wave has a ladder from its rail down to a node that both ladders share; that node goes to
ground through a small resistor. A trim is a potentiometer between the two rails, its wiper joined
by a large resistor to the rail end of its ladder::

    rail --- top --- tap 4 --- rung --- tap 3 --- rung --- tap 2 --- rung --- tap 1 --- rung ---+
                       |                                                                        |
    other rail ==pot== wiper --- feed                                            shared --- ground

So a trim moves all four breakpoints of its half, the outer ones most, and through the shared
node a little of the other half as well. The taps feed junctions of transistors, which draw next
to nothing: the network is linear and solved as it stands (nodal analysis).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

TAPS = 4
"""Breakpoints a half wave."""

END_OHM = 2.0
"""What a potentiometer's track leaves between its wiper and its end."""

Halves = tuple[NDArray[np.float64], NDArray[np.float64]]


@dataclass(frozen=True, slots=True)
class Ladder:
    """The resistors of one half wave's ladder, and of the trim that feeds it."""

    top_ohm: float
    """From the rail to the outermost tap."""
    rungs_ohm: tuple[float, ...]
    """From the shared node outwards: shared node to tap 1, tap 1 to tap 2, and so on."""
    feed_ohm: float
    """From the wiper to the outermost tap."""
    pot_ohm: float
    """The trim's whole track."""

    def __post_init__(self) -> None:
        if len(self.rungs_ohm) != TAPS:
            raise ValueError(f"a ladder has {TAPS} rungs, not {len(self.rungs_ohm)}")
        if min(self.top_ohm, self.feed_ohm, self.pot_ohm, *self.rungs_ohm) <= 0.0:
            raise ValueError("resistors are positive")


def tap_voltages(
    upper: Ladder,
    lower: Ladder,
    shared_ohm: float,
    rails_v: tuple[float, float],
    wipers: tuple[float, float],
) -> Halves:
    """Solve the network for the voltages of its taps.

    Parameters
    ----------
    upper, lower
        The ladders hung from the positive and from the negative rail.
    shared_ohm
        From the shared node to ground.
    rails_v
        Positive and negative rail, volts.
    wipers
        Where the two wipers stand, upper and lower: 0 at the end of the own rail, 1 at the other's.

    Returns
    -------
    upper_v, lower_v
        Shape (4,) each, volts, from the shared node outwards.
    """
    # Nodes: 0 shared, 1..4 upper taps, 5 upper wiper, 6..9 lower taps, 10 lower wiper.
    size = 2 * TAPS + 3
    conductance = np.zeros((size, size))
    current = np.zeros(size)

    def join(a: int, b: int, ohm: float) -> None:
        g = 1.0 / ohm
        conductance[a, a] += g
        conductance[b, b] += g
        conductance[a, b] -= g
        conductance[b, a] -= g

    def tie(node: int, volt: float, ohm: float) -> None:
        conductance[node, node] += 1.0 / ohm
        current[node] += volt / ohm

    tie(0, 0.0, shared_ohm)
    for half, (ladder, at) in enumerate(zip((upper, lower), wipers, strict=True)):
        first = 1 + half * (TAPS + 1)
        own, other = rails_v[half], rails_v[1 - half]
        below = 0
        for step, ohm in enumerate(ladder.rungs_ohm):
            join(below, first + step, ohm)
            below = first + step
        wiper = first + TAPS
        tie(below, own, ladder.top_ohm)
        join(below, wiper, ladder.feed_ohm)
        tie(wiper, own, END_OHM + ladder.pot_ohm * at)
        tie(wiper, other, END_OHM + ladder.pot_ohm * (1.0 - at))
    volts: NDArray[np.float64] = np.linalg.solve(conductance, current).astype(np.float64)
    return volts[1 : TAPS + 1], volts[TAPS + 2 : 2 * TAPS + 2]
