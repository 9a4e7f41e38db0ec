"""Units that warm up, simulated as circuits, and their readings as an 8-bit digitiser gives them.

Three sorts: one thermal time constant; two, for all that follows the temperature; and a shaper that
follows its own chip while triangle and frequency follow the board. Time constants run from half a
minute to a quarter of an hour.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from drivers.bench.parts import WARM_C, Parts, draw
from drivers.bench.plant import Wave
from drivers.bench.unit import crest_frame, period
from tests.fleet.readings import Scope
from trimmer.measurement import Reading, combine

Array = NDArray[np.float64]
Sort = Literal["one", "two", "apart"]
SORTS: tuple[Sort, ...] = ("one", "two", "apart")


@dataclass(frozen=True, slots=True, eq=False)
class WarmUnit:
    """A unit just switched on."""

    parts: Parts
    """Its circuit."""
    wipers: tuple[float, float]
    """Where its trims stand."""
    slow_s: float
    """Slow time constant."""
    fast_s: float
    """Fast time constant."""
    fast_part: float
    """Part of the rise that is fast."""
    apart: bool
    """True where the fast one is the shaper's alone."""
    seed: int
    """Of the digitiser's noise."""

    @classmethod
    def drawn(cls, seed: int, sort: Sort) -> WarmUnit:
        """Draw a unit."""
        rng = np.random.default_rng((seed, SORTS.index(sort), 61))
        slow = float(np.exp(rng.uniform(np.log(30.0), np.log(900.0))))
        return cls(
            parts=draw(seed),
            wipers=(float(rng.uniform(0.35, 0.65)), float(rng.uniform(0.35, 0.65))),
            slow_s=slow,
            fast_s=slow * float(rng.uniform(0.08, 0.35)),
            fast_part=0.0 if sort == "one" else float(rng.uniform(0.2, 0.6)),
            apart=sort == "apart",
            seed=seed,
        )

    def cold(self, time_s: float) -> tuple[float, float]:
        """How much colder than warm the board and the shaper are, kelvin."""
        rise = self.parts.warming.rise_k
        slow, fast = np.exp(-time_s / self.slow_s), np.exp(-time_s / self.fast_s)
        both = float(rise * ((1.0 - self.fast_part) * slow + self.fast_part * fast))
        return (float(rise * slow), both) if self.apart else (both, both)

    def wave(self, time_s: float) -> Wave:
        """Give what stands at the terminal."""
        board, chip = self.cold(time_s)
        knees = np.array(self.parts.knees_v) - self.parts.warming.knee_v_k * (chip - board)
        parts = replace(self.parts, knees_v=tuple(knees.tolist()))
        frequency = parts.frequency_hz * (1.0 - parts.warming.frequency_per_k * board)
        wave = period(parts, self.wipers, parts.frequency_hz, WARM_C - board)
        return Wave(wave, frequency, parts.mains_hz, parts.hum_v, parts.noise_v)

    def true_parts(self, time_s: float) -> Array:
        """Give the crest and skew parts without noise; shape (28,)."""
        z = crest_frame(self.wave(time_s).period_v)
        return np.column_stack((z.real, -z.imag)).ravel()

    def warm_s(self, left: float = 0.01) -> float:
        """Give when only so much of the drift of the parts is left."""
        warm, cold = self.true_parts(1e9), self.true_parts(0.0)
        whole = np.linalg.norm(cold - warm)
        times = np.linspace(0.2, 6.0, 117) * self.slow_s
        near = [np.linalg.norm(self.true_parts(float(t)) - warm) <= left * whole for t in times]
        return float(times[int(np.argmax(near))])

    def scope(self) -> Scope:
        """Give the digitiser that watches it."""
        return Scope(np.random.default_rng((self.seed, 62)))

    def settled_thd(self) -> float:
        """Give THD once settled as its digitiser shows it, without noise."""
        return float(np.linalg.norm(self.true_parts(1e9) + self.scope().fixed))

    def readings(
        self, until_s: float, frames: int = 2, from_s: float = 0.5
    ) -> tuple[list[float], list[Reading]]:
        """Read it from switching on, at first twice a second, later at a sixtieth of the time."""
        scope = self.scope()
        times: list[float] = []
        taken: list[Reading] = []
        at = from_s
        while at <= until_s:
            wave = self.wave(at)
            times.append(at)
            taken.append(_read(scope, self.true_parts(at), wave, frames))
            at += max(0.5, at / 60.0)
        return times, taken


def _read(scope: Scope, parts: Array, wave: Wave, frames: int) -> Reading:
    """Give a reading of so many captures; noise of frequency and level by the Cramer-Rao bound."""
    sigma = scope.sigma()
    read = combine([scope.read(parts) for _ in range(frames)])
    slow = wave.frequency_hz * sigma * np.sqrt(12.0) / (20.0 * np.pi * np.sqrt(frames))
    level = 0.5 * float(np.ptp(wave.period_v))
    flat = level * sigma / np.sqrt(frames)
    return replace(
        read,
        fundamental_hz=wave.frequency_hz + slow * float(scope.rng.standard_normal()),
        fundamental_sigma_hz=slow,
        amplitude=level + flat * float(scope.rng.standard_normal()),
        amplitude_sigma=flat,
    )
