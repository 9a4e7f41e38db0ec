"""What a turn promises: how many turns are still to be made after it, the hand's errors counted.

Near the best setting `b` the squared distortion is ``f^2 + e' H e`` with ``e = x - b`` and H the inner
products of the two columns. A setting counts as there when it is within a small share of the floor. A
turn moves `e` along one axis, with the hand's scatter in size; what is not known of `b` scatters it in
both. After it the place is read, so the turn after that starts from what was reached and not from what
was meant. That is looked through to the second turn and valued beyond by what is then left.
"""

from __future__ import annotations

from typing import Final

import numpy as np
from scipy.special import erf

from trimmer.guidance.estimate import Estimate
from trimmer.guidance.field import Array, features
from trimmer.guidance.hand import UNEVEN, Hand
from trimmer.guidance.moves import last_sense
from trimmer.guidance.record import Record

CLOSE_SHARE: Final = 0.015
"""A setting is there when THD is within this share of the floor .."""
CLOSE_THD: Final = 6e-5
""".. or this much THD of it, whichever is more."""
FOLLOWED_CLOSER: Final = 0.8
"""A hand that is told when to stop sets finer: this share of both."""
GOOD_SHARE: Final = 0.022
"""A setting is good enough to be left where only luck would better it within this share .."""
GOOD_THD: Final = 1.0e-4
""".. or this much THD. A blind hand leaves it then even where a little might be gained: what is left is
less than such a hand sets on purpose."""
UNSEEN_SHARE: Final = 0.3
"""The most that the digitiser's own error may take of what counts as there: no turn mends it."""
TRIES: Final = 3
"""After so many small turns in a row the hand is taken to set no finer than it does .."""
PATIENCE: Final = 0.25
""".. and each further one widens what counts as there by this share, up to good enough."""
MOST_TRIES: Final = 8
"""After so many, even this is left:"""
LEFT_SHARE: Final = 0.035
"""within this share of the floor .."""
LEFT_THD: Final = 1.5e-4
""".. or this much THD."""
SMALL: Final = 0.03
"""A small turn, share of the travel."""
SURELY: Final = 3.0
"""How many times over what is not known of the best setting must fit into that too."""
CLEARLY: Final = 0.9
"""A turn gains clearly when it leaves less than this share of the squared THD over the floor's."""
FAIR_CHANCE: Final = 0.25
"""Chance within two turns that makes trying worth while."""
LONGEST_SHARE: Final = 0.35
"""Longest turn ever asked for at once, share of the travel."""
SETTABLE: Final = 1.0
"""No turn is asked for that is smaller than this many times the hand's own jitter."""
BEYOND: Final = 1.3
"""Turns expected to be left after a second turn that did not get there."""
NODES, WEIGHTS = np.polynomial.hermite_e.hermegauss(7)
MASS: Final = WEIGHTS / WEIGHTS.sum()


class Outlook:
    """The problem of the next turn in the plane of the two trims."""

    def __init__(self, est: Estimate, record: Record, hand: Hand, trims: tuple[int, ...]) -> None:
        self.est = est
        self.record = record
        self.hand = hand
        self.trims = trims
        self.best = est.best
        self.away = est.here - est.best
        columns = est.belief.columns(est.best)
        self.h = columns @ columns.T + 1e-9 * np.eye(2)
        # At a stop the best setting is a slope that ends there, not the bottom of a bowl.
        self.slope = 2.0 * columns @ est.aimed.at(est.best)
        self.floor = est.floor_thd
        finer = FOLLOWED_CLOSER if hand.followed else 1.0
        self.tries = _tries(record)
        patience = max(0.0, PATIENCE * (self.tries - TRIES))
        share = min(finer * CLOSE_SHARE + patience * CLOSE_SHARE, GOOD_SHARE)
        thd = min(finer * CLOSE_THD + patience * CLOSE_THD, GOOD_THD)
        self.radius2 = self._radius2(share, thd)
        self.doubt = self._doubt(columns)
        # What the digitiser's own error may hide in the plane of the columns, whatever is read.
        tangent, _ = np.linalg.qr(columns.T)
        fixed = record.here.fixed[: columns.shape[1]]
        self.unseen = min(float(np.sum(tangent.T**2 @ fixed)), UNSEEN_SHARE * self.radius2)
        self.thd_now = float(np.sqrt(self.floor**2 + self._energy(self.away)))

    def _doubt(self, columns: Array) -> Array:
        """Covariance of the best setting, shape (2, 2)."""
        est = self.est
        phi = features(est.best - est.belief.anchor)
        own = np.einsum("f,kfg,g->k", phi, est.found.given_steps, phi)
        shared = np.einsum("f,kfj->kj", phi, est.found.through_steps)
        pull = np.linalg.solve(self.h, columns)
        along = pull @ shared
        result: Array = (pull * own) @ pull.T + along @ est.found.steps_covariance @ along.T
        return result

    def _energy(self, e: Array) -> Array:
        bowl = np.einsum("...a,ab,...b->...", e, self.h, e)
        return np.asarray(bowl + np.maximum(e @ self.slope, 0.0))

    def is_there(self) -> bool:
        """Tell whether the present setting is close enough, what is not known of the best counted."""
        doubt = 2.0 * self._lost() + self.unseen
        return bool(self._energy(self.away) + doubt <= self.radius2)

    def _lost(self) -> float:
        """Squared distortion that not knowing the best setting costs on average."""
        return float(np.sum(self.h * self.doubt))

    def _radius2(self, share: float, thd: float) -> float:
        """Energy within a share of the floor, or within so much THD of it if that is more."""
        return (self.floor + max(share * self.floor, thd)) ** 2 - self.floor**2

    def noise(self, trim: int, way: float) -> float:
        """Give the standard deviation of a turn, share of the travel."""
        sigma = self.hand.sigma(way)
        last = last_sense(self.record.moves, trim)
        if last and last != (1 if way > 0 else -1):
            sigma = float(np.hypot(sigma, self.hand.backlash_sigma))
        return sigma

    def ways(self, trim: int) -> list[float]:
        """Give the turns of a trim worth weighing: to the joint best, to its own, and between."""
        joint = -self.away[trim]
        line = -float(self.h[trim] @ self.away) / float(self.h[trim, trim])
        mixes = [joint, line, 0.5 * (joint + line)]
        low = self.est.box.low[trim] - self.est.here[trim]
        high = self.est.box.high[trim] - self.est.here[trim]
        inside = [
            float(np.clip(w, max(low, -LONGEST_SHARE), min(high, LONGEST_SHARE))) for w in mixes
        ]
        return [w for w in inside if abs(w) >= SETTABLE * self.hand.jitter]

    def _outcomes(self, trim: int, way: float) -> tuple[Array, Array]:
        """Where a turn may end, relative to the best: shape (n, 2), and the chances, shape (n,)."""
        sigma = self.noise(trim, way)
        roots = np.linalg.cholesky(self.doubt + 1e-12 * np.eye(2))
        made = way + sigma * NODES
        ends, chances = [], []
        for axis in (0, 1):
            for side in (-1.0, 1.0):
                e = np.tile(self.away, (NODES.size, 1))
                e[:, trim] += made
                ends.append(e + side * np.sqrt(2.0) * roots[:, axis])
                chances.append(MASS / 4.0)
        return np.concatenate(ends), np.concatenate(chances)

    def turns_after(self, trim: int, way: float) -> float:
        """Give the turns expected to be left once this one is made."""
        ends, chances = self._outcomes(trim, way)
        energy = self._energy(ends)
        chance, rest = self._one_more(ends, energy)
        further = 1.0 + (1.0 - chance) * (BEYOND + 0.2 * np.log1p(rest / self.radius2))
        return float(chances @ np.where(energy <= self.radius2, 0.0, further))

    def _one_more(self, ends: Array, energy: Array) -> tuple[Array, Array]:
        """Chance of getting there with the best next turn from each place, and the energy left."""
        options = [self._one_more_of(ends, energy, trim) for trim in self.trims]
        chances = np.array([o[0] for o in options])
        rests = np.array([o[1] for o in options])
        best = np.argmin((1.0 - chances) * (1.0 + np.log1p(rests / self.radius2)), axis=0)
        pick = best[None, :]
        return (
            np.take_along_axis(chances, pick, axis=0)[0],
            np.take_along_axis(rests, pick, axis=0)[0],
        )

    def _one_more_of(self, ends: Array, energy: Array, trim: int) -> tuple[Array, Array]:
        length = self.h[trim, trim]
        way = -(ends @ self.h[trim]) / length
        across = np.maximum(energy - length * way**2, 0.0)
        sigma2 = (self.hand.scatter**2 + UNEVEN**2) * way**2 + self.hand.jitter**2
        room = np.maximum(self.radius2 - across, 0.0)
        chance: Array = erf(np.sqrt(room / (2.0 * length * sigma2)))
        return chance, across + length * sigma2

    def thd_after(self, trim: int, way: float) -> float:
        """Give the THD expected after a turn."""
        there = self.est.here.copy()
        there[trim] += way
        parts = self.est.belief.at(there)
        scatter = self.h[trim, trim] * self.noise(trim, way) ** 2
        return float(np.sqrt(parts @ parts + scatter))

    def is_worth(self, trim: int, way: float) -> bool:
        """Tell whether a turn, and the one that may follow, are worth making.

        They are where they promise to lower THD clearly; and, while the setting is not good enough,
        where the hand may well get there by trying, though it may as well not.
        """
        ends, chances = self._outcomes(trim, way)
        energy = self._energy(ends)
        chance, rest = self._one_more(ends, energy)
        now = float(self._energy(self.away)) + self._lost()
        good = self._radius2(GOOD_SHARE, GOOD_THD)
        surely = float(self._energy(self.away)) + SURELY * self._lost() <= good
        if surely and (not self.hand.followed or self.tries >= TRIES):
            return False
        if self.tries >= MOST_TRIES and now <= self._radius2(LEFT_SHARE, LEFT_THD):
            return False
        if float(chances @ np.minimum(energy, rest)) < CLEARLY * now:
            return True
        soon = float(chances @ np.where(energy <= self.radius2, 1.0, chance))
        return now > good and soon > FAIR_CHANCE


def _tries(record: Record) -> int:
    """Count the small turns made in a row."""
    count = 0
    for move in reversed(record.moves):
        if abs(move.asked) > SMALL:
            break
        count += 1
    return count
