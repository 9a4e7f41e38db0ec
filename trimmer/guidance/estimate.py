"""What is believed at this moment: the walk so far, the field, the best setting and its floor."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from trimmer.guidance.aim import Aim, Box
from trimmer.guidance.explain import Movement, explain
from trimmer.guidance.field import VALUE, Array, FieldBelief, features
from trimmer.guidance.floor import floor_at
from trimmer.guidance.general import general_belief
from trimmer.guidance.habit import Habit, habit
from trimmer.guidance.hand import Hand
from trimmer.guidance.memory import KindPrior
from trimmer.guidance.moves import Move
from trimmer.guidance.path import Found, Sizes, Walk, find_walk
from trimmer.guidance.record import Record
from trimmer.guidance.warming import WarmDrift

GENERAL_FREEDOM = 3.0
KIND_SCALE = 0.12
"""Spread over units of a kind of how far a turn goes in the kind's scale, relative."""
START_SIGMA = 0.3
"""Where a unit's trims stand from their best before anything is turned, share of the travel."""

_AXIS = np.linspace(-0.9, 0.9, 25)
_GRID = np.stack(np.meshgrid(_AXIS, _AXIS), axis=-1).reshape(-1, 2)


@dataclass(frozen=True, slots=True, eq=False)
class Offsets:
    """What is added to the field before the trims are aimed at it."""

    warm: WarmDrift | None = None
    """The change until the unit is warm: reckoned with."""
    foreign: Array | None = None
    """Shape (m,), parts that the trims must not be used to hide: left out."""

    def aimed(self, belief: FieldBelief) -> FieldBelief:
        """Give the field to aim at."""
        warm = self._warm(belief)
        if self.foreign is None:
            return warm
        return _shifted(warm, -self.foreign, np.zeros(self.foreign.size))

    def warmed(self, found: Found) -> Found:
        """Give the walk with the field as it will be when warm."""
        return found if self.warm is None else replace(found, belief=self._warm(found.belief))

    def _warm(self, belief: FieldBelief) -> FieldBelief:
        return belief if self.warm is None else _shifted(belief, self.warm.change, self.warm.sigma)


def _shifted(belief: FieldBelief, by: Array, sigma: Array) -> FieldBelief:
    """Give a field moved by a constant that is itself known with some uncertainty."""
    mean, covariance = belief.mean.copy(), belief.covariance.copy()
    size = min(mean.shape[0], by.size)
    mean[:size, VALUE] += by[:size]
    covariance[:size, VALUE, VALUE] += sigma[:size] ** 2
    return FieldBelief(belief.anchor, mean, covariance)


def _length(parts: Array) -> float:
    return float(np.linalg.norm(parts))


@dataclass(frozen=True, slots=True, eq=False)
class Estimate:
    """The state of knowledge after a reading."""

    found: Found
    """Walk and field."""
    here: Array
    """Shape (2,), present position: the origin."""
    origin: Array
    """Shape (2,), position of the first reading."""
    box: Box
    """How far the trims can go, as far as is known."""
    best: Array
    """Shape (2,), the best setting inside the box."""
    aimed: FieldBelief
    """The field as the trims are aimed at it: what is not theirs to mend left out, warm."""
    warm_thd: float | None
    """THD to expect at the present setting once warm, where the drift is known."""
    floor_thd: float
    """THD there, ratio."""
    floor_sigma: float
    """Its standard uncertainty."""
    habit: Habit
    """Scale and play of the trims."""
    known: tuple[bool, bool]
    """Whether each trim's column is known: from turning it, or from its kind."""

    @property
    def belief(self) -> FieldBelief:
        """The field."""
        return self.found.belief

    @property
    def net(self) -> Array:
        """Shape (2,), net movement since the start, shares of the travel."""
        return self.here - self.origin


def estimate(
    record: Record,
    hand: Hand,
    kind: KindPrior | None,
    before: Estimate | None = None,
    offsets: Offsets | None = None,
) -> Estimate:
    """Put all readings together.

    Parameters
    ----------
    record
        At least one reading.
    hand
        Errors of the hand.
    kind
        What is known of units of this kind.
    before
        The estimate before the last reading, to start the search from.
    offsets
        What the aim is to leave out of account or to reckon with.
    """
    scale_sigma = 0.0 if kind is None else KIND_SCALE
    walk = record.walk(hand, scale_sigma)
    start = None if before is None else _start(record, walk, before)
    sizes = None if before is None else before.found.sizes
    found = _general(walk, start, sizes) if kind is None else _with_kind(walk, kind, start)
    here = np.zeros(2)
    box = _box(record, found.places)
    offsets = offsets or Offsets()
    aimed = offsets.aimed(found.belief)
    best = _best(aimed, here, box)
    floor, sigma = floor_at(offsets.warmed(found), best, record.here)
    return Estimate(
        found=found,
        here=here,
        origin=found.places[0],
        box=box,
        best=best,
        aimed=aimed,
        warm_thd=None if offsets.warm is None else _length(offsets.warmed(found).belief.at(here)),
        floor_thd=floor,
        floor_sigma=sigma,
        habit=habit(record.moves, hand, scale_sigma, found.steps[-len(record.moves) :]),
        known=_known(record, kind is not None),
    )


def _start(record: Record, walk: Walk, before: Estimate) -> Array:
    """Give the steps found before, and the last one as the field before explains its reading."""
    steps = before.found.steps
    added = len(record.places) - before.found.places.shape[0]
    if added == 0 or not record.moves:
        return steps
    if added > 1:
        return np.append(steps, walk.expected[-added:])
    last = record.moves[-1]
    step = float(walk.expected[-1])
    size = walk.parts.shape[1]
    if before.known[last.trim] and not last.dead and before.belief.mean.shape[0] == size:
        sigma = float(np.sqrt(walk.spread[-1, -1]))
        span = 1.6 * abs(last.asked) + 0.02
        thought = Movement(last.trim, step, 2.0 * sigma, -span, span)
        step = explain(before.belief, walk.parts[-1], walk.variance[-1], thought).way
    return np.append(steps, step)


def _general(walk: Walk, start: Array | None, sizes: Sizes | None) -> Found:
    """Search with nothing known of the kind."""
    prior = general_belief(walk.parts.shape[1] // 2 + 1)
    found = find_walk(walk, prior, start, marginal=True, freedom=GENERAL_FREEDOM, sizes=sizes)
    if start is None or found.strain < _usual_strain(walk.expected.size):
        return found
    afresh = find_walk(walk, prior, None, marginal=True, freedom=GENERAL_FREEDOM)
    return min(found, afresh, key=lambda each: each.cost)


def _usual_strain(steps: int) -> float:
    """Strain of so many steps above which the search may have run into a side valley."""
    return steps + 2.0 * float(np.sqrt(2.0 * steps))


def _with_kind(walk: Walk, kind: KindPrior, start: Array | None) -> Found:
    """Search with a kind's response, anchored at the best setting; the start is unknown too."""
    prior = kind.belief(walk.parts.shape[1] // 2 + 1)
    n = walk.expected.size
    steps = np.zeros((walk.steps.shape[0], 2, n + 2))
    steps[:, 0, 0] = steps[:, 1, 1] = 1.0
    steps[:, :, 2:] = walk.steps - walk.steps[:1]
    spread = np.diag(np.full(n + 2, START_SIGMA**2))
    spread[2:, 2:] = walk.spread
    wide = Walk(
        parts=walk.parts,
        variance=walk.variance,
        steps=steps,
        expected=np.concatenate((np.zeros(2), walk.expected)),
        spread=spread,
    )
    first = start is None
    if start is None:
        start = wide.expected.copy()
        start[:2] = _likely_start(walk.parts[0], walk.variance[0], prior)
    found = find_walk(wide, prior, start, rounds=20, marginal=True)
    if first or found.strain < _usual_strain(n + 2):
        return found
    afresh = wide.expected.copy()
    afresh[:2] = _likely_start(walk.parts[0], walk.variance[0], prior)
    other = find_walk(wide, prior, afresh, rounds=20, marginal=True)
    return min(found, other, key=lambda each: each.cost)


def _likely_start(parts: Array, variance: Array, prior: FieldBelief) -> Array:
    """Find where on a kind's field a first reading most likely stands, on a grid."""
    phi = features(_GRID)
    spread = phi**2 @ np.einsum("kff->kf", prior.covariance).T + variance
    miss = (parts - phi @ prior.mean.T) ** 2 / spread + np.log(spread)
    cost = miss.sum(axis=1) + np.sum(_GRID**2, axis=1) / START_SIGMA**2
    return np.asarray(_GRID[int(np.argmin(cost))])


def _known(record: Record, kind: bool) -> tuple[bool, bool]:
    """Tell which columns are known: of trims that have answered, or of a unit of a known kind."""
    if kind:
        return True, True
    answered = {m.trim for m in record.moves if not m.dead}
    return 0 in answered, 1 in answered


def _box(record: Record, places: Array) -> Box:
    """End stops met, else as far as the whole travel allows from where the trims have been."""
    low = places.max(axis=0) - 1.0
    high = places.min(axis=0) + 1.0
    for i, move in enumerate(record.moves):
        if not move.stopped or not (move.told or _borne_out(record.moves, i)):
            continue
        at = places[i + 1, move.trim]
        if move.sense > 0:
            high[move.trim] = min(high[move.trim], at)
            low[move.trim] = max(low[move.trim], at - 1.0)
        else:
            low[move.trim] = max(low[move.trim], at)
            high[move.trim] = min(high[move.trim], at + 1.0)
    return Box(np.minimum(low, places[-1]), np.maximum(high, places[-1]))


def _borne_out(moves: list[Move], index: int) -> bool:
    """Tell whether an end stop that nobody felt is to be believed.

    It is until the trim has answered the other way; then a second turn without effect must bear it out,
    since the first may have been a slip of the hand.
    """
    move = moves[index]
    same = [m for m in moves[index + 1 :] if m.trim == move.trim]
    if all(m.dead for m in same):
        return True
    return any(
        m.dead and m.sense == move.sense for m in [*same, *moves[:index]] if m.trim == move.trim
    )


def _best(belief: FieldBelief, here: Array, box: Box) -> Array:
    """Least distortion of the mean field, near where caution would go."""
    cautious = Aim(belief).joint(here, box)
    reach = 0.3 * np.abs(cautious - here) + 0.02
    near = Box(np.maximum(box.low, cautious - reach), np.minimum(box.high, cautious + reach))
    return Aim(belief, caution=0.0).joint(cautious, near)
