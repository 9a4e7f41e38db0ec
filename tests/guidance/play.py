"""A guide, a unit and a hand, played one call at a time."""

from __future__ import annotations

import time
from dataclasses import dataclass, field

import numpy as np
from numpy.random import Generator

from tests.fleet.hands import Trims, start
from tests.fleet.readings import Scope
from tests.fleet.units import Unit
from trimmer.guidance import Guide
from trimmer.guidance.advice import Advice, Confirm, Done
from trimmer.guidance.course import Answer
from trimmer.measurement.reading import Reading


@dataclass
class Play:
    """One session, the hand exact unless told otherwise."""

    unit: Unit
    guide: Guide
    seed: int = 0
    dead: tuple[bool, bool] = (False, False)
    """Screws that reach no wiper."""
    scatter: float = 0.0
    at: tuple[float, float] | None = None
    """Screw positions to start from; anywhere in the middle where None."""
    drift: np.ndarray | None = None
    """Added to the parts, once more with every reading."""
    answers: list[Answer] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.rng: Generator = np.random.default_rng([self.seed, 5])
        self.trims = start(self.unit, self.rng)
        if self.at is not None:
            self.trims = Trims(self.unit, list(self.at))
        self.scope = Scope(self.rng)
        self.read_so_far = 0

    def reading(self, *, longer: bool = False) -> Reading:
        """Read the unit as it stands."""
        parts = self.unit.parts(self.trims.at)
        if self.drift is not None:
            parts = parts + self.read_so_far * self.drift
        self.read_so_far += 1
        return self.scope.read(parts, longer=longer)

    @property
    def thd(self) -> float:
        """True THD."""
        return self.unit.thd(self.trims.at)

    @property
    def answer(self) -> Answer:
        """The last answer."""
        return self.answers[-1]

    def begin(self) -> Answer:
        """Give the first reading."""
        self.answers.append(self.guide.observe(self.reading()))
        return self.answer

    def turn(self, trim: int, share: float) -> bool:
        """Turn a screw; True where it met its stop."""
        return not self.dead[trim] and self.trims.turn(trim, share)

    def asked(self) -> tuple[int, float]:
        """The turn asked for: trim and signed share of the travel."""
        assert isinstance(self.answer, Advice)
        sense = 1.0 if self.answer.sense == "clockwise" else -1.0
        share = sense * self.answer.turns / self.guide.travel_turns
        return (0 if self.answer.trim == "upper" else 1), share

    @property
    def asked_last(self) -> tuple[int, float]:
        """The turn asked for before the last answer."""
        last, self.answers = self.answers[-1], self.answers[:-1]
        try:
            return self.asked()
        finally:
            self.answers.append(last)

    def step(self, *, tells_stop: bool = True) -> Answer:
        """Do what was asked: a longer reading or a turn."""
        if isinstance(self.answer, Confirm):
            self.answers.append(self.guide.observe(self.reading(longer=True), longer=True))
            return self.answer
        trim, share = self.asked()
        met = self.turn(trim, share * (1.0 + self.scatter * self.rng.standard_normal()))
        reading = self.reading()
        self.answers.append(
            self.guide.at_stop(reading) if met and tells_stop else self.guide.observe(reading)
        )
        return self.answer

    def timed_step(self) -> float:
        """Do what was asked; gives the seconds from the reading to its answer."""
        longer = isinstance(self.answer, Confirm)
        if not longer:
            trim, share = self.asked()
            self.turn(trim, share * (1.0 + self.scatter * self.rng.standard_normal()))
        reading = self.reading(longer=longer)
        began = time.perf_counter()
        answer = self.guide.observe(reading, longer=longer)
        took = time.perf_counter() - began
        self.answers.append(answer)
        return took

    def finish(self, most: int = 40) -> Done:
        """Go on to the end."""
        if not self.answers:
            self.begin()
        for _ in range(most):
            if isinstance(self.answer, Done):
                return self.answer
            self.step()
        raise AssertionError(f"not done after {most} steps")
