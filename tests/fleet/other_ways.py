"""Other ways to the best setting, through the same hand, screws and digitiser.

Each is a plain form of a method that is in general use. Every movement of a screw is a turn, made with
the hand's errors; a method goes by where it believes the screws to be.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.random import Generator
from scipy.optimize import least_squares, minimize

from tests.fleet.hands import BLIND, FOLLOWED, Errors, start
from tests.fleet.readings import Scope
from tests.fleet.trials import Trial, tolerance
from tests.fleet.units import Unit
from tests.fleet.waves import Vector

MOST_TURNS = 60
FIRST = 0.08
"""First step, share of the travel."""
SMALLEST = 0.006
"""Step below which a method calls it done: 1.6 degrees of a single-turn screw."""


class OutOfTurns(Exception):
    """The budget of turns is used up."""


@dataclass
class Bench:
    """A unit, a hand and a digitiser, with the turns counted."""

    unit: Unit
    seed: int
    errors: Errors = BLIND
    thds: list[float] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.rng: Generator = np.random.default_rng(self.seed)
        self.trims = start(self.unit, self.rng)
        self.scope = Scope(self.rng)
        self.believed = np.zeros(2)
        self.thds.append(self.unit.thd(self.trims.at))

    def turn(self, trim: int, share: float) -> None:
        """Turn a screw by about a share of the travel."""
        if len(self.thds) > MOST_TURNS:
            raise OutOfTurns
        made = self.errors.made(share, self.unit.travel_turns, self.rng)
        self.trims.turn(trim, made)
        self.believed[trim] += share
        self.thds.append(self.unit.thd(self.trims.at))

    def go(self, to: Vector) -> None:
        """Bring both screws to a believed position."""
        for trim in (0, 1):
            share = float(to[trim] - self.believed[trim])
            if abs(share) > 1e-4:
                self.turn(trim, share)

    def parts(self) -> Vector:
        """Read the parts."""
        return np.array(self.scope.read(self.unit.parts(self.trims.at)).parts)

    def thd(self) -> float:
        """Read THD."""
        return self.scope.read(self.unit.parts(self.trims.at)).thd.value


def halving(bench: Bench) -> None:
    """One trim at a time by THD alone: on while it falls, back and half the step when it rises."""
    steps = [FIRST, FIRST]
    last = bench.thd()
    while max(abs(s) for s in steps) > SMALLEST:
        for trim in (0, 1):
            bench.turn(trim, steps[trim])
            now = bench.thd()
            if now > last:
                bench.turn(trim, -steps[trim])
                steps[trim] *= -0.5
                now = bench.thd()
            last = now


def lines(bench: Bench) -> None:
    """Exact line searches in turn: a parabola through the squares of three readings a trim."""
    step = FIRST
    while step > SMALLEST:
        for trim in (0, 1):
            middle = bench.thd() ** 2
            bench.turn(trim, step)
            plus = bench.thd() ** 2
            bench.turn(trim, -2.0 * step)
            minus = bench.thd() ** 2
            bend = plus - 2.0 * middle + minus
            way = 0.5 * step * (minus - plus) / bend if bend > 0.0 else np.sign(minus - plus) * step
            bench.turn(trim, float(np.clip(way, -0.3, 0.3)) + step)
        step *= 0.5


def simplex(bench: Bench) -> None:
    """Nelder and Mead's simplex on THD; a vertex takes up to two turns."""

    def value(x: Vector) -> float:
        bench.go(x)
        return bench.thd()

    corners = np.array([[0.0, 0.0], [FIRST, 0.0], [0.0, FIRST]])
    search: Any = minimize
    search(
        value,
        np.zeros(2),
        method="Nelder-Mead",
        options={"initial_simplex": corners, "xatol": SMALLEST, "fatol": 1e-4},
    )


def differences(bench: Bench) -> None:
    """General least squares on the parts, slopes by finite differences."""

    def residual(x: Vector) -> Vector:
        bench.go(x - 1.0)  # about 1, so that the relative step of the differences is one of FIRST
        return bench.parts()

    fit: Any = least_squares
    fit(
        residual,
        np.ones(2),
        jac="2-point",
        diff_step=FIRST,
        bounds=([0.2, 0.2], [1.8, 1.8]),
        xtol=SMALLEST,
        ftol=1e-3,
    )


def oracle(bench: Bench) -> None:
    """Somebody who knows the two columns and goes to their joint least squares, the larger way first."""
    best, _ = bench.unit.best()
    while True:
        at = [p.electrical(s) for p, s in zip(bench.unit.pots, bench.trims.at, strict=True)]
        columns = _columns(bench.unit, best)
        parts = bench.parts()
        ways = -np.linalg.lstsq(columns.T, parts, rcond=None)[0]
        ways = np.clip(ways, -np.array(at), 1.0 - np.array(at))
        if np.max(np.abs(ways)) < SMALLEST:
            return
        trim = int(np.argmax(np.abs(ways)))
        bench.turn(trim, float(ways[trim]) * bench.unit.pots[trim].sense)


def _columns(unit: Unit, at: tuple[float, float]) -> Vector:
    """True columns at electrical positions; shape (2, m)."""
    step = 0.002
    rows = []
    for trim in (0, 1):
        ends = []
        for side in (1.0, -1.0):
            moved = list(at)
            moved[trim] = min(max(moved[trim] + side * step, 0.0), 1.0)
            ends.append((moved[trim], unit.respond(moved[0], moved[1])))
        rows.append((ends[0][1] - ends[1][1]) / (ends[0][0] - ends[1][0]))
    return np.array(rows)


WAYS: dict[str, Callable[[Bench], None]] = {
    "one trim at a time, halving": halving,
    "exact line searches in turn": lines,
    "Nelder-Mead on THD": simplex,
    "least squares, differences": differences,
    "oracle that knows the columns": oracle,
}


def try_way(way: Callable[[Bench], None], unit: Unit, seed: int, *, followed: bool) -> Trial:
    """Try one of the other ways on a unit."""
    bench = Bench(unit, seed, FOLLOWED if followed else BLIND)
    done = True
    try:
        way(bench)
    except OutOfTurns:
        done = False
    _, best = unit.best()
    within = [i for i, thd in enumerate(bench.thds) if thd <= tolerance(best)]
    return Trial(
        reached=within[0] if within else None,
        done=len(bench.thds) - 1 if done else None,
        best=best,
        last=bench.thds[-1],
        verdict="",
        floors=(),
        thds=tuple(bench.thds),
    )
