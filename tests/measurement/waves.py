"""Waves with known harmonics, and the slow, obvious least squares and Fisher matrices about them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Wave:
    """A periodic wave: ``offset + amplitude * shape(w n + phase)``."""

    parts: Array
    """``c_2, s_2, c_3, s_3, ..``"""
    w: float
    """Radians per sample."""
    phase: float = 0.0
    """Phase of the positive crest's frame at the first sample."""
    amplitude: float = 1.0
    offset: float = 0.0

    def samples(self, count: int) -> Array:
        """The wave at ``n = 0 .. count - 1``."""
        theta = self.w * np.arange(count) + self.phase
        wave = np.cos(theta)
        for k in range(2, self.parts.size // 2 + 2):
            c, s = self.parts[2 * k - 4], self.parts[2 * k - 3]
            if c or s:
                wave += c * np.cos(k * theta) + s * np.sin(k * theta)
        return self.offset + self.amplitude * wave

    @property
    def thd(self) -> float:
        """Length of the parts."""
        return float(np.linalg.norm(self.parts))


def basis(w: float, count: int, orders: int) -> Array:
    """Shape (count, 2 orders + 1): a one, and cosines and sines about the first sample."""
    n = np.arange(count)
    columns = [np.ones(count)]
    for k in range(1, orders + 1):
        columns += [np.cos(k * w * n), np.sin(k * w * n)]
    return np.column_stack(columns)


def slow_fit(samples: Array, w: float, orders: int) -> tuple[float, Array, float]:
    """Four-parameter least squares on the full matrix, iterated to the end.

    Returns the frequency, the parts ``c_2, s_2, ..`` of all `orders`, and the residual sum.
    """
    count = samples.size
    n = np.arange(count) - 0.5 * (count - 1)
    for _ in range(40):
        matrix = np.column_stack(
            [np.ones(count)]
            + [f(k * w * n) for k in range(1, orders + 1) for f in (np.cos, np.sin)]
        )
        theta = np.linalg.lstsq(matrix, samples, rcond=None)[0]
        slope = sum(
            k * n * (theta[2 * k] * matrix[:, 2 * k - 1] - theta[2 * k - 1] * matrix[:, 2 * k])
            for k in range(1, orders + 1)
        )
        step = float(np.linalg.lstsq(np.column_stack((matrix, slope)), samples, rcond=None)[0][-1])
        w += step
        if abs(step) * count < 1e-15:
            break
    z = theta[1::2] - 1j * theta[2::2]
    k = np.arange(1, orders + 1)
    z = z * np.exp(-1j * k * np.angle(z[0])) / abs(z[0])
    parts = np.empty(2 * (orders - 1))
    parts[0::2], parts[1::2] = z.real[1:], -z.imag[1:]
    residual = samples - matrix @ theta
    return w, parts, float(residual @ residual)


def fisher_bound(wave: Wave, count: int, orders: int, sigma: float) -> tuple[Array, float]:
    """Inverse Fisher matrix of the very record, in the wave's own parameters.

    The derivatives with respect to offset, amplitude, phase, frequency and the parts are written
    down directly, with nothing in common with the code under test.

    Returns the covariance of the parts of `orders`, and the standard deviation of ``w``.
    """
    n = np.arange(count)
    theta = wave.w * n + wave.phase
    full = np.zeros(2 * (orders - 1))
    full[: wave.parts.size] = wave.parts[: full.size]
    shape, slope = np.cos(theta), -np.sin(theta)
    columns = []
    for k in range(2, orders + 1):
        c, s = full[2 * k - 4], full[2 * k - 3]
        cosine, sine = np.cos(k * theta), np.sin(k * theta)
        shape = shape + c * cosine + s * sine
        slope = slope + k * (s * cosine - c * sine)
        columns += [wave.amplitude * cosine, wave.amplitude * sine]
    matrix = np.column_stack(
        (*columns, np.ones(count), shape, wave.amplitude * slope, wave.amplitude * slope * n)
    )
    size = np.linalg.norm(matrix, axis=0)
    covariance = sigma**2 * np.linalg.inv((matrix / size).T @ (matrix / size))
    covariance /= np.multiply.outer(size, size)
    return covariance[: full.size, : full.size], float(np.sqrt(covariance[-1, -1]))


def parts_of(**orders: complex) -> Array:
    """Parts from ``k2=c - 1j * s`` and the like."""
    most = max(int(name[1:]) for name in orders)
    parts = np.zeros(2 * (most - 1))
    for name, z in orders.items():
        k = int(name[1:])
        parts[2 * k - 4], parts[2 * k - 3] = complex(z).real, -complex(z).imag
    return parts


def series(kind: str, orders: int, rise_share: float = 0.5) -> Array:
    """Parts of an ideal triangle, square wave or ramp, cut after `orders`, crest frame.

    A triangle of another rise share than one half has ``|X_k| ~ |sin(k pi d)| / k^2`` and leans in
    time only.
    """
    k = np.arange(2, orders + 1)
    parts = np.zeros(2 * (orders - 1))
    if kind == "square":
        parts[0::2] = np.where(k % 2, (-1.0) ** ((k - 1) // 2) / k, 0.0)
    elif kind == "ramp":  # sum sin(k t)/k, seen from the crest of its fundamental at t = pi/2
        z = np.exp(1j * k * np.pi / 2) * (-1j) / k
        parts[0::2], parts[1::2] = z.real, -z.imag
    elif kind == "triangle":
        d = rise_share
        x = np.exp(-1j * np.arange(1, orders + 1) * np.pi * d)  # crest of the triangle at phase 0
        order = np.arange(1, orders + 1)
        # a triangle rising over d and falling over 1-d: X_k = -(1 - exp(-j 2 pi k d)) / (..k^2)
        line = (1.0 - np.exp(2j * np.pi * order * d)) / order**2
        line = line * np.exp(-1j * order * np.angle(line[0])) / abs(line[0])
        del x
        parts[0::2], parts[1::2] = line.real[1:], -line.imag[1:]
    else:
        raise ValueError(kind)
    return parts


def rounded(samples: Array, bits: int, full_scale: float) -> Array:
    """An ideal mid-rise converter from ``-full_scale`` to ``full_scale``."""
    code = 2.0 * full_scale / 2**bits
    codes = np.clip(np.floor(samples / code), -(2 ** (bits - 1)), 2 ** (bits - 1) - 1)
    return (codes + 0.5) * code
