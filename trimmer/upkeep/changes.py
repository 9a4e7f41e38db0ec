"""What changed between two readings of one unit, quantity by quantity, by uncertainty."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from scipy.special import chdtrc, ndtri

from trimmer.measurement import cut_to
from trimmer.measurement.figures import crests_of, rise_share_of
from trimmer.measurement.reading import Reading
from trimmer.upkeep.channels import Array

CALLED: Final = 2.7
"""Standard uncertainties from which on a change is called one. With five quantities looked at, one of
them strays so far by chance in less than 3 of 100 rechecks."""
DOUBTFUL: Final = 2.2
"""From here on it is read again, longer, before anything is said."""
CERTAIN: Final = 6.0
"""From here on reading longer adds nothing."""
SAME_LEVEL: Final = 0.02
"""Levels nearer than this, relative, meet the same codes of a digitiser."""


@dataclass(frozen=True, slots=True)
class Change:
    """One quantity, then and now."""

    name: str
    """``thd``, ``upper-crest``, ``lower-crest``, ``rise-share``, ``shape``; ``level``, ``offset``."""
    logged: float | None
    """As logged; None for ``shape``, which is all parts together."""
    now: float | None
    """As read now."""
    change: float
    """Now less logged; for ``shape`` the length of the change of all parts, noise taken off."""
    sigma: float
    """Standard uncertainty of `change`."""
    deviation: float
    """Change in standard uncertainties; for ``shape`` by its probability."""
    counts: bool
    """False for what the unit's own knobs set: it is told, and not held against the unit."""


def changes(now: Reading, logged: Reading, *, same_input: bool) -> tuple[Change, ...]:
    """Compare two readings of one unit.

    Parameters
    ----------
    now, logged
        At the same setting of the dial; compared over their common orders.
    same_input
        True where both were read through the same input at the same range. What the input itself adds is
        then the same in both and cancels, as long as the level is the same too.
    """
    orders = min(now.orders, logged.orders)
    now, logged = cut_to(now, orders), cut_to(logged, orders)
    near = abs(now.amplitude / logged.amplitude - 1.0) <= SAME_LEVEL
    cancels = same_input and near
    spread = _spread(now, cancels) + _spread(logged, cancels)
    return (
        _thd(now, logged, cancels),
        *_crests(now, logged, spread),
        _rise_share(now, logged, cancels),
        _shape(now.parts - logged.parts, spread),
        *_knobs(now, logged),
    )


def is_called(found: tuple[Change, ...]) -> bool:
    """Say whether anything that counts has changed."""
    return any(each.counts and abs(each.deviation) > CALLED for each in found)


def is_doubtful(found: tuple[Change, ...]) -> bool:
    """Say whether reading longer may tell whether anything has changed."""
    strays = [abs(each.deviation) for each in found if each.counts]
    return DOUBTFUL <= max(strays) < CERTAIN


def _spread(reading: Reading, cancels: bool) -> Array:
    return reading.random_covariance if cancels else reading.covariance


def _change(name: str, logged: float, now: float, sigma: float, *, counts: bool = True) -> Change:
    change = now - logged
    return Change(name, logged, now, change, sigma, change / max(sigma, 1e-300), counts)


def _thd(now: Reading, logged: Reading, cancels: bool) -> Change:
    sigmas = [r.random_thd_sigma if cancels else r.thd.sigma for r in (now, logged)]
    return _change("thd", logged.thd.value, now.thd.value, math.hypot(*sigmas))


def _crests(now: Reading, logged: Reading, spread: Array) -> tuple[Change, Change]:
    then, here = crests_of(logged.parts, spread), crests_of(now.parts, spread)
    return (
        _change("upper-crest", then.upper, here.upper, here.upper_sigma),
        _change("lower-crest", then.lower, here.lower, here.lower_sigma),
    )


def _rise_share(now: Reading, logged: Reading, cancels: bool) -> Change:
    then, then_sigma = rise_share_of(logged.parts, _spread(logged, cancels))
    here, here_sigma = rise_share_of(now.parts, _spread(now, cancels))
    return _change("rise-share", then, here, math.hypot(then_sigma, here_sigma))


def _shape(off: Array, spread: Array) -> Change:
    """All parts together: a chi-square with as many degrees of freedom as there are parts."""
    floor = 1e-12 * float(np.trace(spread)) / off.size + 1e-30
    square = float(off @ np.linalg.solve(spread + floor * np.eye(off.size), off))
    length = math.sqrt(max(float(off @ off) - float(np.trace(spread)), 0.0))
    along = off / max(float(np.linalg.norm(off)), 1e-300)
    sigma = math.sqrt(max(float(along @ spread @ along), 0.0))
    chance = float(chdtrc(off.size, square))
    deviation = float(-ndtri(max(0.5 * chance, 1e-300)))  # as rare as a deviation to either side
    return Change("shape", None, None, length, sigma, deviation, counts=True)


def _knobs(now: Reading, logged: Reading) -> list[Change]:
    found = []
    if now.has_volts and logged.has_volts:
        sigma = math.hypot(now.amplitude_sigma, logged.amplitude_sigma)
        found.append(_change("level", logged.amplitude, now.amplitude, sigma, counts=False))
        if not (now.ac_coupled or logged.ac_coupled):
            sigma = math.hypot(now.offset_sigma, logged.offset_sigma)
            found.append(_change("offset", logged.offset, now.offset, sigma, counts=False))
    return found
