"""Readings of true parts as an 8-bit digitiser gives them, with an honest covariance.

The noise of a capture of N samples with s/A noise over amplitude gives each part a standard deviation
of ``sqrt(2/N) s/A`` (the Cramer-Rao bound for many cycles). The digitiser's integral non-linearity is
a fixed error of the same unit, range and offset, here a curve of Chebyshev polynomials of order 2 to
6, of which a sine makes harmonics of just these orders. No digitiser states its own, so a reading
owns up to what the measurement assumes by default.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.random import Generator

from tests.fleet.waves import Vector
from trimmer.measurement.digitiser import default_nonlinearity
from trimmer.measurement.reading import Crests, Flag, Interval, Reading

AMPLITUDE_CODES = 100.0


@dataclass
class Scope:
    """An 8-bit digitiser that reads a unit."""

    rng: Generator
    samples: int = 10_000
    noise_codes: float = 0.6
    nonlinearity_codes: float = 0.05
    orders: int = 15

    def __post_init__(self) -> None:
        weights = np.concatenate(([0.0, 0.0], self.rng.standard_normal(5) / np.arange(2, 7)))
        grid = np.linspace(-1.0, 1.0, 201)
        curve = np.polynomial.chebyshev.chebval(grid, weights)
        curve -= np.polyval(np.polyfit(grid, curve, 1), grid)
        peak = self.nonlinearity_codes / AMPLITUDE_CODES
        self.fixed = np.zeros(28)
        self.fixed[0:10:2] = peak * weights[2:] / np.max(np.abs(curve))

    def sigma(self, longer: bool = False) -> float:
        """Give the standard deviation of a part by noise and quantisation."""
        codes = np.hypot(self.noise_codes, 1.0 / np.sqrt(12.0))
        samples = self.samples * (16 if longer else 1)
        return float(np.sqrt(2.0 / samples) * codes / AMPLITUDE_CODES)

    def read(self, true: Vector, *, longer: bool = False, flags: tuple[Flag, ...] = ()) -> Reading:
        """Give a reading of a wave with these true parts."""
        size = 2 * (self.orders - 1)
        sigma = self.sigma(longer)
        parts = (true + self.fixed)[:size] + sigma * self.rng.standard_normal(size)
        k = np.repeat(np.arange(2, self.orders + 1), 2)
        peak = default_nonlinearity(8) / AMPLITUDE_CODES
        own = np.diag((np.arange(size) % 2 == 0) * (0.5 * peak / k) ** 2)
        return reading_of(parts, sigma, own, flags)


def reading_of(
    parts: Vector, sigma: float, systematic: Vector, flags: tuple[Flag, ...] = ()
) -> Reading:
    """Give a reading with these parts, noise and fixed error; figures not needed are nominal."""
    covariance = sigma**2 * np.eye(parts.size) + systematic
    square = float(parts @ parts)
    thd = float(np.sqrt(max(0.0, square - parts.size * sigma**2)))
    spread = float(np.sqrt(parts @ covariance @ parts)) / max(thd, 1e-9)
    return Reading(
        fundamental_hz=1000.0,
        fundamental_sigma_hz=0.01,
        amplitude=2.5,
        amplitude_sigma=1e-4,
        offset=0.0,
        offset_sigma=1e-4,
        orders=parts.size // 2 + 1,
        parts=parts,
        covariance=covariance,
        systematic=systematic,
        noise=0.01,
        thd=Interval(thd, spread, max(0.0, thd - 1.96 * spread), thd + 1.96 * spread),
        thd_plus_noise=thd + 0.004,
        crests=Crests(0.0, 0.0, 0.0, 1e-4, 1e-4, 1e-4),
        rise_share=0.5,
        rise_share_sigma=1e-4,
        flags=flags,
        samples=10_000,
        interval_s=1e-6,
        cycles=10.0,
        bits=8,
    )
