"""Where the trims should go: the setting with the least expected distortion inside the travel."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trimmer.guidance.field import Array, FieldBelief, features, slopes


@dataclass(frozen=True, slots=True, eq=False)
class Box:
    """How far each trim is known to go, positions as shares of the travel."""

    low: Array
    """Shape (2,)."""
    high: Array
    """Shape (2,)."""

    def clip(self, x: Array) -> Array:
        """Give the nearest position inside."""
        return np.clip(x, self.low, self.high)


class Aim:
    """Expected squared distortion over the positions, under a belief, and where it is least.

    The expectation counts the belief's variance too: far from where anything was read it grows, and
    holds the aim back, the more the more the response was seen to bend. `caution` weighs that.
    """

    def __init__(self, belief: FieldBelief, caution: float = 1.0) -> None:
        self.belief = belief
        self._square = belief.mean.T @ belief.mean + caution * belief.covariance.sum(axis=0)

    def expected(self, x: Array) -> float:
        """Give the expected squared distortion at a position."""
        phi = features(x - self.belief.anchor)
        return float(phi @ self._square @ phi)

    def _newton(self, x: Array) -> tuple[Array, Array]:
        at = x - self.belief.anchor
        phi, turn = features(at), slopes(at)
        return turn @ self._square @ phi, turn @ self._square @ turn.T + 1e-8 * np.eye(2)

    def along(self, x: Array, trim: int, box: Box, rounds: int = 8) -> Array:
        """Give the least expected distortion along one trim, the other left where it is."""
        best = x.copy()
        for _ in range(rounds):
            slope, bend = self._newton(best)
            tried = best.copy()
            tried[trim] -= slope[trim] / bend[trim, trim]
            tried = self._no_worse(best, box.clip(tried))
            if abs(tried[trim] - best[trim]) < 1e-6:
                break
            best = tried
        return best

    def joint(self, x: Array, box: Box, rounds: int = 12) -> Array:
        """Give the setting of both trims with the least expected distortion, from `x` on."""
        best = box.clip(x)
        for _ in range(rounds):
            slope, bend = self._newton(best)
            tried = best - np.linalg.solve(bend, slope)
            inside = box.clip(tried)
            for trim in (0, 1):
                if inside[trim] != tried[trim]:
                    other = 1 - trim
                    push = bend[other, trim] * (inside[trim] - best[trim])
                    inside[other] = best[other] - (slope[other] + push) / bend[other, other]
                    inside = box.clip(inside)
                    break
            tried = self._no_worse(best, inside)
            if np.max(np.abs(tried - best)) < 1e-6:
                break
            best = tried
        return best

    def _no_worse(self, old: Array, new: Array) -> Array:
        before = self.expected(old)
        for _ in range(6):
            if self.expected(new) <= before:
                return new
            new = 0.5 * (old + new)
        return old
