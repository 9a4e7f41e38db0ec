"""What the trims cannot, or must not, reach: from readings to causes with their shares.

Each cause has its own mark. Unequal rise and fall make even skew in fixed proportions; a slow node
odd skew in proportion to frequency; a slewing output odd skew *and* odd crest, rising with frequency
times amplitude. The crest part of slewing could be masked by the trims, wrongly, so it is named
before anything is left to them. What the trims reach is taken out first; what no cause explains is
the shaper's own.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from trimmer.measurement.combine import cut_to
from trimmer.measurement.kernels import Array
from trimmer.measurement.reading import Reading
from trimmer.measurement.templates import SLOWEST, bandwidth, slewing, time_symmetry

Index = NDArray[np.intp]

_SURE = 3.0
"""Standard uncertainties above which a cause is named."""
_LEAST = 5e-5
"""Causes that make less than this are not named, ratio to the fundamental."""
_FLAT = 2.0
"""A crest this many times as flat as a sine's is cut, not shaped."""
_LOWER = 0.97
"""An amplitude below this share of the usual one is a lower one."""
_MODEL = 0.1
"""The causes' closed forms are trusted to this share."""

REMEDIES = {
    "time-symmetry": "Set the time symmetry until rise and fall take the same time, then trim again.",
    "slewing": "Lower the amplitude or the frequency, or mend the output stage; leave the trims alone.",
    "bandwidth": "Compare at a lower frequency, and take off long cables and other loads.",
    "hum": "Shorten the probe's ground, keep mains cables away, and check the unit's supply.",
    "noise": "Average more captures with `--until-sigma`, or make the range smaller.",
    "clipping-in-unit": "Lower the output level and its offset, and check what the output drives.",
    "clipping-in-digitiser": "Widen the range or lower the input until both crests are on the screen.",
    "supply": "Check both supply rails under load before trimming on.",
    "shaper": "Leave the trims: this is the shaper's own limit.",
}


@dataclass(frozen=True, slots=True)
class Remainder:
    """A part of the distortion with its cause."""

    cause: str
    """``time-symmetry``, ``slewing``, ``bandwidth``, ``hum``, ``noise``, ``clipping-in-unit``,
    ``clipping-in-digitiser``, ``supply`` or ``shaper``."""
    thd: float
    """Its contribution, ratio to the fundamental."""
    thd_sigma: float
    """Standard uncertainty of `thd`."""
    remedy: str
    """One imperative sentence."""


@dataclass(frozen=True, slots=True, eq=False)
class _Share:
    """A cause's contribution to the parts of the last reading."""

    cause: str
    parts: Array
    sigma: float


def diagnose(
    readings: Sequence[Reading],
    *,
    reach: ArrayLike | None = None,
    usual_amplitude: float | None = None,
) -> tuple[Remainder, ...]:
    """Name the causes of what the trims do not reach.

    Parameters
    ----------
    readings
        At least one, with the trims left alone between them; the shares are those of the last.
        Readings at other frequencies or amplitudes tell what grows with them.
    reach
        Shape (m, r), orthonormal basis of what the trims reach in the parts; rows missing are zero.
        None where it is not known: then no crest part is held against the shaper.
    usual_amplitude
        Peak of the fundamental as it should be, unit of the samples.

    Returns
    -------
    tuple of Remainder
        Largest first. The squares of the shares within THD add up to about the square of what is
        left of THD outside the reach; ``hum`` is outside THD, and clipping and supply name a
        cause of the crest parts as they are.

    Raises
    ------
    ValueError
        There is no reading.
    """
    if not readings:
        raise ValueError("a diagnosis needs at least one reading")
    orders = min(reading.orders for reading in readings)
    alike = [cut_to(reading, orders) for reading in readings]
    last = alike[-1]
    basis = _basis(reach, last.parts.size)
    left = _off(last.parts, basis)
    shares = [_symmetry(last), *_fast(alike)]
    for share in shares:
        left = left - _off(share.parts, basis)
    found = [_told(share.cause, _length(share.parts), share.sigma) for share in shares]
    if basis is not None:
        found.append(_shaper(last, left, basis))
    found += [_hum(last), _noise(last), *_cut(alike, usual_amplitude)]
    named = [item for item in found if item is not None]
    return tuple(sorted(named, key=lambda item: -item.thd))


def _basis(reach: ArrayLike | None, size: int) -> Array | None:
    """Fit the basis to the parts at hand and make it orthonormal again."""
    if reach is None:
        return None
    given = np.asarray(reach, dtype=np.float64)
    if given.ndim != 2 or given.shape[1] == 0:
        return None
    full = np.zeros((size, given.shape[1]))
    rows = min(size, given.shape[0])
    full[:rows] = given[:rows]
    u, s, _ = np.linalg.svd(full, full_matrices=False)
    kept: Array = u[:, s > 1e-9]
    return kept


def _off(parts: Array, basis: Array | None) -> Array:
    """What of `parts` the trims do not reach."""
    return parts if basis is None else parts - basis @ (basis.T @ parts)


def _length(parts: Array) -> float:
    return float(np.linalg.norm(parts))


def _told(cause: str, thd: float, sigma: float) -> Remainder | None:
    """Name a cause where it is certain and large enough to matter."""
    if thd < max(_LEAST, _SURE * sigma):
        return None
    return Remainder(cause, thd, sigma, REMEDIES[cause])


def _symmetry(reading: Reading) -> _Share:
    """Fit the mark of unequal rise and fall to the even skew parts, by weighted least squares."""
    template = time_symmetry(reading.orders)
    rows = np.flatnonzero(template)
    mark = template[rows]
    weight = mark / (np.diag(reading.random_covariance)[rows] + 1e-30)
    delta = float(weight @ reading.parts[rows]) / float(weight @ mark)
    cut = reading.random_covariance[np.ix_(rows, rows)]
    sigma = math.sqrt(max(float(weight @ cut @ weight), 0.0)) / float(weight @ mark)
    return _Share("time-symmetry", delta * template, sigma * _length(template))


def _fast(readings: Sequence[Reading]) -> list[_Share]:
    """Tell slewing from bandwidth, by several readings where they differ, else by shape."""
    last = readings[-1]
    speeds = [reading.fundamental_hz * reading.amplitude for reading in readings]
    if max(speeds) > 1.3 * min(speeds):
        return _by_speed(readings, speeds)
    return _by_shape(last)


def _odd(orders: int) -> Index:
    """Indices of the crest and skew parts of odd orders."""
    k = np.repeat(np.arange(2, orders + 1), 2)
    return np.flatnonzero(k % 2 == 1)


def _by_shape(last: Reading) -> list[_Share]:
    """One reading: the odd skew parts alone, which the trims leave as they are."""
    rows = np.array([i for i in _odd(last.orders) if i % 2 == 1])
    seen = last.parts[rows]
    variance = np.diag(last.random_covariance)[rows] + 1e-30
    slow = bandwidth(last.orders)
    size = float((seen / variance) @ slow[rows]) / float((slow[rows] / variance) @ slow[rows])
    off_slow = float((((seen - size * slow[rows]) ** 2) / variance).sum())
    sigma = math.sqrt(1.0 / float((slow[rows] ** 2 / variance).sum())) * _length(slow)
    best, ratio = math.inf, 1.0
    for tried in np.linspace(SLOWEST, 0.99, 120):
        off = float((((seen - slewing(float(tried), last.orders)[rows]) ** 2) / variance).sum())
        if off < best:
            best, ratio = off, float(tried)
    whole = float((seen**2 / variance).sum())
    tripled = last.parts[2] > 0.0 > last.parts[3]  # c_3 up, s_3 down
    if tripled and whole > 9.0 * rows.size and best < 0.25 * off_slow and best < 0.25 * whole:
        return [_Share("slewing", slewing(ratio, last.orders), sigma)]
    share = np.zeros(last.parts.size)
    share[rows] = seen if size > 0.0 else 0.0
    return [_Share("bandwidth", share, math.sqrt(float(variance.sum())))]


def _by_speed(readings: Sequence[Reading], speeds: Sequence[float]) -> list[_Share]:
    """Several readings: a constant, a part in proportion to frequency, and a slewing output."""
    last = readings[-1]
    rows = _odd(last.orders)
    weights = [_weights(reading, rows) for reading in readings]
    slow = bandwidth(last.orders)
    top = max(reading.fundamental_hz for reading in readings)
    best = None
    plain = math.inf
    for limit in (math.inf, *(max(speeds) * np.geomspace(SLOWEST, 0.99, 90))):
        marks = [slewing(float(limit / speed), last.orders) for speed in speeds]
        off, slope, sigma = _line(readings, rows, weights, marks, slow, top)
        if math.isinf(limit):
            plain = off
        if best is None or off < best[0]:
            best = (off, slope, sigma, limit)
    assert best is not None
    if plain - best[0] < 25.0 + 0.3 * plain:
        off, slope, sigma = _line(readings, rows, weights, None, slow, top)
        best = (off, slope, sigma, math.inf)
    _, slope, sigma, limit = best
    share = max(slope, 0.0) * last.fundamental_hz / top
    found = [_Share("bandwidth", share * slow, sigma * _length(slow) * last.fundamental_hz / top)]
    if math.isfinite(limit):
        mark = slewing(float(limit / speeds[-1]), last.orders)
        noise = math.sqrt(float(np.diag(last.random_covariance)[rows].mean()))
        found.append(_Share("slewing", mark, max(noise, 0.5 * _MODEL * _length(mark))))
    return found


def _weights(reading: Reading, rows: Index) -> Array:
    """Weights of the odd parts: noise, and a tenth of what is seen for the closed forms' error."""
    floor = (_MODEL * np.abs(reading.parts[rows]).max()) ** 2
    weights: Array = 1.0 / (np.diag(reading.random_covariance)[rows] + 0.04 * floor + 1e-30)
    return weights


def _line(
    readings: Sequence[Reading],
    rows: Index,
    weights: Sequence[Array],
    marks: Sequence[Array] | None,
    slow: Array,
    top: float,
) -> tuple[float, float, float]:
    """Fit, to each odd part, a constant plus ``slope * slow * f / top``.

    Returns what is left (chi-square), the slope, and its standard uncertainty.
    """
    seen = np.array([reading.parts[rows] for reading in readings])
    if marks is not None:
        seen = seen - np.array([mark[rows] for mark in marks])
    w = np.array(weights)
    f = np.array([[reading.fundamental_hz / top] for reading in readings])
    column = f * slow[rows]
    total = w.sum(axis=0)
    mean_column = (w * column).sum(axis=0) / total
    mean_seen = (w * seen).sum(axis=0) / total
    column, seen = column - mean_column, seen - mean_seen
    power = float((w * column * column).sum())
    slope = float((w * column * seen).sum()) / power if power > 1e-12 else 0.0
    slope = max(slope, 0.0)
    left = float((w * (seen - slope * column) ** 2).sum())
    return left, slope, 1.0 / math.sqrt(power) if power > 1e-12 else 0.0


def _shaper(last: Reading, left: Array, basis: Array) -> Remainder | None:
    """What no cause explains: noise taken off."""
    keep = np.eye(left.size) - basis @ basis.T
    noise = keep @ last.random_covariance @ keep
    square = float(left @ left) - float(np.trace(noise))
    if square <= 0.0:
        return None
    thd = math.sqrt(square)
    sigma = math.sqrt(
        max(float(left @ last.covariance @ left), 0.5 * float(np.sum(noise**2)))
    ) / max(_length(left), 1e-30)
    return _told("shaper", thd, sigma)


def _hum(last: Reading) -> Remainder | None:
    ratio = last.extra.get("hum_ratio", 0.0)
    sigma = math.sqrt(2.0 / max(last.samples, 1)) * last.noise / last.amplitude
    return _told("hum", ratio, sigma)


def _noise(last: Reading) -> Remainder | None:
    """Noise counts as a cause where it makes up much of the THD that is seen."""
    made = math.sqrt(last.noise_power)
    if made < 0.3 * max(last.thd.value, _LEAST):
        return None
    return Remainder("noise", made, last.random_thd_sigma, REMEDIES["noise"])


def _cut(readings: Sequence[Reading], usual_amplitude: float | None) -> list[Remainder | None]:
    """Crests that are cut: in the digitiser (without noise), in the unit, by a low supply."""
    last = readings[-1]
    flat = [last.extra.get(f"flat_{side}", 1.0) for side in ("upper", "lower")]
    piled = [last.extra.get(f"piled_{side}", 0.0) for side in ("upper", "lower")]
    crest = _length(last.crest_parts)
    sigma = last.thd.sigma
    if max(piled) > 0.0:
        return [_told("clipping-in-digitiser", crest, sigma)]
    usual = usual_amplitude or max(
        reading.amplitude
        for reading in readings
        if 0.8 < reading.fundamental_hz / last.fundamental_hz < 1.25
    )
    both = last.crests.upper < -_SURE * last.crests.upper_sigma - 0.01 and (
        last.crests.lower < -_SURE * last.crests.lower_sigma - 0.01
    )
    if both and last.amplitude < _LOWER * usual:
        return [_told("supply", crest, sigma)]
    return [_told("clipping-in-unit", crest, sigma) if max(flat) > _FLAT else None]
