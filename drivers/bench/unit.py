"""The wave a simulated unit gives at a setting, and the least THD its trims can reach."""

from __future__ import annotations

from dataclasses import dataclass
from math import inf

import numpy as np
from numpy.typing import NDArray

from drivers.bench.ladder import TAPS, tap_voltages
from drivers.bench.parts import WARM_C, Parts
from drivers.bench.shaper import Breakpoints, transfer

Array = NDArray[np.float64]

PERIOD_POINTS = 4096
"""Points of one period of the wave."""
ORDERS = 15
"""Harmonics up to this order count in THD."""

BOLTZMANN_OVER_CHARGE = 1.380649e-23 / 1.602176634e-19
"""V/K, from the exact constants of the SI (2019)."""
ZERO_CELSIUS_K = 273.15
"""0 degrees Celsius, exact."""


def breakpoints(parts: Parts, wipers: tuple[float, float], temperature_c: float) -> Breakpoints:
    """Set the shaper's branches for a setting of the wipers and an inside temperature."""
    upper_v, lower_v = tap_voltages(
        parts.upper, parts.lower, parts.shared_ohm, parts.rails_v, wipers
    )
    drift_v = parts.warming.knee_v_k * (temperature_c - WARM_C)
    return Breakpoints(
        source_ohm=parts.source_ohm,
        senses=np.repeat([1.0, -1.0], TAPS),
        taps_v=np.concatenate([upper_v, lower_v]),
        branches_ohm=np.array(parts.branches_ohm),
        knees_v=np.array(parts.knees_v) + drift_v,
        thermal_v=BOLTZMANN_OVER_CHARGE * (temperature_c + ZERO_CELSIUS_K),
    )


def period(
    parts: Parts,
    wipers: tuple[float, float],
    frequency_hz: float,
    temperature_c: float = WARM_C,
    points: int = PERIOD_POINTS,
) -> Array:
    """One period at the terminal, without hum and noise.

    Parameters
    ----------
    parts
        The unit.
    wipers
        Electrical shares of the upper and the lower trim, 0 to 1.
    frequency_hz
        Of the wave.
    temperature_c
        Inside, degrees Celsius.
    points
        At even steps from the triangle's lowest point on.

    Returns
    -------
    numpy.ndarray
        Shape (points,), volts.
    """
    peak = parts.triangle_v * (1.0 + parts.warming.triangle_per_k * (temperature_c - WARM_C))
    rise = parts.rise_share
    phase = np.arange(points) / points
    rising = phase < rise
    ramp = np.where(rising, 2.0 * phase / rise - 1.0, 1.0 - 2.0 * (phase - rise) / (1.0 - rise))
    triangle = parts.offset_v + peak * ramp
    speed = np.where(rising, 2.0 / rise, -2.0 / (1.0 - rise)) * peak * frequency_hz
    x, y, slope = transfer(
        breakpoints(parts, wipers, temperature_c), parts.offset_v - peak, parts.offset_v + peak
    )
    node = np.interp(triangle, x, y)
    steep = np.interp(triangle, x, slope)
    node -= parts.source_ohm * parts.node_f * steep**2 * speed
    return parts.output.drive(node, frequency_hz)


def crest_frame(wave: Array, orders: int = ORDERS) -> NDArray[np.complex128]:
    """Harmonics 2 to `orders` relative to the fundamental, seen from its positive crest.

    Parameters
    ----------
    wave
        Shape (N,), exactly one period.
    orders
        Highest order.

    Returns
    -------
    numpy.ndarray
        Shape (orders - 1,), `c_k - j s_k`.
    """
    spectrum = np.fft.rfft(wave)
    k = np.arange(2, orders + 1)
    turned = np.exp(-1j * k * np.angle(spectrum[1]))
    framed: NDArray[np.complex128] = spectrum[k] * turned / abs(spectrum[1])
    return framed


def thd(wave: Array, orders: int = ORDERS) -> float:
    """Total harmonic distortion of one exact period, ratio to the fundamental."""
    return float(np.linalg.norm(crest_frame(wave, orders)))


@dataclass(frozen=True, slots=True)
class Best:
    """The least THD inside the travel."""

    thd: float
    """Ratio."""
    wipers: tuple[float, float]
    """Electrical shares where it lies, upper and lower."""


def best(parts: Parts, frequency_hz: float, temperature_c: float = WARM_C) -> Best:
    """Find the least THD inside the travel, by damped least squares on the harmonics.

    The valley is smooth and single, so three starts are two more than needed; the best of
    them counts.
    """
    starts = ((0.5, 0.5), (0.25, 0.7), (0.7, 0.25))
    found = [_descend(parts, frequency_hz, temperature_c, np.array(start)) for start in starts]
    return min(found, key=lambda each: each.thd)


def _descend(parts: Parts, frequency_hz: float, temperature_c: float, at: Array) -> Best:
    def harmonics(w: Array) -> Array:
        wave = period(parts, (float(w[0]), float(w[1])), frequency_hz, temperature_c)
        z = crest_frame(wave)
        return np.concatenate([z.real, z.imag])

    h = harmonics(at)
    damping, step = 1e-3, 1e-4
    for _ in range(40):
        columns = []
        for axis in range(2):
            probe = at.copy()
            probe[axis] += step if at[axis] < 0.5 else -step
            columns.append((harmonics(probe) - h) / (probe[axis] - at[axis]))
        jacobian = np.array(columns).T
        gradient = jacobian.T @ h
        free = ~(((at <= 0.0) & (gradient > 0.0)) | ((at >= 1.0) & (gradient < 0.0)))
        if not free.any():
            break
        normal = jacobian.T @ jacobian
        moved = inf
        while damping < 1e6:
            reduced = (normal + damping * np.diag(np.diag(normal)))[np.ix_(free, free)]
            move = np.zeros(2)
            move[free] = -np.linalg.solve(reduced, gradient[free])
            trial = np.clip(at + move, 0.0, 1.0)
            tried = harmonics(trial)
            if tried @ tried < h @ h:
                moved = float(np.max(np.abs(trial - at)))
                at, h, damping = trial, tried, max(damping * 0.2, 1e-9)
                break
            damping *= 5.0
        if moved < 1e-7 or moved == inf:
            break
    return Best(float(np.sqrt(h @ h)), (float(at[0]), float(at[1])))
