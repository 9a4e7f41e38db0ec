"""A hand seen live: it turns at its own speed, hears words late, and is read ten times a second."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.random import Generator

from tests.fleet.catalogue import prior, unit
from tests.fleet.hands import BLIND, Trims, start
from tests.fleet.readings import Scope
from tests.fleet.trials import MOST_TURNS, tolerance
from trimmer.guidance import Guide
from trimmer.guidance.advice import Advice, Confirm, Follow
from trimmer.guidance.course import Answer
from trimmer.measurement.reading import Reading

READINGS_PER_S = 10.0
STEPS = 5
"""Steps of movement between two readings."""
LONGEST_S = 30.0
FURTHER = 5.0 / 270.0
"""Hearing nothing but *turn*, a person goes on so far, share of the travel."""
SHORTEST_S = 1.0
"""A small turn is made in about this time, not faster."""


@dataclass(frozen=True, slots=True)
class Person:
    """How somebody turns."""

    lag_s: float
    """From word to hand."""
    speed: float
    """Shares of the travel a second."""
    slow: float
    """Share of the speed that is left after *slow*."""
    unsteady: float
    """Relative scatter of the speed from tenth to tenth of a second."""


def person(rng: Generator) -> Person:
    """Draw a person."""
    return Person(
        lag_s=float(rng.uniform(0.15, 0.35)),
        speed=float(rng.uniform(20.0, 60.0)) / 270.0,
        slow=float(rng.uniform(0.2, 0.35)),
        unsteady=0.25,
    )


@dataclass(frozen=True, slots=True)
class Watched:
    """A followed turn, as it went."""

    words: tuple[Follow, ...]
    """One for each reading."""
    began_s: float
    """When the screw began to move."""
    met_stop: bool
    """Whether the screw met its end stop."""
    answered_s: float | None
    """When the wiper began to move, its play taken up."""
    made: float
    """Share of the travel the screw was turned, signed."""

    def heard_after_s(self, *says: str) -> float | None:
        """Give the time from the wiper's first movement to the first of some words."""
        for i, word in enumerate(self.words):
            if word.say in says and self.answered_s is not None:
                return (i + 1) / READINGS_PER_S - self.answered_s
        return None


def turn(
    guide: Guide,
    advice: Advice,
    trims: Trims,
    scope: Scope,
    who: Person,
    rng: Generator,
    *,
    trim: int | None = None,
    against: bool = False,
    obeys: bool = True,
) -> Watched:
    """Make a turn with the guide following, until it counts as made.

    Parameters
    ----------
    trim
        The trim that is really turned; the asked one where None.
    against
        Whether it is turned the wrong way.
    obeys
        Whether the hand stops at *wrong*; else it goes on to the end of the turn.
    """
    asked = advice.turns / trims.unit.travel_turns * (1.0 if advice.sense == "clockwise" else -1.0)
    which = (0 if advice.trim == "upper" else 1) if trim is None else trim
    sense = float(np.sign(asked)) * (-1.0 if against else 1.0)
    gives_up = abs(BLIND.made(asked, trims.unit.travel_turns, rng))
    began = float(rng.uniform(0.2, 0.6))
    made, met, now = 0.0, False, 0.0
    answered: float | None = None
    usual = min(who.speed, abs(asked) / SHORTEST_S)
    speed = usual
    orders: list[tuple[float, float]] = []
    words: list[Follow] = []
    while now < LONGEST_S:
        for _ in range(STEPS):
            now += 1.0 / READINGS_PER_S / STEPS
            while orders and orders[0][0] <= now:
                speed = orders.pop(0)[1] * usual
            if now < began or speed == 0.0:
                continue
            known = any(w.share is not None for w in words)
            if made >= (1.4 * gives_up + FURTHER if known else gives_up):
                speed = 0.0
            step = speed * (1.0 + who.unsteady * rng.standard_normal()) / READINGS_PER_S / STEPS
            before = trims.at
            met = trims.turn(which, sense * max(0.0, step)) or met
            if answered is None and trims.at != before:
                answered = now
            made += max(0.0, step)
        reading = scope.read(trims.unit.parts(trims.at))
        word = guide.follow(reading, now)
        words.append(word)
        if word.say == "slow":
            orders.append((now + who.lag_s, who.slow))
        elif word.say == "stop" or (obeys and word.say in ("wrong-trim", "wrong-way")):
            orders.append((now + who.lag_s, 0.0))
        if word.still:
            break
        if met and speed > 0.0 and now > began + 2.0:
            break
    return Watched(tuple(words), began, met, answered, sense * made)


@dataclass(frozen=True, slots=True)
class Session:
    """A whole session of followed turns."""

    reached: int | None
    """Turns made when THD was first within the tolerance of the best."""
    turns: int
    """Turns made in all."""
    alarms: int
    """Turns of which a mistake was said that was none."""
    stuck: int
    """Turns that never came to count as made."""
    lags_s: tuple[float, float]
    """The person's lag, and what the guide has learned of it."""


def watch_through(kind: str, number: int, *, known: bool) -> Session:
    """Make a whole session with the guide following."""
    at = _Sitting(kind, number, known)
    goal = tolerance(at.trims.unit.best()[1])
    reached = 0 if at.thd <= goal else None
    alarms = stuck = turns = 0
    while isinstance(at.answer, Advice) and turns < MOST_TURNS:
        seen = at.turn()
        turns += 1
        alarms += any(word.say in ("wrong-trim", "wrong-way") for word in seen.words)
        stuck += not seen.words[-1].still and not seen.met_stop
        if reached is None and at.thd <= goal:
            reached = turns
    return Session(reached, turns, alarms, stuck, (at.who.lag_s, at.guide.lag_s))


@dataclass(frozen=True, slots=True)
class Erred:
    """A mistake of the hand, and how soon it was noticed."""

    asked: float
    """Size of the turn asked for, share of the travel."""
    noticed_s: float | None
    """From the wiper's first movement to the word; None where it never came."""


def err_once(kind: str, number: int, mistake: str, *, known: bool) -> Erred | None:
    """Make some turns right and then one wrong; None where the guide was done before that."""
    at = _Sitting(kind, number, known)
    right = int(at.rng.integers(0, 3)) if known else int(at.rng.integers(2, 4))
    for _ in range(right):
        if not isinstance(at.answer, Advice):
            return None
        at.turn()
    if not isinstance(at.answer, Advice):
        return None
    asked = at.answer.turns / at.trims.unit.travel_turns
    seen = at.turn(mistake)
    return Erred(asked, seen.heard_after_s(mistake))


class _Sitting:
    """A unit, a person and a guide that follows, from the first reading on."""

    def __init__(self, kind: str, number: int, known: bool) -> None:
        self.rng = np.random.default_rng([9, number, known])
        self.trims = start(unit(kind, number, wired=known), self.rng)
        self.scope = Scope(self.rng)
        self.who = person(self.rng)
        learned = prior(kind, followed=True) if known else None
        self.guide = Guide(followed=True, prior=learned)
        self.answer: Answer = self.guide.observe(self._read())
        self._settle()

    @property
    def thd(self) -> float:
        """True THD."""
        return self.trims.unit.thd(self.trims.at)

    def turn(self, mistake: str = "") -> Watched:
        """Make the turn asked for, or a mistake in its stead."""
        assert isinstance(self.answer, Advice)
        asked = 0 if self.answer.trim == "upper" else 1
        seen = turn(
            self.guide,
            self.answer,
            self.trims,
            self.scope,
            self.who,
            self.rng,
            trim=1 - asked if mistake == "wrong-trim" else asked,
            against=mistake == "wrong-way",
        )
        reading = self._read()
        met = seen.met_stop
        self.answer = self.guide.at_stop(reading) if met else self.guide.observe(reading)
        self._settle()
        return seen

    def _settle(self) -> None:
        while isinstance(self.answer, Confirm):
            self.answer = self.guide.observe(self._read(longer=True), longer=True)

    def _read(self, *, longer: bool = False) -> Reading:
        return self.scope.read(self.trims.unit.parts(self.trims.at), longer=longer)
