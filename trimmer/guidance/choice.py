"""Which trim next, which way, how far: the plan with the least expected distortion at its end."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from trimmer.guidance import words
from trimmer.guidance.estimate import Estimate
from trimmer.guidance.field import Array
from trimmer.guidance.general import column_scale
from trimmer.guidance.hand import Hand
from trimmer.guidance.outlook import Outlook
from trimmer.guidance.record import Record

FIRST_SHARE: Final = 0.08
"""First turn of a trim of which nothing is known, share of the travel."""
LONGEST_BLIND_SHARE: Final = 0.10
"""Longest turn while its sense is a guess."""
SHORTEST_PROBE: Final = 0.03
"""Shortest turn that teaches a column."""


@dataclass(frozen=True, slots=True)
class Choice:
    """A turn to ask for."""

    trim: int
    """0 upper, 1 lower."""
    share: float
    """Signed share of the travel to ask for, play included."""
    way: float
    """Signed share of the travel it is to make."""
    expected_thd: float | None
    """THD expected after it."""
    rises: bool
    """Whether THD is expected to rise first."""
    reason: str
    """One sentence."""


def crest_weights(orders: int) -> tuple[Array, Array]:
    """Give the weights of crest parts in the pointedness of the upper and of the lower crest."""
    k = np.arange(2, orders + 1)
    upper = 1.0 - np.cos(k * np.pi / 4.0)
    return upper, upper * np.where(k % 2 == 0, -1.0, 1.0)


def worse_crest(parts: Array) -> int:
    """Tell which crest is further from a sine's: 0 upper, 1 lower."""
    upper, lower = crest_weights(parts.size // 2 + 1)
    crest = parts[0::2]
    return 0 if abs(upper @ crest) >= abs(lower @ crest) else 1


def first_size(parts: Array) -> float:
    """Give the size of a first turn: no longer than the likely way to the best setting."""
    scale = column_scale(parts.size // 2 + 1)
    return _clip_probe(_likely_way(parts, scale), FIRST_SHARE)


def _clip_probe(size: float, longest: float) -> float:
    return float(np.clip(size, SHORTEST_PROBE, longest))


def _likely_way(parts: Array, column: Array) -> float:
    """Way of one trim to the joint best, were the other's column this one's mirror."""
    crest, reach = parts[0::2], column[0::2]
    even, odd = slice(0, None, 2), slice(1, None, 2)
    by_even = (crest[even] @ reach[even]) / (reach[even] @ reach[even])
    by_odd = (crest[odd] @ reach[odd]) / (reach[odd] @ reach[odd])
    return float(0.5 * max(abs(by_even + by_odd), abs(by_even - by_odd)))


def mirrored_way(parts: Array, column: Array) -> float:
    """Give the signed way of the other trim, its column being the mirror of a known one.

    With columns ``j`` and ``m j`` (`m` turns the sign of even orders) the joint problem falls into
    its even and its odd half, one unknown each.
    """
    crest, reach = parts[0::2], column[0::2]
    even, odd = slice(0, None, 2), slice(1, None, 2)
    both = -(crest[odd] @ reach[odd]) / (reach[odd] @ reach[odd] + 1e-12)
    apart = -(crest[even] @ reach[even]) / (reach[even] @ reach[even] + 1e-12)
    return 0.5 * float(both - apart)


def choose(
    est: Estimate, record: Record, hand: Hand, trims: tuple[int, ...] = (0, 1)
) -> Choice | None:
    """Choose the next turn among `trims`; None where no turn is worth making."""
    outlook = Outlook(est, record, hand, trims)
    if outlook.is_there():
        return None
    plans = [(outlook.turns_after(t, way), t, way) for t in trims for way in outlook.ways(t)]
    plan = next((p for p in sorted(plans) if outlook.is_worth(p[1], p[2])), None)
    if plan is None:
        return None
    _, trim, way = plan
    thd = outlook.thd_after(trim, way)
    rises = thd > 1.02 * outlook.thd_now
    reason = words.RISES if rises else words.NEARER
    if thd < 1.1 * est.floor_thd:
        reason = words.LAST_BIT
    return Choice(trim, est.habit.to_ask(record.moves, trim, way), way, thd, rises, reason)
