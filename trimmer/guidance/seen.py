"""A reading reduced to what the guide keeps of it, fit for a document."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from trimmer.guidance.field import Array
from trimmer.measurement.reading import Reading

FIXED_WANDERS = 0.15
"""Share of the digitiser's own error that changes as the wave changes from turn to turn."""
SMALLEST_SIGMA = 2e-6
"""No reading is taken as surer than this: what is left is the unit's own jitter."""


@dataclass(frozen=True, slots=True, eq=False)
class Seen:
    """Parts of a reading with their variances, and the figures that rules need."""

    parts: Array
    """Shape (2(K-1),)."""
    variance: Array
    """Shape (2(K-1),), variance of what changes from reading to reading."""
    fixed: Array
    """Shape (2(K-1),), variance of what is the same in every reading (the digitiser's own)."""
    thd: float
    """Ratio, noise-corrected."""
    thd_sigma: float
    """Its standard uncertainty."""
    fundamental_hz: float
    """Hz."""
    amplitude: float
    """Peak of the fundamental."""
    flags: tuple[str, ...] = ()
    """Codes of the reading's flags."""

    @property
    def orders(self) -> int:
        """K, the highest order."""
        return self.parts.size // 2 + 1


def seen(reading: Reading) -> Seen:
    """Reduce a reading."""
    own = np.maximum(np.diag(reading.random_covariance), SMALLEST_SIGMA**2)
    fixed = np.diag(reading.systematic) if reading.systematic.size else np.zeros(own.size)
    return Seen(
        parts=np.array(reading.parts, dtype=np.float64),
        variance=own + FIXED_WANDERS**2 * fixed,
        fixed=np.array(fixed, dtype=np.float64),
        thd=reading.thd.value,
        thd_sigma=reading.thd.sigma,
        fundamental_hz=reading.fundamental_hz,
        amplitude=reading.amplitude,
        flags=tuple(flag.code for flag in reading.flags),
    )


UNREAD = 1e6
"""Variance of the parts of a place that was passed but not read."""


def nothing_seen(like: Seen) -> Seen:
    """Give what stands for the reading of a place that was passed but not read."""
    size = like.parts.size
    return replace(
        like,
        parts=np.zeros(size),
        variance=np.full(size, UNREAD),
        thd=float("inf"),
        thd_sigma=float("inf"),
    )


def is_read(one: Seen) -> bool:
    """Tell whether it stands for a reading."""
    return bool(np.isfinite(one.thd))


def merged(readings: Sequence[Seen]) -> Seen:
    """Combine readings of one setting, each part weighted by its variance."""
    size = min(r.parts.size for r in readings)
    weights = np.array([1.0 / r.variance[:size] for r in readings])
    values = np.array([r.parts[:size] for r in readings])
    total = weights.sum(axis=0)
    best = min(readings, key=lambda r: r.thd_sigma)
    return Seen(
        parts=(weights * values).sum(axis=0) / total,
        variance=1.0 / total,
        fixed=readings[-1].fixed[:size],
        thd=best.thd,
        thd_sigma=best.thd_sigma,
        fundamental_hz=best.fundamental_hz,
        amplitude=best.amplitude,
        flags=readings[-1].flags,
    )


def seen_document(one: Seen) -> dict[str, Any]:
    """Give a JSON-able document of it."""
    return {
        "parts": one.parts.tolist(),
        "variance": one.variance.tolist(),
        "fixed": one.fixed.tolist(),
        "thd": one.thd,
        "thd_sigma": one.thd_sigma,
        "fundamental_hz": one.fundamental_hz,
        "amplitude": one.amplitude,
        "flags": list(one.flags),
    }


def seen_from(document: dict[str, Any]) -> Seen:
    """Read it back."""
    return Seen(
        parts=np.array(document["parts"], dtype=np.float64),
        variance=np.array(document["variance"], dtype=np.float64),
        fixed=np.array(document["fixed"], dtype=np.float64),
        thd=float(document["thd"]),
        thd_sigma=float(document["thd_sigma"]),
        fundamental_hz=float(document["fundamental_hz"]),
        amplitude=float(document["amplitude"]),
        flags=tuple(str(f) for f in document["flags"]),
    )
