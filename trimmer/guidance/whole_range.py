"""One setting for the whole range: the trims where THD over several frequencies is least.

What the trims add to the wave hardly depends on frequency, what the rest of the unit adds does. So each
frequency has its own reading and all share the learned response of the trims.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from importlib import import_module
from typing import Any, Final, Literal

import numpy as np

from trimmer.guidance.advice import Trim
from trimmer.guidance.field import Array, features, slopes
from trimmer.guidance.firsts import look_first
from trimmer.guidance.memory import Learned
from trimmer.measurement.reading import Reading

Mode = Literal["worst", "mean"]

REACH: Final = 0.3
"""Farthest movement of a trim thought of, share of the travel: as far as a learned response goes."""
_ROUNDS: Final = 12


@dataclass(frozen=True, slots=True)
class AtFrequency:
    """What a joint setting means at one frequency."""

    fundamental_hz: float
    """Hz."""
    thd_now: float
    """THD at the present setting, ratio."""
    thd_then: float
    """THD expected at the joint setting, ratio."""
    thd_alone: float
    """THD expected were the trims set for this frequency alone, ratio."""

    @property
    def cost(self) -> float:
        """THD that the joint setting costs at this frequency, ratio."""
        return self.thd_then - self.thd_alone


@dataclass(frozen=True, slots=True)
class RangeSetting:
    """The joint setting."""

    mode: Mode
    """What is least: the worst THD, or the mean."""
    turns: dict[Trim, float]
    """Turns of each trim from the present setting; plus is clockwise."""
    frequencies: tuple[AtFrequency, ...]
    """In the order of the readings."""

    @property
    def worst_thd(self) -> float:
        """The largest THD over the range, ratio."""
        return max(f.thd_then for f in self.frequencies)

    @property
    def mean_thd(self) -> float:
        """The mean THD over the range, ratio."""
        return sum(f.thd_then for f in self.frequencies) / len(self.frequencies)


def joint_setting(
    readings: Sequence[Reading], learned: Learned, mode: Mode = "worst"
) -> RangeSetting:
    """Find the setting with the least worst, or mean, THD over several frequencies.

    Parts that come from a slewing output are left out of what the trims are set for: they count in
    the figures, but no trim is moved to hide them.

    Parameters
    ----------
    readings
        One for each frequency, all at the present setting.
    learned
        The unit's learned response.
    mode
        What is to be least.

    Raises
    ------
    ValueError
        Where there is no reading.
    """
    if not readings:
        raise ValueError("a joint setting needs at least one reading")
    problem = _Range(readings, learned)
    best = problem.solve(mode)
    now, then = problem.thds(np.zeros(2)), problem.thds(best)
    alone = [problem.only(i).solve("mean") for i in range(len(readings))]
    return RangeSetting(
        mode=mode,
        turns={
            "upper": float(best[0]) * learned.travel_turns,
            "lower": float(best[1]) * learned.travel_turns,
        },
        frequencies=tuple(
            AtFrequency(r.fundamental_hz, float(n), float(t), float(problem.thds(a)[i]))
            for i, (r, n, t, a) in enumerate(zip(readings, now, then, alone, strict=True))
        ),
    )


class _Range:
    """Readings of several frequencies and how the trims move them all alike."""

    def __init__(self, readings: Sequence[Reading], learned: Learned) -> None:
        size = min(learned.weights.shape[0], *(r.parts.size for r in readings))
        self.weights = learned.weights[:size]
        self.parts = np.array([r.parts[:size] for r in readings])
        foreign = [look_first(r).foreign for r in readings]
        self.foreign = np.array([np.zeros(size) if f is None else f[:size] for f in foreign])
        nearest = min(readings, key=lambda r: abs(r.fundamental_hz - learned.fundamental_hz))
        self.here = _stands_at(self.weights, nearest.parts[:size])

    def only(self, index: int) -> _Range:
        """Give the problem of one frequency alone."""
        alone = object.__new__(_Range)
        alone.weights, alone.here = self.weights, self.here
        alone.parts = self.parts[index : index + 1]
        alone.foreign = self.foreign[index : index + 1]
        return alone

    def _moved(self, x: Array) -> Array:
        """Change of the parts by a movement from the present setting; shape (m,)."""
        step = features(self.here + x) - features(self.here)
        return np.asarray(self.weights @ step)

    def thds(self, x: Array) -> Array:
        """THD at each frequency after a movement; shape (n,)."""
        return np.asarray(np.linalg.norm(self.parts + self._moved(x), axis=1))

    def _squares(self, x: Array) -> tuple[Array, Array]:
        """Squared length of what the trims are set for, and its slopes; shapes (n,), (n, 2)."""
        left = self.parts - self.foreign + self._moved(x)
        columns = slopes(self.here + x) @ self.weights.T
        return np.sum(left**2, axis=1), 2.0 * left @ columns.T

    def solve(self, mode: Mode) -> Array:
        """Find the best movement."""
        minimize: Any = import_module("scipy.optimize").minimize  # slow to import, seldom wanted
        start = np.zeros(2)
        scale = 1.0 / float(np.mean(self._squares(start)[0]) + 1e-12)
        bounds = [(-REACH, REACH)] * 2
        if mode == "mean":

            def mean(x: Array) -> tuple[float, Array]:
                square, slope = self._squares(x)
                length = np.sqrt(scale * square + 1e-12)
                return float(length.sum()), (0.5 * scale * slope / length[:, None]).sum(axis=0)

            found = minimize(mean, start, jac=True, bounds=bounds, method="SLSQP", tol=1e-10)
            return np.asarray(found.x, dtype=np.float64)
        room = {
            "type": "ineq",
            "fun": lambda z: z[2] - scale * self._squares(z[:2])[0],
            "jac": lambda z: np.column_stack(
                (-scale * self._squares(z[:2])[1], np.ones(self.parts.shape[0]))
            ),
        }
        top = float(np.max(scale * self._squares(start)[0]))
        found = minimize(
            lambda z: z[2],
            np.append(start, top),
            jac=lambda _: np.array([0.0, 0.0, 1.0]),
            bounds=[*bounds, (0.0, None)],
            constraints=[room],
            method="SLSQP",
            tol=1e-10,
        )
        return np.asarray(found.x[:2], dtype=np.float64)


def _stands_at(weights: Array, parts: Array) -> Array:
    """Position on the learned field, from its best setting, that a reading speaks for."""
    x = np.zeros(2)
    for _ in range(_ROUNDS):
        columns = slopes(x) @ weights.T
        miss = parts - weights @ features(x)
        step = np.linalg.solve(columns @ columns.T + 1e-9 * np.eye(2), columns @ miss)
        x = np.clip(x + np.clip(step, -0.15, 0.15), -2.0 * REACH, 2.0 * REACH)
    return x
