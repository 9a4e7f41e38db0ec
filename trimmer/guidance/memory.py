"""What one unit taught, and what many units of a kind say of the next one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from trimmer.guidance.field import FEATURES, Array, FieldBelief
from trimmer.guidance.general import column_scale, general_belief

OWN_WAY: Final = 0.15
"""Spread over units of a kind assumed while few are known, relative to the column's own size."""
FLOOR_SPREAD: Final = 0.004
"""Spread of a part's value at the best setting over units, while few are known."""
PRIOR_UNITS: Final = 2.0
"""How many units the assumed spread counts for."""


@dataclass(frozen=True, slots=True, eq=False)
class Learned:
    """The response of one unit around its best setting, as learned by turning."""

    orders: int
    """Highest order K."""
    weights: Array
    """Shape (2(K-1), 10): value, columns (per travel, plus clockwise) and curvature. Read-only."""
    covariance: Array
    """Shape (2(K-1), 10, 10). Read-only."""
    travel_turns: float
    """Mechanical travel of the trims, turns."""
    fundamental_hz: float
    """Where it was learned, Hz."""

    def __post_init__(self) -> None:
        for name in ("weights", "covariance"):
            values = np.array(getattr(self, name), dtype=np.float64, copy=True)
            values.flags.writeable = False
            object.__setattr__(self, name, values)

    @property
    def columns(self) -> Array:
        """Shape (2, 2(K-1)), parts per travel for upper and lower at the best setting."""
        return self.weights[:, 1:3].T

    @property
    def columns_sigma(self) -> Array:
        """Shape (2, 2(K-1)), standard uncertainty of `columns`."""
        index = np.arange(1, 3)
        return np.asarray(np.sqrt(self.covariance[:, index, index]).T)

    def to_document(self) -> dict[str, Any]:
        """Give a JSON-able document."""
        return {
            "version": 1,
            "orders": self.orders,
            "weights": self.weights.tolist(),
            "covariance": self.covariance.tolist(),
            "travel_turns": self.travel_turns,
            "fundamental_hz": self.fundamental_hz,
        }

    @classmethod
    def from_document(cls, document: dict[str, Any]) -> Learned:
        """Read it back; raises ValueError where it is not such a document."""
        if document.get("version") != 1:
            raise ValueError(f"learned response of version {document.get('version')!r}, not 1")
        orders = int(document["orders"])
        weights = np.array(document["weights"], dtype=np.float64)
        covariance = np.array(document["covariance"], dtype=np.float64)
        m = 2 * (orders - 1)
        if weights.shape != (m, FEATURES) or covariance.shape != (m, FEATURES, FEATURES):
            raise ValueError("learned response with the wrong number of parts")
        return cls(
            orders,
            weights,
            covariance,
            float(document["travel_turns"]),
            float(document["fundamental_hz"]),
        )


@dataclass(frozen=True, slots=True, eq=False)
class KindPrior:
    """Belief about the next unit of a kind, at its best setting."""

    orders: int
    """Highest order K."""
    weights: Array
    """Shape (2(K-1), 10). Read-only."""
    covariance: Array
    """Shape (2(K-1), 10, 10). Read-only."""
    units: int
    """Units it comes from."""

    def __post_init__(self) -> None:
        for name in ("weights", "covariance"):
            values = np.array(getattr(self, name), dtype=np.float64, copy=True)
            values.flags.writeable = False
            object.__setattr__(self, name, values)

    def belief(self, orders: int) -> FieldBelief:
        """Give the belief about the field, anchored at the best setting, for orders up to `orders`.

        Orders above the known ones are believed in general only.
        """
        general = general_belief(orders)
        mean, covariance = general.mean.copy(), general.covariance.copy()
        common = min(mean.shape[0], self.weights.shape[0])
        mean[:common] = self.weights[:common]
        covariance[:common] = self.covariance[:common]
        return FieldBelief(np.zeros(2), mean, covariance)

    def to_document(self) -> dict[str, Any]:
        """Give a JSON-able document."""
        return {
            "version": 1,
            "orders": self.orders,
            "weights": self.weights.tolist(),
            "covariance": self.covariance.tolist(),
            "units": self.units,
        }

    @classmethod
    def from_document(cls, document: dict[str, Any]) -> KindPrior:
        """Read it back; raises ValueError where it is not such a document."""
        if document.get("version") != 1:
            raise ValueError(f"kind of version {document.get('version')!r}, not 1")
        return cls(
            int(document["orders"]),
            np.array(document["weights"], dtype=np.float64),
            np.array(document["covariance"], dtype=np.float64),
            int(document["units"]),
        )

    @classmethod
    def from_units(cls, units: Sequence[Learned]) -> KindPrior:
        """Combine units of one kind; an odd one among several hardly counts.

        Every weight is thought to scatter over units about a common mean. Units are weighted by a
        Student distribution over their distance from the others, found by iteration, so that one
        whose trims are wired the other way round, or that was learned badly, does not spoil it.

        Raises
        ------
        ValueError
            Where there is no unit.
        """
        if not units:
            raise ValueError("a kind needs at least one unit")
        orders = min(u.orders for u in units)
        m = 2 * (orders - 1)
        values = np.array([u.weights[:m] for u in units])
        own = np.array([np.einsum("kff->kf", u.covariance[:m]) for u in units])
        general = np.sqrt(np.einsum("kff->kf", general_belief(orders).covariance))
        assumed = _assumed_spread(orders, general)
        mean = np.median(values, axis=0)
        spread = assumed**2
        count = np.ones(len(units))
        for _ in range(12):
            trust = count[:, None, None] / (own + spread)
            mean = (trust * values).sum(axis=0) / trust.sum(axis=0)
            off = values - mean
            seen = (count[:, None, None] * np.maximum(off**2 - own, 0.0)).sum(axis=0)
            spread = (PRIOR_UNITS * assumed**2 + seen) / (PRIOR_UNITS + count.sum())
            distance = np.mean(off[:, :, :3] ** 2 / (own + spread)[:, :, :3], axis=(1, 2))
            count = np.minimum(1.0, 3.0 / np.maximum(distance, 1e-9))
        trust = count[:, None, None] / (own + spread)
        variance = spread + 1.0 / trust.sum(axis=0)
        covariance = np.zeros((m, FEATURES, FEATURES))
        index = np.arange(FEATURES)
        covariance[:, index, index] = variance
        return cls(orders, mean, covariance, len(units))


def _assumed_spread(orders: int, general: Array) -> Array:
    """Spread over units of each weight before enough of them are known; shape (m, 10)."""
    scale = column_scale(orders)
    spread = OWN_WAY * general
    spread[:, 0] = FLOOR_SPREAD * np.maximum(scale / scale[0], 0.05)
    spread[1::2, 0] = FLOOR_SPREAD * (2.0 / np.arange(2, orders + 1)) ** 2
    return spread
