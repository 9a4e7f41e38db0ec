"""Which trim next, which way, how far: the plan with the fewest turns still to make."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from trimmer.guidance import words
from trimmer.guidance.crests import worse_crest
from trimmer.guidance.estimate import Estimate
from trimmer.guidance.field import Array
from trimmer.guidance.general import column_scale
from trimmer.guidance.hand import Hand
from trimmer.guidance.knowledge import Knowledge
from trimmer.guidance.outlook import GOOD_SHARE, GOOD_THD, Outlook
from trimmer.guidance.record import Record

FIRST_SHARE: Final = 0.08
"""First turn of a trim of which nothing is known, share of the travel."""
LONGEST_GUESS: Final = 0.10
"""Longest turn while its sense is a guess."""
SHORTEST_PROBE: Final = 0.04
"""Shortest turn that teaches a column."""
LAST_BIT: Final = 1.1
"""A turn that is to end within this times the floor is a last bit."""


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
    rises = thd > 1.02 * record.here.thd
    reason = words.RISES if rises else words.NEARER
    if thd < LAST_BIT * est.floor_thd and abs(way) < SHORTEST_PROBE:
        reason = words.LAST_BIT
    return Choice(trim, est.habit.to_ask(record.moves, trim, way), way, thd, rises, reason)


def go_back(est: Estimate, record: Record, hand: Hand) -> Choice | None:
    """Choose the turn that goes back towards the best setting seen; None where this is as good."""
    thds = record.thds()
    best = int(np.argmin(thds))
    margin = max(GOOD_SHARE * thds[best], GOOD_THD) + 2.0 * record.here.thd_sigma
    if thds[-1] - thds[best] < margin:
        return None
    ways = est.found.places[record.readable()[best]] - est.here
    trim = int(np.argmax(np.abs(ways)))
    way = float(ways[trim])
    if abs(way) < hand.jitter:
        return None
    share = est.habit.to_ask(record.moves, trim, way)
    return Choice(trim, share, way, None, False, words.BEST_SEEN)


def probe(know: Knowledge, unknown: list[int], skipped: int | None) -> Choice:
    """Choose a turn that teaches a column, as useful a one as can be.

    Parameters
    ----------
    know
        What is known so far.
    unknown
        The trims to choose from.
    skipped
        A trim whose turn was passed over: the other one first.
    """
    est = know.estimate
    assert est is not None
    parts = know.record.here.parts[: 2 * (know.record.orders - 1)]
    worse = worse_crest(parts)
    dead = [len(know.dead_senses(t)) for t in (0, 1)]
    trim = min(unknown, key=lambda t: (t == skipped, dead[t], t != worse))
    other_known = est.known[1 - trim]
    way = first_size(parts)
    if other_known:
        guess = mirrored_way(parts, est.belief.columns(est.here)[1 - trim])
        size = float(np.clip(abs(guess), SHORTEST_PROBE, LONGEST_GUESS))
        way = size if guess >= 0.0 else -size
    if dead[trim]:
        way = -know.dead_senses(trim)[-1] * abs(way)
        reason = words.OTHER_SENSE
    elif dead[1 - trim] and not know.record.moves[-1].told:
        reason = words.OTHER_TRIM
    else:
        reason = words.FIRST if trim == worse and not other_known else words.FIRST_OTHER
    share = est.habit.to_ask(know.record.moves, trim, way)
    return Choice(trim, share, way, None, False, reason.format(trim=words.TRIMS[trim]))


def other_sense(know: Knowledge, trim: int) -> Choice:
    """Choose the turn that tells an end stop from an open wiper: the other sense."""
    est = know.estimate
    assert est is not None
    way = -know.dead_senses(trim)[-1] * SHORTEST_PROBE
    share = est.habit.to_ask(know.record.moves, trim, way)
    return Choice(trim, share, way, None, False, words.OTHER_SENSE)


def first_size(parts: Array) -> float:
    """Give the size of a first turn: no longer than the likely way to the best setting."""
    both, apart = _halves(parts, column_scale(parts.size // 2 + 1))
    likely = 0.5 * max(abs(both + apart), abs(both - apart))
    return float(np.clip(likely, SHORTEST_PROBE, FIRST_SHARE))


def mirrored_way(parts: Array, column: Array) -> float:
    """Give the signed way of the other trim, its column being the mirror of a known one.

    With columns ``j`` and ``m j`` (`m` turns the sign of even orders) the joint problem falls into
    its even and its odd half, one unknown each.
    """
    both, apart = _halves(parts, column)
    return 0.5 * (both - apart)


def _halves(parts: Array, column: Array) -> tuple[float, float]:
    """Sum and difference of the two trims' ways, from odd and from even crest parts."""
    crest, reach = parts[0::2], column[0::2]
    ways = [
        -float(crest[half] @ reach[half]) / (float(reach[half] @ reach[half]) + 1e-12)
        for half in (slice(1, None, 2), slice(0, None, 2))
    ]
    return ways[0], ways[1]
