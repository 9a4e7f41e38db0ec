"""What one unit taught, and what many units of a kind say of the next one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from trimmer.guidance.field import FEATURES, Array, FieldBelief
from trimmer.guidance.general import column_scale, general_sigma
from trimmer.guidance.warp import Warp, own_bend, to_plain, warp_matrix

OWN_WAY: Final = 0.15
"""Spread of a column's shape over units of a kind while few are known, over the column's size."""
FLOOR_SPREAD: Final = 0.003
"""Spread of the parts at the best setting over units, while few are known."""
BEND_SPREAD: Final = 1.0
"""Spread of a trim's own bend over kinds, per travel."""
PRIOR_UNITS: Final = 2.0
"""How many units the assumed spreads count for."""
ODD: Final = 3.0
"""Squared distance, over what is usual, from which on a unit counts for less."""
ROUNDS: Final = 12


def read_only(holder: object, *names: str) -> None:
    """Copy the named arrays of a frozen value and make them read-only."""
    for name in names:
        values = np.array(getattr(holder, name), dtype=np.float64, copy=True)
        values.flags.writeable = False
        object.__setattr__(holder, name, values)


@dataclass(frozen=True, slots=True, eq=False)
class Learned:
    """The response of one unit around its best setting, as learned by turning."""

    orders: int
    """Highest order K."""
    weights: Array
    """Shape (2(K-1), 10): value, columns (per travel, plus clockwise) and curvature. Read-only."""
    sigma: Array
    """Shape (2(K-1), 10), standard uncertainty of `weights` in the unit's own scale: how far the
    hand really turned is not in it. Read-only."""
    columns_sigma: Array
    """Shape (2, 2(K-1)), standard uncertainty of `columns`, the hand's included. Read-only."""
    travel_turns: float
    """Mechanical travel of the trims, turns."""
    fundamental_hz: float
    """Where it was learned, Hz."""

    def __post_init__(self) -> None:
        read_only(self, "weights", "sigma", "columns_sigma")

    @property
    def columns(self) -> Array:
        """Shape (2, 2(K-1)), parts per travel for upper and lower at the best setting."""
        return self.weights[:, 1:3].T

    @property
    def floor_parts(self) -> Array:
        """Shape (2(K-1),), parts left at the best setting."""
        return self.weights[:, 0]

    def to_document(self) -> dict[str, Any]:
        """Give a JSON-able document."""
        return {
            "version": 1,
            "orders": self.orders,
            "weights": self.weights.tolist(),
            "sigma": self.sigma.tolist(),
            "columns_sigma": self.columns_sigma.tolist(),
            "travel_turns": self.travel_turns,
            "fundamental_hz": self.fundamental_hz,
        }

    @classmethod
    def from_document(cls, document: dict[str, Any]) -> Learned:
        """Read it back; raises ValueError where it is not such a document."""
        if document.get("version") != 1:
            raise ValueError(f"learned response of version {document.get('version')!r}, not 1")
        orders = int(document["orders"])
        m = 2 * (orders - 1)
        return cls(
            orders=orders,
            weights=table(document["weights"], (m, FEATURES)),
            sigma=table(document["sigma"], (m, FEATURES)),
            columns_sigma=table(document["columns_sigma"], (2, m)),
            travel_turns=float(document["travel_turns"]),
            fundamental_hz=float(document["fundamental_hz"]),
        )


def table(values: Any, shape: tuple[int, ...]) -> Array:
    """Read an array of finite numbers of a document; raises ValueError where it is not one."""
    table = np.array(values, dtype=np.float64)
    if table.shape != shape or not np.all(np.isfinite(table)):
        raise ValueError(f"a table of shape {table.shape} where finite numbers {shape} belong")
    return table


@dataclass(frozen=True, slots=True, eq=False)
class KindPrior:
    """Belief about the next unit of a kind, at its best setting."""

    orders: int
    """Highest order K."""
    weights: Array
    """Shape (2(K-1), 10). Read-only."""
    sigma: Array
    """Shape (2(K-1), 10), spread over units and uncertainty of `weights` together. Read-only."""
    units: int
    """Units it comes from."""

    def __post_init__(self) -> None:
        read_only(self, "weights", "sigma")

    def belief(self, orders: int) -> FieldBelief:
        """Give the belief about the field, anchored at the best setting, for orders up to `orders`.

        Orders above the known ones are believed in general only.
        """
        sigma = general_sigma(orders)
        mean = np.zeros_like(sigma)
        common = min(mean.shape[0], self.weights.shape[0])
        mean[:common] = self.weights[:common]
        sigma[:common] = self.sigma[:common]
        return FieldBelief(np.zeros(2), mean, sigma[:, :, None] ** 2 * np.eye(FEATURES))

    def turned(self, upper: bool, lower: bool) -> KindPrior:
        """Give the same kind with trims that work the other way round."""
        m = warp_matrix(Warp(-1.0 if upper else 1.0), Warp(-1.0 if lower else 1.0))
        return KindPrior(self.orders, self.weights @ m.T, self.sigma, self.units)

    def to_document(self) -> dict[str, Any]:
        """Give a JSON-able document."""
        return {
            "version": 1,
            "orders": self.orders,
            "weights": self.weights.tolist(),
            "sigma": self.sigma.tolist(),
            "units": self.units,
        }

    @classmethod
    def from_document(cls, document: dict[str, Any]) -> KindPrior:
        """Read it back; raises ValueError where it is not such a document."""
        if document.get("version") != 1:
            raise ValueError(f"kind of version {document.get('version')!r}, not 1")
        orders = int(document["orders"])
        shape = (2 * (orders - 1), FEATURES)
        return cls(
            orders,
            table(document["weights"], shape),
            table(document["sigma"], shape),
            int(document["units"]),
        )

    @classmethod
    def from_units(cls, units: Sequence[Learned]) -> KindPrior:
        """Combine units of one kind; an odd one among several hardly counts.

        Every unit is first brought to one scale (see `trimmer.guidance.warp`). Then every weight is
        thought to scatter over units about a common mean, with a spread that is itself estimated,
        starting from what is usual. A unit far from the others, by all its columns together, counts
        for less, as under a Student distribution: one whose trims are wired the other way round, or
        that was learned badly, does not spoil the kind.

        Raises
        ------
        ValueError
            Where there is no unit.
        """
        if not units:
            raise ValueError("a kind needs at least one unit")
        orders = min(u.orders for u in units)
        m = 2 * (orders - 1)
        raw = np.array([u.weights[:m] for u in units])
        own = np.array([u.sigma[:m] ** 2 for u in units])
        template = raw[_most_central(raw)]
        values = np.array([_plain(w, template) for w in raw])
        mean, spread, count = _robust_mean(values, own, _usual_spread(orders))
        trust = count[:, None, None] / (own + spread)
        sigma = np.sqrt(spread + 1.0 / trust.sum(axis=0))
        return cls(orders, _with_own_scale(mean, raw, template, count), sigma, len(units))


def _most_central(raw: Array) -> int:
    """Index of the unit whose columns are nearest to the others': least median distance."""
    columns = raw[:, :, 1:3]
    apart = np.sum((columns[:, None] - columns[None]) ** 2, axis=(2, 3))
    return int(np.argmin(np.median(apart, axis=1)))


def _plain(weights: Array, template: Array) -> Array:
    """Bring a field to the plain scale of a template; a trim turned round keeps its sign."""
    upper, lower = to_plain(weights, template)
    return np.asarray(weights @ warp_matrix(_same_way(upper), _same_way(lower)).T)


def _same_way(warp: Warp) -> Warp:
    """Leave a trim alone that works the other way round or hardly answers: it is an odd one."""
    return warp if 0.4 < warp.scale < 2.5 else Warp(1.0)


def _robust_mean(values: Array, own: Array, usual: Array) -> tuple[Array, Array, Array]:
    """Mean over units, variance over units, and how much each unit counts (0 to 1)."""
    mean = np.median(values, axis=0)
    spread = usual**2
    count = np.ones(len(values))
    for _ in range(ROUNDS):
        off = values - mean
        distance = np.mean(off[:, :, 1:3] ** 2 / (own + spread)[:, :, 1:3], axis=(1, 2))
        count = np.minimum(1.0, ODD / np.maximum(distance, 1e-9)) ** 2
        trust = count[:, None, None] / (own + spread)
        mean = (trust * values).sum(axis=0) / trust.sum(axis=0)
        seen = (count[:, None, None] * np.maximum((values - mean) ** 2 - own, 0.0)).sum(axis=0)
        spread = (PRIOR_UNITS * usual**2 + seen) / (PRIOR_UNITS + count.sum())
    return mean, spread, count


def _with_own_scale(mean: Array, raw: Array, template: Array, count: Array) -> Array:
    """Give the mean field the scale, and the bend along each trim, that units have in common."""
    warps = []
    for trim in (0, 1):
        scales = np.array([_same_way(to_plain(w, template)[trim]).scale for w in raw])
        bends = np.array([own_bend(w, trim) for w in raw]) * scales
        scale = float(np.exp(-(count @ np.log(scales)) / count.sum()))
        bend = float(count @ bends) / (float(count.sum()) + 1.0 / BEND_SPREAD**2)
        warps.append(Warp(scale, scale**2 * bend))
    return np.asarray(mean @ warp_matrix(warps[0], warps[1]).T)


def _usual_spread(orders: int) -> Array:
    """Spread over units of each weight before enough of them are known; shape (m, 10)."""
    spread = OWN_WAY * general_sigma(orders)
    scale = column_scale(orders)
    spread[:, 0] = FLOOR_SPREAD * np.maximum(scale / scale[0], 0.05)
    spread[1::2, 0] = FLOOR_SPREAD * (2.0 / np.arange(2, orders + 1)) ** 2
    return spread
