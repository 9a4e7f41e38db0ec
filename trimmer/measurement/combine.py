"""Several frames of the same thing, combined into one reading.

Each frame counts by what it knows (its own random covariance). The spread between frames is held
against what the frames say of themselves, and the larger of the two counts. What is the same in
all frames (non-linearity, a reference) is added once, after averaging.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from trimmer.measurement.figures import crests_of, rise_share_of
from trimmer.measurement.kernels import Array
from trimmer.measurement.reading import Flag, Reading
from trimmer.measurement.thd import Disturbance, thd_of

_SURPRISE = 3.3
"""Standard deviations (of a chi-square, by its cube root) above which one part's scatter counts."""


def cut_to(reading: Reading, orders: int) -> Reading:
    """Give the reading over its first `orders` orders only, all figures made anew.

    Readings of different K are compared over their common orders only.
    """
    if orders >= reading.orders:
        return reading
    if orders < 2:
        raise ValueError(f"a reading needs at least 2 orders, not {orders}")
    size = 2 * (orders - 1)
    systematic = reading.systematic[:size, :size]
    share = size / reading.parts.size
    return with_parts(
        replace(reading, orders=orders, noise_power=reading.noise_power * share),
        reading.parts[:size],
        reading.covariance[:size, :size],
        systematic,
    )


def with_parts(reading: Reading, parts: Array, covariance: Array, systematic: Array) -> Reading:
    """Give the reading with other parts, its figures made anew from them."""
    disturbance = Disturbance(
        reading.noise_power, tuple(np.diag(systematic).tolist()), reading.freedom
    )
    share, share_sigma = rise_share_of(parts, covariance)
    return replace(
        reading,
        parts=parts,
        covariance=covariance,
        systematic=systematic,
        thd=thd_of(parts, covariance, disturbance),
        crests=crests_of(parts, covariance),
        rise_share=share,
        rise_share_sigma=share_sigma,
    )


def combine(readings: Sequence[Reading]) -> Reading:
    """Combine readings of the same, untouched unit into one.

    Parameters
    ----------
    readings
        At least one. Where they differ in K, the common orders are kept.

    Returns
    -------
    Reading
        `frames`, `samples` and `cycles` are sums. `covariance` is the larger of what the frames'
        own covariances and what the scatter between them say, plus what is common to all.

    Raises
    ------
    ValueError
        There is none.
    """
    if not readings:
        raise ValueError("combine needs at least one reading")
    if len(readings) == 1:
        return readings[0]
    orders = min(reading.orders for reading in readings)
    alike = [cut_to(reading, orders) for reading in readings]
    parts, random, surplus = _weighted(alike)
    common = _common(alike, parts.size)
    frequency = _mean([(r.fundamental_hz, r.fundamental_sigma_hz) for r in alike])
    amplitude = _mean([(r.amplitude, r.amplitude_sigma) for r in alike])
    offset = _mean([(r.offset, r.offset_sigma) for r in alike])
    samples = sum(r.samples for r in alike)
    noise_power = surplus / max(sum(1.0 / max(r.noise_power, 1e-300) for r in alike), 1e-300)
    whole = replace(
        alike[-1],
        fundamental_hz=frequency[0],
        fundamental_sigma_hz=frequency[1],
        amplitude=amplitude[0],
        amplitude_sigma=amplitude[1],
        offset=offset[0],
        offset_sigma=offset[1],
        noise=math.sqrt(sum(r.samples * r.noise**2 for r in alike) / samples),
        thd_plus_noise=math.sqrt(sum(r.samples * r.thd_plus_noise**2 for r in alike) / samples),
        flags=_union(alike),
        samples=samples,
        cycles=sum(r.cycles for r in alike),
        frames=sum(r.frames for r in alike),
        noise_power=noise_power,
        freedom=sum(r.freedom for r in alike),
    )
    return with_parts(whole, parts, random + common, common)


def _weighted(readings: Sequence[Reading]) -> tuple[Array, Array, float]:
    """Give the weighted mean of the parts, its random covariance, and the factor by scatter."""
    weights = [_information(reading.random_covariance) for reading in readings]
    covariance = _information(np.sum(weights, axis=0))
    stack = np.array([reading.parts for reading in readings])
    pulled = np.sum([w @ p for w, p in zip(weights, stack, strict=True)], axis=0)
    mean = covariance @ pulled
    off = stack - mean
    freedom = len(readings) - 1
    excess = sum(float(d @ w @ d) for d, w in zip(off, weights, strict=True))
    surplus = max(1.0, excess / (freedom * mean.size))
    own = np.array([np.diag(reading.random_covariance) for reading in readings])
    each = (off**2 / np.maximum(own, 1e-300)).sum(axis=0) / freedom
    # cube root of a chi-square over its freedom: nearly normal (Wilson, Hilferty, PNAS 17, 1931)
    spread = 2.0 / (9.0 * freedom)
    loud = np.cbrt(each) > 1.0 - spread + _SURPRISE * math.sqrt(spread)
    factor = np.sqrt(np.where(loud, np.maximum(each, surplus), surplus))
    return mean, covariance * np.multiply.outer(factor, factor), surplus


def _information(covariance: Array) -> Array:
    """Invert a covariance, floored so that a part known exactly stays finite."""
    floor = 1e-30 + 1e-12 * float(np.trace(covariance)) / covariance.shape[0]
    inverse: Array = np.linalg.inv(covariance + floor * np.eye(covariance.shape[0]))
    return 0.5 * (inverse + inverse.T)


def _common(readings: Sequence[Reading], size: int) -> Array:
    parts = [r.systematic if r.systematic.size else np.zeros((size, size)) for r in readings]
    mean: Array = np.mean(parts, axis=0)
    return mean


def _mean(values: Sequence[tuple[float, float]]) -> tuple[float, float]:
    """Weighted mean of values with uncertainties; the larger of own and scatter counts."""
    least = max(max(s for _, s in values) * 1e-6, 1e-300)
    weights = [1.0 / max(s, least) ** 2 if least > 1e-150 else 1.0 for _, s in values]
    total = sum(weights)
    mean = sum(w * v for w, (v, _) in zip(weights, values, strict=True)) / total
    excess = sum(w * (v - mean) ** 2 for w, (v, _) in zip(weights, values, strict=True))
    own = 1.0 / total if least > 1e-150 else 0.0
    return mean, math.sqrt(max(own, excess / (total * (len(values) - 1))))


def _union(readings: Sequence[Reading]) -> tuple[Flag, ...]:
    """Flags of all readings, each code once, as last seen."""
    seen: dict[str, Flag] = {}
    for reading in readings:
        seen.update({flag.code: flag for flag in reading.flags})
    return tuple(seen.values())


def frames_needed(reading: Reading, sigma: float) -> int | None:
    """Say how many more frames like those behind `reading` bring THD's uncertainty down to `sigma`.

    Parameters
    ----------
    reading
        What is known so far.
    sigma
        Wanted standard uncertainty of THD, ratio.

    Returns
    -------
    int or None
        0 where it is reached; None where no number of frames does, because what is the same in
        every frame (the digitiser's non-linearity, a reference) is larger than that.
    """
    if not sigma > 0.0:
        raise ValueError("the wanted uncertainty must be positive")
    whole, random = reading.thd.sigma, reading.random_thd_sigma
    if whole <= sigma:
        return 0
    room = sigma**2 - max(whole**2 - random**2, 0.0)
    if room <= 0.0:
        return None
    return max(1, math.ceil(reading.frames * (random**2 / room - 1.0) * (1.0 - 1e-12)))
