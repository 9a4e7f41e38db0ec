"""Hands that turn a unit's trims: with scatter, play, and end stops they may feel or not."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.random import Generator

from tests.fleet.units import Unit

SINGLE_TURN = 0.75


@dataclass(slots=True)
class Trims:
    """The two screws of a unit as they really stand."""

    unit: Unit
    screws: list[float]
    """Screw positions, shares of the travel."""
    wipers: list[float] = field(default_factory=list)
    """Where the wipers stand: the screws less the play."""

    def __post_init__(self) -> None:
        self.wipers = list(self.screws)

    def turn(self, trim: int, share: float) -> bool:
        """Turn a screw; gives True where it met its end stop."""
        end = min(max(self.screws[trim] + share, 0.0), 1.0)
        met = end != self.screws[trim] + share
        self.screws[trim] = end
        half = 0.5 * self.unit.pots[trim].backlash
        self.wipers[trim] = min(max(self.wipers[trim], end - half), end + half)
        return met

    @property
    def at(self) -> tuple[float, float]:
        """Positions that the unit responds to."""
        return min(max(self.wipers[0], 0.0), 1.0), min(max(self.wipers[1], 0.0), 1.0)


def start(unit: Unit, rng: Generator) -> Trims:
    """Set both trims anywhere in the middle 60 %, the play taken up either way."""
    trims = Trims(unit, [float(p) for p in rng.uniform(0.2, 0.8, 2)])
    for trim in (0, 1):
        half = 0.5 * unit.pots[trim].backlash
        trims.wipers[trim] += float(rng.uniform(-half, half))
    return trims


@dataclass(frozen=True, slots=True)
class Errors:
    """How a hand errs in size: relative scatter and degrees of the screw (single turn)."""

    scatter: float
    degrees: float

    def made(self, share: float, travel_turns: float, rng: Generator) -> float:
        """Give the share of the travel that is really turned when `share` was asked for."""
        finer = max(1.0, travel_turns / SINGLE_TURN) ** 0.357
        jitter = self.degrees / 360.0 / SINGLE_TURN / finer
        made = share * (1.0 + self.scatter * rng.standard_normal()) + jitter * rng.standard_normal()
        return float(np.sign(share) * max(0.0, made * np.sign(share)))


BLIND = Errors(0.15, 1.5)
FOLLOWED = Errors(0.03, 0.7)
