"""Maps of the fixture circuits: their harmonics over the whole travel of both trims.

A map stands in for a toleranced unit where thousands of settings are wanted and no simulator can
be waited for. It is the interpolant through Chebyshev points of the travel of each trim: the
circuits' parts are smooth in (u, l), so it converges geometrically (11 points a trim leave less
than 1e-7 of the fundamental, which a test checks against the simulator).

`make_maps` makes the stored ones anew.
"""

# ruff: noqa: E741 - the wipers of the two trims are u and l throughout

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cache, lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import least_squares

from tests.circuits.netlist import CIRCUITS, FIXTURES

MAPS = FIXTURES / "maps"
ORDERS = 15
"""Highest order in a map, K."""
PARTS = 2 * (ORDERS - 1)
"""Parts of a setting: c_2, s_2 .. c_15, s_15."""


@dataclass(frozen=True, slots=True)
class Best:
    """The least distortion a unit's trims can reach inside their travel."""

    u: float
    """Wiper of the first trim, 0 to 1."""
    l: float
    """Wiper of the second trim, 0 to 1."""
    thd: float
    """THD there, orders 2 to 15, ratio to the fundamental."""


@dataclass(frozen=True, slots=True, eq=False)
class Map:
    """Harmonics of one toleranced unit as a function of its trims, in the crest frame."""

    circuit: str
    """Name of the netlist."""
    seed: int
    """What the unit's tolerances were drawn from."""
    coefficients: NDArray[np.float64]
    """Shape (n, n, PARTS + 1): Chebyshev coefficients over u and l of the parts and of the peak."""

    def parts(self, u: float, l: float) -> NDArray[np.float64]:
        """Give ``[c_2, s_2, .., c_15, s_15]``, shape (28,); positions beyond the travel are clipped."""
        return self._at(u, l)[:PARTS]

    def amplitude_v(self, u: float, l: float) -> float:
        """Give the peak of the fundamental, volts."""
        return float(self._at(u, l)[PARTS])

    def thd(self, u: float, l: float) -> float:
        """Give the total harmonic distortion, orders 2 to 15, ratio to the fundamental."""
        return float(np.linalg.norm(self.parts(u, l)))

    def grid(self, u: ArrayLike, l: ArrayLike) -> NDArray[np.float64]:
        """Give the parts at every pair of `u` and `l`, shape (len(u), len(l), 28)."""
        n = len(self.coefficients)
        first, second = (_polynomials(n, np.asarray(x, dtype=np.float64)) for x in (u, l))
        wanted = self.coefficients[..., :PARTS]
        parts: NDArray[np.float64] = np.einsum(
            "iu,jl,ijk->ulk", first, second, wanted, optimize=True
        )
        return parts

    def best(self) -> Best:
        """Give the least THD inside the travel of both trims, and where."""
        return _best(self)

    def _at(self, u: float, l: float) -> NDArray[np.float64]:
        n, _, kinds = self.coefficients.shape
        rows = _polynomials_at(n, u) @ self.coefficients.reshape(n, n * kinds)
        along: NDArray[np.float64] = _polynomials_at(n, l) @ rows.reshape(n, kinds)
        return along


def points(n: int) -> NDArray[np.float64]:
    """Give the n Chebyshev points of 0 to 1, ends included."""
    return (1.0 - np.cos(np.pi * np.arange(n) / (n - 1))) / 2.0


def from_values(circuit: str, seed: int, values: NDArray[np.float64]) -> Map:
    """Make a map from parts and peak at the pairs of `points`, shape (n, n, PARTS + 1)."""
    n = len(values)
    to_coefficients = np.linalg.inv(_polynomials(n, points(n)).T)
    coefficients = np.einsum("iu,jl,ulk->ijk", to_coefficients, to_coefficients, values)
    coefficients.flags.writeable = False
    return Map(circuit, seed, coefficients)


@cache
def load_maps(circuits: tuple[str, ...] = CIRCUITS) -> tuple[Map, ...]:
    """Load the stored maps, all units of each of `circuits`."""
    maps = []
    for name in circuits:
        with np.load(MAPS / f"{name}.npz") as stored:
            pairs = zip(stored["seeds"], stored["values"], strict=True)
            maps += [from_values(name, int(seed), values) for seed, values in pairs]
    return tuple(maps)


def _polynomials(n: int, x: NDArray[np.float64]) -> NDArray[np.float64]:
    """First n Chebyshev polynomials at positions 0 to 1, shape (n, len(x))."""
    angle = np.arccos(np.clip(2.0 * x - 1.0, -1.0, 1.0))
    return np.cos(np.arange(n)[:, None] * angle)


def _polynomials_at(n: int, x: float) -> NDArray[np.float64]:
    angle = math.acos(min(1.0, max(-1.0, 2.0 * x - 1.0)))
    return np.cos(_orders(n) * angle)


@cache
def _orders(n: int) -> NDArray[np.float64]:
    return np.arange(n, dtype=np.float64)


@lru_cache(maxsize=1024)
def _best(unit: Map) -> Best:
    """Least squares on the parts from the best node of a grid: THD is their length."""
    steps = np.linspace(0.0, 1.0, 41)
    lengths = np.linalg.norm(unit.grid(steps, steps), axis=2)
    i, j = np.unravel_index(int(np.argmin(lengths)), lengths.shape)
    start = np.clip([steps[i], steps[j]], 1e-6, 1 - 1e-6)
    found = least_squares(  # type: ignore[operator]
        lambda x: unit.parts(x[0], x[1]),
        start,
        bounds=(0.0, 1.0),
        xtol=1e-12,
        ftol=1e-14,
        gtol=1e-14,
    )
    return Best(float(found.x[0]), float(found.x[1]), unit.thd(found.x[0], found.x[1]))
