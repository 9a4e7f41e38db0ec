"""The course of a warm-up: exponentials with shared time constants, all of them weighed.

What a reading shows follows the temperature inside the unit, and that settles as one exponential, or
two (a chip on its board, the board in its case). So all channels share the time constants; each has
its own settled value and its own drift:

    y_c(t) = a_c + b_c e^(-t/tau) + q_c e^(-2t/tau) + d_c e^(-t/(s tau))

The second term is there because a part is no straight line of the temperature: its square settles
twice as fast. Of the whole drift, a share w is slow in all channels alike, give or take. For a given
tau, s and w this is linear with normal priors, so values and evidence are in closed form (Bayesian
linear regression, e.g. Bishop, *Pattern Recognition and Machine Learning*, 2006, sections 3.3 and
3.5); tau, s, w and the size of the drift are summed over. What comes out is a mixture of normal
distributions: not knowing the time constants is in it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from trimmer.upkeep.channels import GROUPS, Array, Channels

SLOW_S: Final = (3.0, 3600.0)
"""Least and largest time constant, seconds: from a scaled simulation to a heavy unit in its case."""
FAST_SHARES: Final = (0.05, 0.6)
"""Least and largest share of the slow time constant that a second, faster one is."""
SLOW_PARTS: Final = (0.35, 0.6, 0.85)
"""Share of the drift that is slow, where there are two time constants."""
TWO_ODDS: Final = 0.3
"""Odds of two time constants against one, beforehand. Among two, those are likelier of which the slow
one bears the larger share of the drift: a long faint tail can never be ruled out by a short look."""
CELLS: Final = (24, 12, 5)
"""Cells looked at first: of one time constant alone, of the slow one of two, and of its share."""
ROUNDS: Final = 7
"""How often the heaviest cells are split."""
HEAVY: Final = 24
"""Cells split in a round."""
LIGHT: Final = 0.01
"""Cells of less weight are small enough."""
OWN_WAY: Final = 0.7
"""How much a channel's slow and fast drift differ from the shares of all, relative."""
SIZES: Final = tuple((size, bend) for size in (0.03, 0.3, 2.0) for bend in (0.015, 0.15))
"""Sizes of a drift over the usual one, each with a size of its quadratic part over its linear one."""
EXACT: Final = 0.003
"""No unit follows exponentials nearer than this share of its drift."""
TERMS: Final = 4
"""Settled value, slow, bend, fast."""
NONE: Final = 1e-6
"""Size of the fast term where there is one time constant only."""


@dataclass(frozen=True, slots=True, eq=False)
class Constants:
    """Time constants to be weighed, G of them, each for a cell around it."""

    slow_s: Array
    """Shape (G,), slow time constant, seconds."""
    share: Array
    """Shape (G,), fast over slow time constant; 1 where there is one only."""
    part: Array
    """Shape (G,), slow share of the drift; 1 where there is one constant only."""
    wide: Array
    """Shape (G, 2), width of the cell, in logs of the slow constant and of the share."""

    @property
    def two(self) -> NDArray[np.bool_]:
        """Shape (G,), where there are two."""
        return self.part < 1.0

    def basis(self, times_s: Array) -> Array:
        """Give the four terms at some times; shape (G, len(times_s), 4)."""
        slow = np.exp(-times_s[None, :] / self.slow_s[:, None])
        fast = np.exp(-times_s[None, :] / (self.share * self.slow_s)[:, None])
        return np.stack((np.ones_like(slow), slow, slow**2, fast), axis=-1)

    def prior(self) -> Array:
        """Give the prior weights, even in the logs; shape (G,)."""
        low, high = FAST_SHARES
        each = TWO_ODDS / (float(np.square(SLOW_PARTS).sum()) * np.log(high / low))
        own = np.where(self.two, each * self.part**2 * self.wide[:, 1], 1.0)
        return np.asarray(self.wide[:, 0] * own)

    def kept(self, which: NDArray[np.bool_]) -> Constants:
        """Give some of them."""
        return Constants(self.slow_s[which], self.share[which], self.part[which], self.wide[which])

    def joined(self, other: Constants) -> Constants:
        """Give both together."""
        return Constants(
            np.concatenate((self.slow_s, other.slow_s)),
            np.concatenate((self.share, other.share)),
            np.concatenate((self.part, other.part)),
            np.concatenate((self.wide, other.wide)),
        )

    def split(self) -> Constants:
        """Give the halves of each cell, or its quarters where there are two time constants."""
        halves = [self._half(0, sign) for sign in (-0.25, 0.25)]
        whole = halves[0].joined(halves[1])
        one, two = whole.kept(~whole.two), whole.kept(whole.two)
        return one.joined(two._half(1, -0.25)).joined(two._half(1, 0.25))

    def _half(self, axis: int, off: float) -> Constants:
        factor = np.exp(off * self.wide[:, axis])
        wide = self.wide * np.where(np.arange(2) == axis, 0.5, 1.0)
        if axis == 0:
            return Constants(self.slow_s * factor, self.share, self.part, wide)
        return Constants(self.slow_s, self.share * factor, self.part, wide)


def _first() -> Constants:
    """Give the cells that are looked at first."""
    alone, slow, fast = CELLS
    one_s, one_wide = _middles(*SLOW_S, alone)
    two_s, two_wide = _middles(*SLOW_S, slow)
    shares, share_wide = _middles(*FAST_SHARES, fast)
    grid = np.meshgrid(two_s, shares, np.array(SLOW_PARTS), indexing="ij")
    slow_s, share, part = (each.ravel() for each in grid)
    two = Constants(slow_s, share, part, np.tile((two_wide, share_wide), (share.size, 1)))
    ones = np.ones(alone)
    return Constants(one_s, ones, ones, np.tile((one_wide, 0.0), (alone, 1))).joined(two)


def _middles(low: float, high: float, count: int) -> tuple[Array, float]:
    """Give the middles of even cells of a log scale, and their width."""
    wide = float(np.log(high / low)) / count
    return low * np.exp(wide * (np.arange(count) + 0.5)), wide


@dataclass(frozen=True, slots=True, eq=False)
class Mixture:
    """Normal distributions of the coefficients, one for each of the time constants."""

    constants: Constants
    """The time constants."""
    evidence: Array
    """Shape (G,), log of what the readings say of them, up to a constant."""
    sizes: Array
    """Shape (G, S, groups), weights of the sizes of drift, for each group of channels; add up to 1."""
    mean: Array
    """Shape (G, S, C, 4), coefficients."""
    spread: Array
    """Shape (G, S, C, 4, 4), their covariance."""
    group: NDArray[np.intp]
    """Shape (C,), group of each channel."""

    @property
    def weights(self) -> Array:
        """Shape (G,), weights of the time constants; they add up to 1."""
        weights = self.constants.prior() * np.exp(self.evidence - self.evidence.max())
        return np.asarray(weights / weights.sum())

    def course(self, times_s: Array) -> Array:
        """Give the expected course of each channel; shape (len(times_s), C)."""
        mean = np.einsum("gsc,gscp->gcp", self.sizes[:, :, self.group], self.mean)
        basis = self.constants.basis(times_s)
        return np.asarray(np.einsum("g,gtp,gcp->tc", self.weights, basis, mean, optimize=True))

    def kept(self, which: NDArray[np.bool_]) -> Mixture:
        """Give it for some of the time constants."""
        return Mixture(
            self.constants.kept(which),
            self.evidence[which],
            self.sizes[which],
            self.mean[which],
            self.spread[which],
            self.group,
        )

    def joined(self, other: Mixture) -> Mixture:
        """Give both together."""
        return Mixture(
            self.constants.joined(other.constants),
            np.concatenate((self.evidence, other.evidence)),
            np.concatenate((self.sizes, other.sizes)),
            np.concatenate((self.mean, other.mean)),
            np.concatenate((self.spread, other.spread)),
            self.group,
        )


def fit(channels: Channels) -> Mixture:
    """Weigh all time constants by what was read, each channel's noise found along with them."""
    inexact = (EXACT * np.ptp(channels.values, axis=0)) ** 2
    variance = channels.variance + inexact
    first = _finer(channels, variance)
    left = channels.values - first.course(channels.times_s)
    spare = max(1.0, len(channels.times_s) - 3.0)
    factor = (left**2 / variance).sum(axis=0) / spare
    return _finer(channels, variance * np.maximum(factor, 1.0)) if factor.max() > 1.3 else first


def _finer(channels: Channels, variance: Array) -> Mixture:
    """Split the heaviest cells until none is heavy: evidence is sharp where much is known."""
    found = _solved(channels, variance, _first())
    for _ in range(ROUNDS):
        weights = found.weights
        least = max(LIGHT, float(np.sort(weights)[-min(HEAVY, weights.size)]))
        heavy = weights >= least
        # before the peak is met its cell may hide between others: their evidence leads there
        heavy |= found.evidence >= np.sort(found.evidence)[-HEAVY // 3]
        if weights.max() < 2.0 * LIGHT:
            break
        halves = _solved(channels, variance, found.constants.kept(heavy).split())
        found = found.kept(~heavy).joined(halves)
    return found


def _solved(channels: Channels, variance: Array, constants: Constants) -> Mixture:
    """Solve for the coefficients under each of the time constants."""
    basis = constants.basis(channels.times_s)
    centre = channels.values[-1]
    y = channels.values - centre
    trust = 1.0 / variance
    products = (basis[:, :, :, None] * basis[:, :, None, :]).reshape(*basis.shape[:2], -1)
    gram = np.einsum("gtk,tc->gck", products, trust, optimize=True)
    gram = gram.reshape(*gram.shape[:2], TERMS, TERMS)
    right = np.einsum("gtp,tc->gcp", basis, trust * y, optimize=True)
    prior, log_prior = _priors(channels.usual, constants)
    whole = gram[:, None] + prior
    spread = np.linalg.inv(whole)
    mean = np.einsum("gscij,gcj->gsci", spread, right, optimize=True)
    gain = np.einsum("gsci,gci->gsc", mean, right, optimize=True)
    log = 0.5 * (gain - np.linalg.slogdet(whole)[1]) + log_prior
    evidence, sizes = _summed(log, channels.group)
    mean[..., 0] += centre
    return Mixture(constants, evidence, sizes, mean, spread, channels.group)


def _priors(usual: Array, constants: Constants) -> tuple[Array, Array]:
    """Give prior precisions, shape (G, S, C, 4, 4), and half the logs of their determinants.

    Slow and fast drift of a channel are ``w A + w o E1`` and ``(1 - w) A + (1 - w) o E2`` with ``A``,
    ``E1``, ``E2`` of the size of the drift and ``o`` how much a channel goes its own way.
    """
    slow = constants.part
    fast = np.where(constants.two, 1.0 - slow, NONE)
    size, bend = np.array(SIZES).T
    unit = np.zeros((slow.size, size.size, TERMS - 1, TERMS - 1))
    unit[..., 0, 0] = (slow**2 * (1.0 + OWN_WAY**2))[:, None]
    unit[..., 1, 1] = bend**2
    unit[..., 2, 2] = (fast**2 * (1.0 + OWN_WAY**2))[:, None]
    unit[..., 0, 2] = unit[..., 2, 0] = np.where(constants.two, slow * fast, 0.0)[:, None]
    inverse = np.linalg.inv(unit)
    drift = np.multiply.outer(size, usual)
    precision = np.zeros((slow.size, *drift.shape, TERMS, TERMS))
    precision[..., 1:, 1:] = inverse[:, :, None] / drift[:, :, None, None] ** 2
    # the settled value itself has no prior: any is as likely
    log = 0.5 * np.linalg.slogdet(inverse)[1][:, :, None] - (TERMS - 1) * np.log(drift)
    return precision, log


def _summed(log: Array, group: NDArray[np.intp]) -> tuple[Array, Array]:
    """Sum the evidence over the sizes, group by group, and over the groups."""
    total = np.zeros(len(log))
    sizes = np.empty((*log.shape[:2], GROUPS))
    for each in range(GROUPS):
        of_size = log[:, :, group == each].sum(axis=2)
        top = of_size.max(axis=1, keepdims=True)
        shares = np.exp(of_size - top)
        total += top[:, 0] + np.log(shares.mean(axis=1))
        sizes[:, :, each] = shares / shares.sum(axis=1, keepdims=True)
    return total, sizes
