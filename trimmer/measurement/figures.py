"""Figures of a shape: pointedness of its crests, its rise share, THD_R, THD+N."""

from __future__ import annotations

import math

import numpy as np

from trimmer.measurement.fit import Fit
from trimmer.measurement.kernels import Array
from trimmer.measurement.reading import Crests

_GRID = 720


def crests_of(parts: Array, covariance: Array) -> Crests:
    """Give the pointedness of both crests and their asymmetry, with uncertainties.

    ``q_U = r(0) - (r(45 deg) + r(-45 deg)) / 2 = sum c_k (1 - cos(k pi / 4))`` with
    ``r = shape - cos``; the lower crest is the same of the wave upside-down and half a period on.
    """
    k = np.arange(2, parts.size // 2 + 2)
    weight = 1.0 - np.cos(k * math.pi / 4.0)
    rows = np.zeros((3, parts.size))
    rows[0, 0::2] = weight
    rows[1, 0::2] = np.where(k % 2 == 1, weight, -weight)
    rows[2] = rows[0] - rows[1]
    upper, lower, asymmetry = (float(value) for value in rows @ parts)
    sigma = np.sqrt(np.maximum(np.einsum("ij,jk,ik->i", rows, covariance, rows), 0.0))
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
    z = np.concatenate(([1.0 + 0.0j], parts[0::2] - 1j * parts[1::2]))
    waves = np.exp(1j * np.multiply.outer(theta, k))
    shape: Array = (waves @ (z * (1j * k) ** derivative)).real
    return shape


def rise_share_of(parts: Array, covariance: Array) -> tuple[float, float]:
    """Give the time from lower to upper crest over the period, and its standard uncertainty.

    Both crests are extremes of the fitted shape. An extreme moves by ``-d(shape') / shape''``.
    """
    k = np.arange(2, parts.size // 2 + 2)
    places, rows = [], []
    grid = np.arange(_GRID) * (2.0 * math.pi / _GRID)
    shape = shape_at(parts, grid)
    for sign in (1.0, -1.0):
        theta = float(grid[int(np.argmax(sign * shape))])
        bend = -sign
        for _ in range(4):
            here = np.array([theta])
            bend = float(shape_at(parts, here, 2)[0])
            if sign * bend >= 0.0:  # not a crest a parabola could describe: keep the grid's word
                break
            step = -float(shape_at(parts, here, 1)[0]) / bend
            theta += max(-math.pi / _GRID, min(math.pi / _GRID, step))
        row = np.empty(parts.size)
        row[0::2], row[1::2] = -k * np.sin(k * theta), k * np.cos(k * theta)
        places.append(theta)
        rows.append(-row / bend if sign * bend < 0.0 else np.zeros(parts.size))
    share = math.fmod((places[0] - places[1]) / (2.0 * math.pi) + 2.0, 1.0)
    row = (rows[0] - rows[1]) / (2.0 * math.pi)
    return share, math.sqrt(max(float(row @ covariance @ row), 0.0))


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
    normal = fit.normal
    a, b = fit.cosines.copy(), fit.sines.copy()
    a_1, b_1 = float(a[1]), float(b[1])
    a[:2], b[:2] = 0.0, 0.0
    rest = float(a @ normal.even @ a + b[1:] @ normal.odd @ b[1:])
    even, even_gram = (normal.even @ a)[:2], normal.even[:2, :2]
    odd, odd_gram = float((normal.odd @ b[1:])[0]), float(normal.odd[0, 0])
    rest -= float(even @ np.linalg.solve(even_gram, even)) + odd * odd / odd_gram
    even_g, odd_g = -normal.even_slope[:2, 1] * a_1, float(normal.odd_slope[1, 1]) * b_1
    own = float(normal.sine_curve[1, 1]) * a_1**2 + float(normal.cosine_curve[1, 1]) * b_1**2
    lean = np.linalg.solve(even_gram, even_g)
    stiffness = own - float(even_g @ lean) - odd_g * odd_g / odd_gram
    with_rest = -a_1 * float(normal.even_slope[:, 1] @ a) + b_1 * float(normal.odd_slope[:, 1] @ b)
    score = with_rest - float(even @ lean) - odd * odd_g / odd_gram
    if stiffness > 0.0:
        rest -= score * score / stiffness
    residual = fit.residual_power + max(rest, 0.0)
    return math.sqrt(residual / fit.samples) / (math.hypot(a_1, b_1) / math.sqrt(2.0))
