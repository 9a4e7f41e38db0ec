"""What is left when the trims are done, by cause."""

from __future__ import annotations

import importlib
from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

from trimmer.guidance.advice import Cause
from trimmer.guidance.field import Array
from trimmer.guidance.seen import Seen
from trimmer.measurement.reading import Reading

SKEW_PER_DUTY = 1.132
"""s_2 of any near-sine for each unit of ``rise share - 1/2``."""


def remainder(reading: Reading | None, last: Seen, basis: Array | None) -> tuple[Cause, ...]:
    """Name the causes of what the trims do not reach, largest first.

    Parameters
    ----------
    reading
        The last reading itself, where it is at hand.
    last
        The same, reduced.
    basis
        Shape (m, r), orthonormal basis of what the trims reach; None where it is not known.
    """
    diagnose = _diagnosis()
    if diagnose is not None and reading is not None:
        items = diagnose([reading], reach=basis)
        return tuple(Cause(i.cause, i.thd, i.remedy, i.thd_sigma) for i in items)
    return split(last, basis)


def _diagnosis() -> Callable[..., Sequence[Any]] | None:
    """Find the measurement's diagnosis, where this installation has it."""
    found = getattr(importlib.import_module("trimmer.measurement"), "diagnose", None)
    return found if callable(found) else None


def split(last: Seen, basis: Array | None) -> tuple[Cause, ...]:
    """Split by symmetry alone: even skew, odd skew, crest parts that the trims do not reach."""
    parts = last.parts
    left = parts.copy()
    if basis is not None:
        size = min(parts.size, basis.shape[0])
        left[:size] -= basis[:size] @ (basis[:size].T @ parts[:size])
    orders = np.arange(2, last.orders + 1)
    even = orders % 2 == 0
    skew, crest = parts[1::2], left[0::2]
    variance = last.variance
    causes = [
        _cause(
            "time-symmetry",
            skew[even],
            variance[1::2][even],
            "Set the time symmetry first: rise and fall must take the same time.",
        ),
        _cause(
            "bandwidth",
            skew[~even],
            variance[1::2][~even],
            "Check what loads or slows the output; compare at a lower frequency.",
        ),
        _cause("shaper", crest, variance[0::2], "Leave the trims: this is the shaper's own limit."),
    ]
    return tuple(sorted((c for c in causes if c is not None), key=lambda c: -c.thd))


def _cause(name: str, parts: Array, variance: Array, remedy: str) -> Cause | None:
    noise = float(np.sum(variance))
    square = float(parts @ parts)
    if square <= 2.0 * noise:
        return None
    thd = float(np.sqrt(square - noise))
    sigma = float(np.sqrt(np.sum(variance * parts**2))) / thd
    return Cause(name, thd, remedy, sigma)
