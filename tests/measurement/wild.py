"""Inputs that nobody sane would measure, and what must come of them."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from trimmer.measurement import Digitiser, MeasurementError, Reading, measure

Array = NDArray[np.float64]
Call = tuple[Array, float, dict[str, Any]]

LENGTHS = (0, 1, 2, 3, 10, 16, 17, 20, 30, 50, 64, 100, 200, 500, 500, 1000, 1000, 3000)
INTERVALS = (*[1e-6] * 20, 1e-3, 1.0, 1e-300, 0.0, -1.0, math.nan, math.inf, 1e300)


def _holed(rng: np.random.Generator, wave: Array) -> Array:
    wave = wave.copy()
    if wave.size:
        wave[rng.integers(0, wave.size, 3)] = rng.choice([math.nan, math.inf, -math.inf, 1e300])
    return wave


def _pulses(rng: np.random.Generator, t: Array, f: float) -> Array:
    wave = np.zeros(t.size)
    wave[:: max(2, int(1 / f))] = 1.0
    return wave


KINDS: tuple[Callable[[np.random.Generator, Array, float], Array], ...] = (
    lambda rng, t, f: rng.standard_normal(t.size),
    lambda rng, t, f: np.full(t.size, rng.standard_normal()),
    lambda rng, t, f: np.sign(np.sin(2 * math.pi * f * t + rng.uniform(0, 7))),
    lambda rng, t, f: (f * t) % 1.0,
    lambda rng, t, f: np.cumsum(rng.standard_normal(t.size)),
    lambda rng, t, f: np.sin(2 * math.pi * f * t) * 10.0 ** rng.uniform(-300, 300),
    lambda rng, t, f: _holed(rng, np.sin(2 * math.pi * f * t)),
    lambda rng, t, f: np.exp(-t / max(t.size, 1) * rng.uniform(0, 30)),
    lambda rng, t, f: np.clip(np.sin(2 * math.pi * f * t), -rng.uniform(0, 1), rng.uniform(0, 1)),
    lambda rng, t, f: np.round(np.sin(2 * math.pi * f * t) * rng.uniform(0, 10)),
    lambda rng, t, f: np.sin(2 * math.pi * f * t) * 5e-324 * float(rng.integers(1, 50)),
    lambda rng, t, f: np.sin(2 * math.pi * f * t + 3 * np.sin(2 * math.pi * f / 7 * t)),
    _pulses,
    lambda rng, t, f: rng.integers(0, 2, t.size).astype(float),
    lambda rng, t, f: np.sin(2 * math.pi * f * t) + 1e6 * t,
    lambda rng, t, f: 1e15 + np.sin(2 * math.pi * f * t),
    lambda rng, t, f: np.sin(2 * math.pi * f * t) + 0.01 * rng.standard_normal(t.size),
    lambda rng, t, f: np.sin(2 * math.pi * f * t) ** 3 + 0.2 * rng.uniform(-1, 1, t.size),
)


def wild_call(rng: np.random.Generator) -> Call:
    """Draw samples, an interval and options, some of them absurd."""
    count = int(rng.choice(LENGTHS))
    t = np.arange(float(count))
    kind = KINDS[int(rng.integers(0, len(KINDS)))]
    samples = kind(rng, t, 10.0 ** rng.uniform(-3, -0.5))
    more: dict[str, Any] = {}
    if rng.random() < 0.3:
        more["hint_hz"] = float(rng.choice([0, -1, math.nan, math.inf, 1e-300, 1e300, 100.0, 1e3]))
    if rng.random() < 0.2:
        more["orders"] = int(rng.choice([-1, 0, 1, 2, 3, 15, 64, 100, 200, 1000]))
    if rng.random() < 0.2:
        more["mains_hz"] = float(rng.choice([0, -1, math.nan, math.inf, 50, 1e9]))
    if rng.random() < 0.2:
        more["digitiser"] = Digitiser(
            bits=int(rng.choice([0, 1, 8, 12, 16, 64])),
            code=rng.choice([None, 0.0, -1.0, 0.01, math.nan, math.inf]),
            low_rail=rng.choice([None, -1.0, math.nan]),
            high_rail=rng.choice([None, 1.0, -5.0, math.inf]),
            averaged=int(rng.choice([0, 1, 16])),
        )
    if rng.random() < 0.2:
        more["times_s"] = 1e-6 * t + 1e-8 * rng.standard_normal(count) * (rng.random() < 0.5)
    if rng.random() < 0.2:
        more["previous_samples"] = samples if rng.random() < 0.5 else samples[:5]
    return samples, float(rng.choice(INTERVALS)), more


def attempt(call: Call) -> str:
    """Measure; give ``reading`` or the refusal's code, having looked at what came back."""
    samples, interval_s, more = call
    try:
        reading = measure(samples, interval_s, **more)
    except MeasurementError as refusal:
        return refusal.code if str(refusal) and refusal.remedy else "refused without a word"
    sound(reading)
    return "reading"


def sound(reading: Reading) -> None:
    """Assert that every number of a reading is finite and in its place."""
    numbers = (
        reading.thd.value, reading.thd.sigma, reading.thd.low, reading.thd.high, reading.amplitude,
        reading.fundamental_hz, reading.fundamental_sigma_hz, reading.amplitude_sigma, reading.offset,
        reading.offset_sigma, reading.noise, reading.thd_plus_noise, reading.rise_share,
        reading.rise_share_sigma, reading.crests.upper, reading.crests.upper_sigma,
        reading.crests.asymmetry_sigma, reading.cycles, reading.phase, *reading.extra.values(),
    )  # fmt: skip
    assert all(math.isfinite(number) for number in numbers)
    assert np.isfinite(reading.parts).all()
    assert np.isfinite(reading.covariance).all()
    assert (np.diag(reading.covariance) >= 0.0).all()
    assert 0.0 <= reading.thd.low <= reading.thd.value <= reading.thd.high
    assert reading.orders >= 3
    assert reading.cycles > 2.99
