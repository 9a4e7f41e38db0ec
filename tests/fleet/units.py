"""Units of six kinds with toleranced components, trims with their own ways, and their true best."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.random import Generator
from numpy.typing import NDArray
from scipy.optimize import least_squares

from tests.fleet.circuits import Circuit, Diodes, Ladders, Pair, SquareLaw, parts
from tests.fleet.waves import Vector


@dataclass(frozen=True, slots=True)
class Pot:
    """A trim: sense of rotation, unevenness, backlash. Screw positions are shares of the travel."""

    sense: int
    """+1 where clockwise raises the electrical position."""
    waves: NDArray[np.float64]
    """Shape (n, 2), amplitude and phase of the unevenness with 1, 2, .. waves over the travel."""
    backlash: float
    """Screw movement lost on reversal, share of the travel."""

    def electrical(self, screw: float) -> float:
        """Give the wiper's position (0..1) of a screw position (0..1)."""
        at = screw
        for n, (height, phase) in enumerate(self.waves, start=1):
            turn = 2.0 * np.pi * n
            at += height * (np.sin(turn * screw + phase) - np.sin(phase)) / turn
        return at if self.sense > 0 else 1.0 - at


@dataclass(frozen=True, slots=True)
class Unit:
    """A toleranced unit: where its trims can go, and what comes out there."""

    kind: str
    respond: Callable[[float, float], Vector]
    """Crest and skew parts at electrical positions (0..1)."""
    pots: tuple[Pot, Pot]
    travel_turns: float = 0.75
    known_best: tuple[tuple[float, float], float] | None = None
    """Electrical positions and THD of the best, where they are known beforehand."""
    _known: dict[tuple[float, float], Vector] = field(default_factory=dict, repr=False)

    def parts(self, screws: tuple[float, float]) -> Vector:
        """Give the true parts at screw positions (shares of the travel) of upper and lower."""
        key = (round(screws[0], 9), round(screws[1], 9))
        if key not in self._known:
            upper, lower = (p.electrical(s) for p, s in zip(self.pots, key, strict=True))
            self._known[key] = self.respond(upper, lower)
        return self._known[key]

    def thd(self, screws: tuple[float, float]) -> float:
        """Give the true THD (ratio) at screw positions."""
        return float(np.linalg.norm(self.parts(screws)))

    def best(self) -> tuple[tuple[float, float], float]:
        """Find the least THD inside the travel, seeing no noise, from five starts."""
        found = self.known_best
        if found is not None:
            return found
        fit: Any = least_squares
        for start in ((0.5, 0.5), (0.25, 0.25), (0.25, 0.75), (0.75, 0.25), (0.75, 0.75)):
            answer = fit(
                lambda p: self.respond(float(p[0]), float(p[1])),
                np.array(start),
                bounds=(0.0, 1.0),
                diff_step=1e-4,
                x_scale=0.1,
            )
            thd = float(np.sqrt(2.0 * answer.cost))
            if found is None or thd < found[1] - 1e-9:
                found = ((float(answer.x[0]), float(answer.x[1])), thd)
            if start == (0.5, 0.5) and min(answer.x) > 0.02 and max(answer.x) < 0.98:
                break
        assert found is not None
        return found


def _near(rng: Generator, value: object, tolerance: float = 0.015) -> NDArray[np.float64]:
    values = np.asarray(value, dtype=np.float64)
    return np.asarray(values * (1.0 + tolerance * rng.standard_normal(values.shape)))


def _duty(rng: Generator) -> float:
    return 0.5 + 0.002 * float(rng.standard_normal())


def ladders(rng: Generator) -> Circuit:
    """Draw a breakpoint network of four branches a side on two ladders."""
    taps = np.array([0.9, 1.6, 2.1, 2.45])
    rungs = np.append(np.diff(np.append(0.0, taps)), 10.0 - taps[-1]) * 1e3
    return Ladders(
        rise_share=_duty(rng),
        peak_v=float(_near(rng, 5.0, 0.01)),
        offset_v=0.02 * float(rng.standard_normal()),
        series=1000.0,
        rungs=_near(rng, [rungs, rungs]),
        branches=_near(rng, [[4700.0, 4300.0, 2700.0, 330.0]] * 2),
        knees_v=0.0012 * rng.standard_normal((2, 4)),
        rails_v=(float(_near(rng, 10.0, 0.01)), float(_near(rng, 10.0, 0.01))),
        swing=0.42,
        coupling=0.03,
    )


def uneven(rng: Generator) -> Circuit:
    """Draw the same network behind a triangle that rises in about 48 or 52 % of the period."""
    circuit = ladders(rng)
    assert isinstance(circuit, Ladders)
    return replace(
        circuit, rise_share=0.5 + float(rng.choice([-0.02, 0.02])) * rng.uniform(0.8, 1.1)
    )


def diodes(rng: Generator) -> Circuit:
    """Draw a network of three diode clamps a side."""
    return Diodes(
        rise_share=_duty(rng),
        peak_v=float(_near(rng, 5.0, 0.01)),
        offset_v=0.02 * float(rng.standard_normal()),
        series=1000.0,
        biases_v=_near(rng, [[1.036, 2.012, 2.599]] * 2),
        resistances=_near(rng, [[3900.0, 1400.0, 180.0]] * 2),
        reach=_near(rng, [[0.2, 0.3, 0.36]] * 2),
        common=0.05 * float(rng.standard_normal()),
    )


def pair(rng: Generator) -> Circuit:
    """Draw a differential pair whose two trims feed its bases, one for each crest."""
    mixing = np.array([[0.13, 0.13], [0.6, -0.6]])
    return Pair(
        rise_share=_duty(rng),
        drive=float(_near(rng, 6.85, 0.02)),
        offset=0.1 * float(rng.standard_normal()),
        degeneration=float(_near(rng, 2.55, 0.02)),
        mixing=_near(rng, mixing, 0.05),
        bend=0.5,
    )


def coupled(rng: Generator) -> Circuit:
    """Draw a differential pair whose triangle rides on an offset: drive and balance trims."""
    mixing = np.array([[0.17, 0.0], [0.6, -0.75]])
    return Pair(
        rise_share=_duty(rng),
        drive=float(_near(rng, 6.85, 0.02)),
        offset=0.1 * float(rng.standard_normal()),
        degeneration=float(_near(rng, 2.55, 0.02)),
        mixing=_near(rng, mixing, 0.05) + np.array([[0.0, 0.01], [0.0, 0.0]]),
        bend=0.7,
    )


def squares(rng: Generator) -> Circuit:
    """Draw two square-law clippers, one a half wave."""
    return SquareLaw(
        rise_share=_duty(rng),
        offset=0.004 * float(rng.standard_normal()),
        thresholds=_near(rng, [0.26, 0.26]),
        strengths=_near(rng, [0.72, 0.72]),
        reach=_near(rng, [0.22, 0.22], 0.03),
        softness=float(_near(rng, 0.26, 0.03)),
    )


LOADING = {
    "ladders": 0.4,
    "diodes": 0.4,
    "pair": 0.9,
    "coupled": 0.9,
    "uneven": 0.4,
    "squares": 0.9,
}
"""Resistance of each kind's trims over what their wipers feed."""


def loaded(position: float, loading: float) -> float:
    """Give a potentiometer's output (0..1) at a wiper position when a load hangs on the wiper."""
    return position / (1.0 + loading * position * (1.0 - position))


KINDS: dict[str, Callable[[Generator], Circuit]] = {
    "ladders": ladders,
    "diodes": diodes,
    "pair": pair,
    "coupled": coupled,
    "uneven": uneven,
    "squares": squares,
}


def pot(rng: Generator, sense: int | None = None) -> Pot:
    """Draw a trim: a sense unless given, track uneven by some per cent, up to three degrees of play."""
    heights = np.abs(rng.normal(0.0, [0.06, 0.04, 0.03]))
    phases = rng.uniform(0.0, 2.0 * np.pi, 3)
    drawn = int(rng.choice([-1, 1]))
    return Pot(
        sense=drawn if sense is None else sense,
        waves=np.column_stack((heights, phases)),
        backlash=float(rng.uniform(0.3, 3.0)) / 270.0,
    )


def draw(kind: str, rng: Generator, senses: tuple[int, int] | None = None) -> Unit:
    """Draw a unit of a kind; `senses` holds the sense of its trims where the kind fixes them."""
    circuit = KINDS[kind](rng)
    loading = float(_near(rng, LOADING[kind], 0.1))
    lag = abs(0.0004 * float(rng.standard_normal()))
    return Unit(
        kind=kind,
        respond=lambda u, l: parts(  # noqa: E741
            circuit, loaded(u, loading), loaded(l, loading), lag
        ),
        pots=(pot(rng, senses and senses[0]), pot(rng, senses and senses[1])),
    )
