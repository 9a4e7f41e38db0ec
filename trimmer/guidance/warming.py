"""Trim cold, land hot: how the parts still change as a unit of a kind warms up."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from trimmer.guidance.field import Array
from trimmer.guidance.memory import read_only, table


@dataclass(frozen=True, slots=True, eq=False)
class Warming:
    """One warm-up of one unit, the trims left alone."""

    minutes: Array
    """Shape (n,), minutes since switch-on, ascending."""
    parts: Array
    """Shape (n, m), crest and skew parts."""


@dataclass(frozen=True, slots=True, eq=False)
class WarmDrift:
    """The change of the parts from now until the unit is warm, trims left alone."""

    change: Array
    """Shape (m,). Read-only."""
    sigma: Array
    """Shape (m,), standard uncertainty over units. Read-only."""
    warm_ups: int
    """Warm-ups it comes from."""

    def __post_init__(self) -> None:
        read_only(self, "change", "sigma")

    def to_document(self) -> dict[str, Any]:
        """Give a JSON-able document."""
        return {
            "version": 1,
            "change": self.change.tolist(),
            "sigma": self.sigma.tolist(),
            "warm_ups": self.warm_ups,
        }

    @classmethod
    def from_document(cls, document: dict[str, Any]) -> WarmDrift:
        """Read it back; raises ValueError where it is not such a document."""
        if document.get("version") != 1:
            raise ValueError(f"warm drift of version {document.get('version')!r}, not 1")
        change = np.array(document["change"], dtype=np.float64)
        return cls(change, table(document["sigma"], change.shape), int(document["warm_ups"]))

    @classmethod
    def from_warm_ups(cls, warm_ups: Sequence[Warming], minutes: float) -> WarmDrift | None:
        """Give what earlier warm-ups of the kind say of a unit that has been on for some minutes.

        The median over warm-ups, so that one odd unit does not spoil it, and its spread: 1.4826
        times the median deviation, and no less than a quarter of the change itself while there are
        few of them.

        Returns
        -------
        WarmDrift or None
            None where no warm-up covers the time from now on.
        """
        useful = [w for w in warm_ups if w.minutes.size >= 2 and w.minutes[0] <= minutes]
        if not useful:
            return None
        size = min(w.parts.shape[1] for w in useful)
        changes = np.array([w.parts[-1, :size] - _at(w, minutes)[:size] for w in useful])
        change = np.median(changes, axis=0)
        spread = 1.4826 * np.median(np.abs(changes - change), axis=0)
        few = 0.25 * np.abs(change) / np.sqrt(len(useful))
        return cls(change, np.maximum(spread, few), len(useful))


def _at(warming: Warming, minutes: float) -> Array:
    """Parts at a time, between the two readings around it."""
    return np.array([np.interp(minutes, warming.minutes, part) for part in warming.parts.T])
