"""Figures of a shape: pointedness of its crests, its rise share, THD_R, THD+N."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from trimmer.measurement.fit import Fit
from trimmer.measurement.kernels import Array
from trimmer.measurement.model import Complex
from trimmer.measurement.reading import Crests

_GRID = 512
_FINE_GRID = 1024


@lru_cache(maxsize=32)
def _crest_rows(size: int) -> Array:
    """Shape (3, size): upper and lower pointedness and their difference, as sums of parts."""
    k = np.arange(2, size // 2 + 2)
    weight = 1.0 - np.cos(k * math.pi / 4.0)
    rows = np.zeros((3, size))
    rows[0, 0::2] = weight
    rows[1, 0::2] = np.where(k % 2 == 1, weight, -weight)
    rows[2] = rows[0] - rows[1]
    rows.flags.writeable = False
    return rows


def crests_of(parts: Array, covariance: Array) -> Crests:
    """Give the pointedness of both crests and their asymmetry, with uncertainties.

    ``q_U = r(0) - (r(45 deg) + r(-45 deg)) / 2 = sum c_k (1 - cos(k pi / 4))`` with
    ``r = shape - cos``; the lower crest is the same of the wave upside-down and half a period on.
    """
    rows = _crest_rows(parts.size)
    upper, lower, asymmetry = (float(value) for value in rows @ parts)
    sigma = np.sqrt(np.maximum(((rows @ covariance) * rows).sum(axis=1), 0.0))
    return Crests(
        upper=upper,
        lower=lower,
        asymmetry=asymmetry,
        upper_sigma=float(sigma[0]),
        lower_sigma=float(sigma[1]),
        asymmetry_sigma=float(sigma[2]),
    )


def shape_at(parts: Array, theta: Array, derivative: int = 0) -> Array:
    """Give the shape, or a derivative of it, at phases `theta` (radians from the positive crest)."""
    k = np.arange(1, parts.size // 2 + 2)
    z = _phasors(parts)
    waves = np.exp(1j * np.multiply.outer(theta, k))
    shape: Array = (waves @ (z * (1j * k) ** derivative)).real
    return shape


def _on_grid(z: Complex, points: int) -> Array:
    """Give ``Re sum z_k exp(j k theta)``, orders 1.., on a grid of phases, by an inverse FFT."""
    spectrum = np.zeros(points // 2 + 1, dtype=np.complex128)
    spectrum[1 : z.size + 1] = 0.5 * points * z
    return np.fft.irfft(spectrum, points)


def _phasors(parts: Array) -> Complex:
    """Give ``Z_1 .. Z_K``, shape (K,)."""
    return np.concatenate(([1.0 + 0.0j], parts[0::2] - 1j * parts[1::2]))


def rise_share_of(parts: Array, covariance: Array) -> tuple[float, float]:
    """Give the time from lower to upper crest over the period, and its standard uncertainty.

    Both crests are extremes of the fitted shape. An extreme moves by ``-d(shape') / shape''``.
    """
    z = _phasors(parts)
    shape = _on_grid(z, _GRID)
    top, upper = _crest(z, 2.0 * math.pi * int(np.argmax(shape)) / _GRID, 1.0)
    bottom, lower = _crest(z, 2.0 * math.pi * int(np.argmin(shape)) / _GRID, -1.0)
    share = math.fmod((top - bottom) / (2.0 * math.pi) + 2.0, 1.0)
    row = (upper - lower) / (2.0 * math.pi)
    return share, math.sqrt(max(float(row @ covariance @ row), 0.0))


def _crest(z: Complex, theta: float, sign: float) -> tuple[float, Array]:
    """Sharpen an extreme of the shape by Newton; give it and its change with the parts."""
    k = np.arange(1, z.size + 1)
    step = 2.0 * math.pi / _GRID
    lean = 1j * k * z
    bend = 0.0
    for _ in range(3):
        waves = np.exp(1j * theta * k)
        slope, bend = float((waves @ lean).real), float((waves @ (1j * k * lean)).real)
        if sign * bend >= 0.0:  # no crest a parabola could describe: the grid's word stands
            return theta, np.zeros(2 * z.size - 2)
        theta += max(-step, min(step, -slope / bend))
    row = np.empty(2 * z.size - 2)
    k = k[1:]
    row[0::2], row[1::2] = k * np.sin(k * theta) / bend, -k * np.cos(k * theta) / bend
    return theta, row


def flatness_of(fit: Fit) -> tuple[float, float]:
    """Say how flat both crests are: time near the crest over a sine's, 1 for a sine.

    Near is within 1 % of half the height, from all orders fitted. A crest cut at 0.95 shows 2.5, at
    0.99 1.4; a trim can hardly pass 1.5.
    """
    shape = _on_grid(fit.phasors[1 : fit.lines.orders + 1], _FINE_GRID)
    high, low = float(shape.max()), float(shape.min())
    near = 0.005 * (high - low)
    upper = np.count_nonzero(shape > high - near)
    lower = np.count_nonzero(shape < low + near)
    sine = _FINE_GRID * math.acos(0.99) / math.pi
    return float(upper) / sine, float(lower) / sine


def thd_of_total(thd: float) -> float:
    """Give THD_R, distortion over the whole alternating part, from THD_F.

    ``THD_R = THD_F / sqrt(1 + THD_F^2)``.
    """
    return thd / math.hypot(1.0, thd)


def sinad_db(thd_plus_noise: float) -> float:
    """Give SINAD in dB from THD+N (IEEE Std 1057: fundamental over noise and distortion, rms)."""
    return -20.0 * math.log10(thd_plus_noise) if thd_plus_noise > 0.0 else math.inf


def effective_bits(thd_plus_noise: float) -> float:
    """Give the effective number of bits of a full-scale sine: ``(SINAD - 1.761 dB) / 6.021 dB``."""
    return (sinad_db(thd_plus_noise) - 10.0 * math.log10(1.5)) / (20.0 * math.log10(2.0))


def thd_plus_noise_of(fit: Fit) -> float:
    """Give the residual of the one-tone, four-parameter fit over the fundamental (IEEE Std 1057).

    The residual is what the full fit leaves, plus that part of the other lines which offset, one
    tone and a change of its frequency cannot imitate.
    """
    even_gram, odd_gram = fit.normal.gram
    a, b = fit.cosines.copy(), fit.sines.copy()
    a_1, b_1 = float(a[1]), float(b[1])
    a[:2], b[:2] = 0.0, 0.0
    with_even, with_odd = even_gram @ a, odd_gram @ b
    # derivative of the tone with its frequency: -a_1 t sin + b_1 t cos
    only = np.zeros((2, a.size))
    only[0, 1], only[1, 1] = a_1, b_1
    with_tone, itself = fit.normal.with_derivative(only[0], only[1])
    # what offset and cosine, a block of two, and the sine take of the other lines and of the slope
    (p, q), (_, r) = even_gram[:2, :2].tolist()
    inverse = np.array([[r, -q], [-q, p]]) / (p * r - q * q)
    single = float(odd_gram[1, 1])
    even, odd = with_even[:2], float(with_odd[1])
    even_g, odd_g = with_tone[0, :2], float(with_tone[1, 1])
    left = float(a @ with_even + b @ with_odd - even @ inverse @ even) - odd * odd / single
    stiffness = itself - float(even_g @ inverse @ even_g) - odd_g * odd_g / single
    score = float(with_tone[0] @ a + with_tone[1] @ b - even @ inverse @ even_g)
    score -= odd * odd_g / single
    if stiffness > 0.0:
        left -= score * score / stiffness
    residual = fit.residual_power + max(left, 0.0)
    return math.sqrt(residual / fit.samples) / (math.hypot(a_1, b_1) / math.sqrt(2.0))
