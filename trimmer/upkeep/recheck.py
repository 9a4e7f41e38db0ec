"""Whether a unit still is as its sheet says, has drifted, or is worth trimming again."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np

from trimmer.guidance import Learned
from trimmer.guidance.advice import Advice, Sense, Trim
from trimmer.guidance.warming import WarmDrift, Warming
from trimmer.measurement import cut_to
from trimmer.measurement.reading import Reading
from trimmer.upkeep.changes import Change, changes, is_called
from trimmer.upkeep.drift import LEAST_SPREAD
from trimmer.upkeep.retrim import NO_TURNS, Retrim, retrim

Verdict = Literal["holds", "drifted", "retrim"]

WORTH_SHARE: Final = 0.05
"""Retrimming is worth it from this gain on, relative to the THD it leads to,"""
WORTH_POINTS: Final = 2e-4
"""or this, ratio; the larger of the two."""
WARMING: Final = 2.0
"""Deviation from a kind's usual drift, in its spread, up to which a change is called that drift."""
MOSTLY: Final = 0.5
"""Share of the change that the usual drift must explain to be named."""
CREST_SHARE: Final = 0.7
"""Share of the change (of its square) in crest parts from which on it looks like the trims'."""


@dataclass(frozen=True, slots=True)
class Recheck:
    """The result of a recheck."""

    verdict: Verdict
    """It holds; it changed, and trimming would not help; trimming again is worth it."""
    changes: tuple[Change, ...]
    """Quantity by quantity; THD first."""
    thd: float
    """THD now, ratio."""
    thd_logged: float
    """THD as logged, ratio."""
    advice: tuple[Advice, ...]
    """Turns, in order, where trimming again is worth it and the unit's own response is known."""
    warming_minutes: float | None
    """Minutes since switch-on at which units of its kind look like this; None where they do not."""
    reason: str
    """Why, in one sentence for the person."""


def rechecked(
    now: Reading,
    logged: Reading,
    *,
    same_input: bool,
    learned: Learned | None = None,
    warm_ups: Sequence[Warming] = (),
    minutes: float | None = None,
    last: Mapping[Trim, Sense] = NO_TURNS,
) -> Recheck:
    """Hold a reading against the logged one.

    Parameters
    ----------
    now, logged
        At the same setting of the dial.
    same_input
        True where both were read through the same input at the same range.
    learned
        What the unit's trims taught; None where nothing is known.
    warm_ups
        Earlier warm-ups of the kind.
    minutes
        Minutes since switch-on, where they are known.
    last
        Which way each trim was turned last, as far as it is known.
    """
    found = changes(now, logged, same_input=same_input)
    thds = (now.thd.value, logged.thd.value)
    if not is_called(found):
        reason = "Nothing has changed by more than its uncertainty."
        return Recheck("holds", found, *thds, (), None, reason)
    warming = _warming(now, logged, warm_ups, minutes)
    if warming is not None:
        reason = (
            "It differs as units of its kind do while they warm up: let it warm, and check again."
        )
        return Recheck("drifted", found, *thds, (), warming, reason)
    if learned is not None:
        plan = retrim(now, learned, last)
        if _worth(now, plan):
            reason = "It has changed, and its trims can take most of that back."
            return Recheck("retrim", found, *thds, plan.advice, None, reason)
        reason = "It has changed, in a way its trims cannot better."
        return Recheck("drifted", found, *thds, (), None, reason)
    if _looks_trimmable(now, logged):
        reason = "Its crests have changed; its own response is not known, so trim it anew."
        return Recheck("retrim", found, *thds, (), None, reason)
    return Recheck("drifted", found, *thds, (), None, "It has changed, but not for the worse.")


def _worth(now: Reading, plan: Retrim) -> bool:
    gain = now.thd.value - plan.expected_thd
    least = max(WORTH_SHARE * plan.expected_thd, WORTH_POINTS, 2.0 * now.random_thd_sigma)
    return bool(plan.advice) and gain >= least


def _looks_trimmable(now: Reading, logged: Reading) -> bool:
    orders = min(now.orders, logged.orders)
    off = cut_to(now, orders).parts - cut_to(logged, orders).parts
    rise = now.thd.value - logged.thd.value
    crest = float(off[0::2] @ off[0::2]) / max(float(off @ off), 1e-300)
    return crest >= CREST_SHARE and rise >= max(WORTH_SHARE * logged.thd.value, WORTH_POINTS)


def _warming(
    now: Reading, logged: Reading, warm_ups: Sequence[Warming], minutes: float | None
) -> float | None:
    """Find the minute at which units of the kind differ from warm as this one does from its sheet."""
    if not warm_ups:
        return None
    first = min(float(each.minutes[0]) for each in warm_ups)
    last = max(float(each.minutes[-1]) for each in warm_ups)
    tried = [minutes] if minutes is not None else [*np.linspace(first, last, 40)]
    size = 2 * (min(now.orders, logged.orders) - 1)
    off = now.parts[:size] - logged.parts[:size]
    noise = np.diag(now.random_covariance)[:size] + np.diag(logged.random_covariance)[:size]
    best, at = math.inf, None
    for minute in tried:
        drift = WarmDrift.from_warm_ups(list(warm_ups), float(minute))
        if drift is None:
            continue
        common = min(size, drift.change.size)
        left = off[:common] + drift.change[:common]
        spread = drift.sigma[:common] ** 2 + noise[:common] + LEAST_SPREAD**2
        stray = float(np.sqrt(np.mean(left**2 / spread)))
        explains = float(np.linalg.norm(left)) <= (1.0 - MOSTLY) * float(np.linalg.norm(off))
        if explains and stray < min(best, WARMING):
            best, at = stray, float(minute)
    return at
