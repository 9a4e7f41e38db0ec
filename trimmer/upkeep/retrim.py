"""The turns that set a unit right again, from what its own trims once taught."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final

import numpy as np

from trimmer.guidance import Learned
from trimmer.guidance.advice import Advice, Sense, Trim
from trimmer.guidance.field import features, slopes
from trimmer.guidance.hand import hand_for
from trimmer.measurement import cut_to
from trimmer.measurement.reading import Reading
from trimmer.upkeep.channels import Array

WITHIN: Final = 0.35
"""How far a trim may be from its best, share of the travel: beyond, the learned response is no guide."""
ASTRAY: Final = 3e-4
"""How far a part may have moved by ageing alone, ratio."""
ROUNDS: Final = 25
NO_TURNS: Final[Mapping[Trim, Sense]] = MappingProxyType({})
TRIMS: Final[tuple[Trim, Trim]] = ("upper", "lower")


@dataclass(frozen=True, slots=True)
class Retrim:
    """How to set a unit right again."""

    expected_thd: float
    """THD after it, ratio."""
    advice: tuple[Advice, ...]
    """One turn for each trim that is worth turning, the more effective first; empty for none."""


def retrim(now: Reading, learned: Learned, last: Mapping[Trim, Sense] = NO_TURNS) -> Retrim:
    """Find the turns from a reading to the least THD.

    Where the trims stand is found first, as the setting at which the learned response comes nearest to
    the reading; what is left over has aged, and goes along to the setting with the least THD.

    Parameters
    ----------
    now
        The reading, at the frequency where the response was learned.
    learned
        What the unit taught, around its best setting.
    last
        Which way each trim was turned last, as far as it is known: a turn the other way loses the play
        of the screw, and is made longer by what is usual.
    """
    orders = min(now.orders, learned.orders)
    reading = cut_to(now, orders)
    size = reading.parts.size
    weights = learned.weights[:size]
    doubt = np.sqrt(
        np.diag(reading.random_covariance) + learned.sigma[:size, 0] ** 2 + _aged(orders) ** 2
    )
    stands = _nearest(weights, reading.parts, doubt, np.zeros(2))
    aged = reading.parts - weights @ features(stands)
    best = _nearest(weights, -aged, np.ones(size), np.zeros(2))
    noise = reading.noise_power

    def thd_at(place: Array) -> float:
        parts = aged + weights @ features(place)
        return math.sqrt(max(float(parts @ parts) - noise, 0.0))

    turns = (best - stands) * learned.travel_turns
    hand = hand_for(learned.travel_turns, followed=False)
    due = [i for i in (0, 1) if abs(best[i] - stands[i]) > hand.jitter]
    due.sort(key=lambda i: thd_at(_with(stands, i, float(best[i]))))
    advice = []
    at, before = stands, thd_at(stands)
    for i in due:
        at = _with(at, i, float(best[i]))
        after = thd_at(at)
        turn = float(turns[i])
        if TRIMS[i] in last and last[TRIMS[i]] != sense_of(turn):
            turn += math.copysign(hand.backlash * learned.travel_turns, turn)
        advice.append(_advice(TRIMS[i], turn, after, before, thd_at(best)))
        before = after
    return Retrim(thd_at(at), tuple(advice))


def sense_of(turns: float) -> Sense:
    """Give the sense of a turn; plus is clockwise."""
    return "clockwise" if turns > 0.0 else "counter-clockwise"


def _aged(orders: int) -> Array:
    """Size of the ageing of each part; it falls with the order as all else does."""
    return ASTRAY * np.repeat(2.0 / np.arange(2, orders + 1), 2)


def _with(place: Array, trim: int, value: float) -> Array:
    moved = place.copy()
    moved[trim] = value
    return moved


def _nearest(weights: Array, wanted: Array, doubt: Array, start: Array) -> Array:
    """Give the setting at which the field comes nearest to `wanted`, by damped least squares."""
    at, damping = start.copy(), 1e-3

    def off(place: Array) -> Array:
        return np.asarray((weights @ features(place) - wanted) / doubt)

    left = off(at)
    for _ in range(ROUNDS):
        jacobian = (weights @ slopes(at).T) / doubt[:, None]
        normal = jacobian.T @ jacobian
        step = np.linalg.solve(
            normal + damping * np.diag(np.diag(normal)) + 1e-12 * np.eye(2), -jacobian.T @ left
        )
        tried = np.clip(at + step, -WITHIN, WITHIN)
        found = off(tried)
        if found @ found < left @ left:
            small = float(np.max(np.abs(tried - at))) < 1e-7
            at, left, damping = tried, found, max(0.2 * damping, 1e-9)
            if small:
                break
        else:
            damping *= 10.0
    return at


def _advice(trim: Trim, turns: float, after: float, before: float, floor: float) -> Advice:
    return Advice(
        turn=0,
        trim=trim,
        sense=sense_of(turns),
        turns=abs(turns),
        expected_thd=after,
        floor_thd=floor,
        floor_sigma=None,
        reason="By what this unit's trims did when it was trimmed, this takes the change back.",
        rises_first=after > before,
    )
