"""Sources for tests of the session: a unit with two straight trims, and faults by script."""

from __future__ import annotations

from collections import deque
from datetime import UTC, datetime
from typing import Self

import numpy as np

from drivers import CaptureRequest, SourceInfo, SourceTimeout, Waveform

INTERVAL_S = 1e-6
SAMPLES = 10_000
FUNDAMENTAL_HZ = 1003.7


class StraightUnit:
    """A unit whose crest parts answer each trim in proportion, seen by an 8-bit digitiser.

    The figures are invented: columns 120 degrees apart, a floor of 0.4 %.
    """

    def __init__(self, seed: int = 1, floor: float = 0.004) -> None:
        self._rng = np.random.default_rng(seed)
        orders = np.arange(2, 9)
        column = 0.05 * (2.0 / orders) ** 1.5 / 0.75
        self.upper = column * np.where(orders % 2 == 0, 1.0, 0.6)
        self.lower = column * np.where(orders % 2 == 0, 1.0, -0.6)
        self.rest = np.zeros(7)
        self.rest[6] = floor
        self.position = {"upper": 0.21, "lower": -0.13}

    def turn(self, trim: str, turns: float) -> None:
        """Turn a trim; plus is clockwise."""
        self.position[trim] += turns

    def crest_parts(self) -> np.ndarray:
        """Give the true crest parts, orders 2 to 8."""
        parts = (
            self.rest + self.upper * self.position["upper"] + self.lower * self.position["lower"]
        )
        return np.asarray(parts)

    def thd(self) -> float:
        """Give the true THD."""
        return float(np.linalg.norm(self.crest_parts()))

    def samples(self) -> np.ndarray:
        """Give one free-running capture, quantised to 8 bits over +-5 V."""
        turn = 2 * np.pi * FUNDAMENTAL_HZ * INTERVAL_S * np.arange(SAMPLES)
        theta = turn + self._rng.uniform(0, 2 * np.pi)
        wave = np.cos(theta)
        for order, part in zip(range(2, 9), self.crest_parts(), strict=True):
            wave = wave + part * np.cos(order * theta)
        volts = 4.0 * wave + self._rng.normal(0.0, 0.03, SAMPLES)
        return np.clip(np.round(volts / 0.04), -128, 127) * 0.04


class UnitSource:
    """A source that reads a straight unit; scripted faults come before the captures.

    Parameters
    ----------
    unit
        The unit.
    paced
        True to behave as a watched folder: a capture only where `saved` is more than 0.
    """

    def __init__(self, unit: StraightUnit, *, paced: bool = False) -> None:
        self.unit = unit
        self.faults: deque[Exception] = deque()
        self.flat = False
        self.saved = 0
        self.captures = 0
        self._paced = paced
        self.closed = 0

    @property
    def info(self) -> SourceInfo:
        """Say what this is."""
        return SourceInfo("scripted", "an invented unit", paced_by_person=self._paced)

    def capture(self, request: CaptureRequest | None = None) -> Waveform:
        """Raise the next scripted fault, or give a capture."""
        if self.faults:
            raise self.faults.popleft()
        if self._paced:
            if not self.saved:
                raise SourceTimeout("no new file yet")
            self.saved -= 1
        self.captures += 1
        samples = np.full(SAMPLES, 0.04) if self.flat else self.unit.samples()
        return Waveform(
            samples, INTERVAL_S, datetime.now(UTC), "scripted", bits=8, code=0.04,
            low_rail=-5.12, high_rail=5.08, coupling="DC",
        )  # fmt: skip

    def close(self) -> None:
        """Count the closings."""
        self.closed += 1

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()
