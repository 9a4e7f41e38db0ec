"""A unit that warms up: how far it has come, what it will settle to, and how long that takes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from trimmer.measurement.reading import Interval, Reading
from trimmer.measurement.thd import NORMAL_95
from trimmer.upkeep.channels import Array, Channels, channels_of
from trimmer.upkeep.course import Mixture, fit

Verdict = Literal["settling", "settled", "unsettled"]
Index = NDArray[np.intp]

LEAST: Final = 6
"""Fewer readings say nothing of a time constant."""
DRAWS: Final = 1500
"""Draws from the mixture."""
GOOD_POINTS: Final = 2e-4
"""Parts that move by less than this within a session (ratio; 0.02 percentage points) count as settled:
off the best setting by so much, a THD of 0.3 % is 0.3007 %."""
GOOD_SHARE: Final = 0.02
"""The same relative to the settled THD; the larger of the two counts."""
SESSION_S: Final = 600.0
"""How long a session of trimming is: what moves more slowly does not spoil it. Of a tail much longer than
the time it was watched for nothing can be known."""
SURE: Final = 0.9
"""Probability from which on the unit is called settled."""
WANDER_LEAST: Final = 40
"""Fewer readings do not call a unit unsettled."""
WANDER: Final = 0.5
"""Wandering of so much of what counts as settled is too much."""
WANDER_SURE: Final = 4.0
"""Standard deviations by which the wandering must stand out."""
LONGEST_S: Final = 5400.0
"""A unit that has not settled by then is called unsettled."""
HOPELESS_S: Final = 1200.0
"""From then on a unit that needs much longer still is called unsettled."""
FAR_S: Final = 2700.0
"""How much longer that is."""


@dataclass(frozen=True, slots=True, eq=False)
class Settling:
    """What is known of a warm-up so far. A figure that cannot be told yet is None."""

    minutes: float
    """Minutes since the first reading."""
    thd: Interval
    """THD of the last reading, ratio."""
    settled_thd: Interval | None
    """THD to settle to, ratio, as this input will show it: what the input itself adds to every
    reading (`Reading.systematic`) is in `thd`, and not in the uncertainty of what is foretold."""
    minutes_left: float | None
    """Minutes until it is worth trimming."""
    time_constant_s: float | None
    """Slow time constant, seconds."""
    time_constant_sigma_s: float | None
    """Its standard uncertainty."""
    fast_constant_s: float | None
    """Second, faster time constant, seconds; None where one is enough."""
    settled_fundamental_hz: float | None
    """Frequency to settle to, Hz."""
    drift_left: Array | None
    """Shape (2(K-1),): parts still to come, settled less now, ratios."""
    verdict: Verdict
    """Whether the unit has settled, is settling, or does not settle."""
    reason: str
    """Why, in one sentence for the person."""


def settle(times_s: Sequence[float], readings: Sequence[Reading]) -> Settling:
    """Fit a warm-up.

    Parameters
    ----------
    times_s
        Shape (n,), seconds, ascending; when each reading was taken.
    readings
        As many readings of the untouched unit.

    Raises
    ------
    ValueError
        The lengths differ, there is no reading, or the times do not ascend.
    """
    channels = channels_of(times_s, readings)
    last = readings[-1]
    if len(readings) < LEAST:
        minutes = float(channels.times_s[-1] / 60.0)
        return _nothing_yet(minutes, last.thd)
    return _judged(channels, fit(channels), last)


def _nothing_yet(minutes: float, thd: Interval) -> Settling:
    return Settling(
        minutes=minutes,
        thd=thd,
        settled_thd=None,
        minutes_left=None,
        time_constant_s=None,
        time_constant_sigma_s=None,
        fast_constant_s=None,
        settled_fundamental_hz=None,
        drift_left=None,
        verdict="settling",
        reason="There are too few readings yet.",
    )


@dataclass(frozen=True, slots=True, eq=False)
class _Draws:
    """Possible courses, drawn from the mixture."""

    slow_s: Array
    """Shape (D,)."""
    fast_s: Array
    """Shape (D,)."""
    coefficients: Array
    """Shape (D, C, 4)."""

    @property
    def settled(self) -> Array:
        """Shape (D, C-2), parts once settled."""
        return self.coefficients[:, 2:, 0]

    def to_come(self, times_s: Array) -> Array:
        """How far the parts move within a session from some times on; shape (D, len(times_s))."""
        drift = self.coefficients[:, 2:, 1:]
        gram = np.einsum("dci,dcj->dij", drift, drift)
        terms = self._terms(times_s) - self._terms(times_s + SESSION_S)
        square = np.einsum("dti,dij,dtj->dt", terms, gram, terms, optimize=True)
        return np.asarray(np.sqrt(np.maximum(square, 0.0)))

    def _terms(self, times_s: Array) -> Array:
        slow = np.exp(-times_s / self.slow_s[:, None])
        fast = np.exp(-times_s / self.fast_s[:, None])
        return np.stack((slow, slow**2, fast), axis=-1)


def _draw(mixture: Mixture) -> _Draws:
    rng = np.random.default_rng(20_260_101)  # a fixed stream: the same readings, the same answer
    at = rng.choice(mixture.weights.size, size=DRAWS, p=mixture.weights)
    size = _sizes(mixture, at, rng)
    channel = np.arange(mixture.group.size)
    mean = mixture.mean[at[:, None], size, channel]
    place = (at[:, None] * mixture.mean.shape[1] + size) * channel.size + channel
    kinds, back = np.unique(place, return_inverse=True)
    root = _roots(mixture.spread.reshape(-1, *mixture.spread.shape[-2:])[kinds])
    normal = rng.standard_normal(mean.shape)
    off = np.einsum("dcij,dcj->dci", root[back.reshape(mean.shape[:2])], normal)
    slow = mixture.constants.slow_s[at]
    return _Draws(slow, mixture.constants.share[at] * slow, mean + off)


def _sizes(mixture: Mixture, at: Index, rng: np.random.Generator) -> Index:
    """Draw a size of drift for each group of channels; shape (D, C)."""
    cumulative = np.cumsum(mixture.sizes, axis=1)[at]
    uniform = rng.random((len(at), 1, cumulative.shape[2]))
    chosen = np.minimum((cumulative < uniform).sum(axis=1), cumulative.shape[1] - 1)
    return np.asarray(chosen[:, mixture.group])


def _roots(spread: Array) -> Array:
    """Square roots of covariances, whose scales differ widely: by way of their correlations."""
    sigma = np.sqrt(np.maximum(np.diagonal(spread, axis1=-2, axis2=-1), 1e-300))
    values, vectors = np.linalg.eigh(spread / (sigma[:, :, None] * sigma[:, None, :]))
    root = vectors * np.sqrt(np.maximum(values, 0.0))[:, None, :]
    return np.asarray(sigma[:, :, None] * root)


def _judged(channels: Channels, mixture: Mixture, last: Reading) -> Settling:
    draws = _draw(mixture)
    now_s = float(channels.times_s[-1])
    settled = _thd_interval(draws.settled)
    good = max(GOOD_POINTS, GOOD_SHARE * settled.value)
    left_s = _time_left(draws, now_s, good)
    close = float(np.mean(draws.to_come(np.array([now_s]))[:, 0] <= good))
    verdict, reason = _verdict(channels, mixture, close, left_s, good)
    course = mixture.course(np.array([now_s]))[0]
    log_hz = np.median(draws.coefficients[:, 0, 0])
    # a long faint tail stretches the standard deviation: the middle 68 % instead
    low, middle, high = np.quantile(draws.slow_s, [0.159, 0.5, 0.841])
    two = mixture.weights[mixture.constants.two].sum() > 0.5
    return Settling(
        minutes=now_s / 60.0,
        thd=last.thd,
        settled_thd=settled,
        minutes_left=left_s / 60.0,
        time_constant_s=float(middle),
        time_constant_sigma_s=float(0.5 * (high - low)),
        fast_constant_s=float(np.median(draws.fast_s)) if two else None,
        settled_fundamental_hz=float(np.exp(log_hz)),
        drift_left=np.mean(draws.settled, axis=0) - course[2:],
        verdict=verdict,
        reason=reason,
    )


def _thd_interval(parts: Array) -> Interval:
    """Give the settled THD from draws of the parts."""
    low, middle, high = np.quantile(np.linalg.norm(parts, axis=1), [0.025, 0.5, 0.975])
    return Interval(float(middle), float(0.5 * (high - low) / NORMAL_95), float(low), float(high))


def _time_left(draws: _Draws, now_s: float, good: float) -> float:
    """Seconds until the parts hardly move within a session: the median over the draws."""
    ahead = np.concatenate(([0.0], np.geomspace(0.02, 12.0, 64)))
    scale = float(np.median(draws.slow_s))
    away = draws.to_come(now_s + ahead * scale) > good
    # the last time they are still away, since two terms may cancel for a moment
    last = np.where(away.any(axis=1), away.shape[1] - 1 - np.argmax(away[:, ::-1], axis=1), -1)
    until = ahead[np.minimum(last + 1, ahead.size - 1)]
    return float(np.median(until) * scale)


def _verdict(
    channels: Channels, mixture: Mixture, close: float, left_s: float, good: float
) -> tuple[Verdict, str]:
    now_s = float(channels.times_s[-1])
    if len(channels.times_s) >= WANDER_LEAST and _wander(channels, mixture) > WANDER * good:
        return "unsettled", "The waveform wanders in a way that no warming explains."
    if close >= SURE:
        return "settled", "What is still to come is too small to matter."
    if now_s > LONGEST_S:
        return "unsettled", f"It has not settled in {now_s / 60:.0f} minutes."
    if now_s > HOPELESS_S and left_s > FAR_S:
        return "unsettled", "It drifts on and on, with no end in sight."
    return "settling", "It is still warming up."


def _wander(channels: Channels, mixture: Mixture) -> float:
    """How far the parts stray from the fitted course in the later half, rms, beyond their noise.

    What strays in one reading and still does in the next is no noise: the products of neighbours.
    """
    later = slice(len(channels.times_s) // 2, None)
    left = (channels.parts - mixture.course(channels.times_s)[:, 2:])[later]
    products = (left[1:] * left[:-1]).sum(axis=1)
    chance = float(np.sqrt((channels.variance[later, 2:] ** 2).sum()) / len(products))
    strays = float(products.mean())
    return float(np.sqrt(strays)) if strays > WANDER_SURE * chance else 0.0
