"""What the fit leaves in each block, and what it tells: drift, and noise that is not white.

The residual's projection on a line, block by block, costs no sample: the data's is there, and the
model's follows from the Dirichlet kernel of one block.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from trimmer.measurement.fit import Fit
from trimmer.measurement.kernels import Array
from trimmer.measurement.model import Complex, block_kernels
from trimmer.measurement.projection import twists

_GROUPS = 16
"""Groups of blocks in which the noise around each order is looked at."""
_COLOURED = 4.5
"""Standard deviations of a chi-square by its cube root above which noise is held not to be white."""
_DRIFT_SEEN = 5.0
"""Standard deviations above which a bent phase counts as drift."""
_DRIFT_MATTERS = 0.01
"""Radians of bent phase, at the ends of the frame, worth telling."""


def block_residuals(fit: Fit, orders: int) -> Complex:
    """Project the residual, block by block, on the orders 1..`orders`.

    Returns
    -------
    Complex
        Shape (orders, M), ``sum (x - model) exp(-j w_i t)`` over each whole block, t from the
        middle of the record.
    """
    data, lines = fit.projections, fit.lines
    rows = slice(1, orders + 1)
    turn = twists(data.centres, lines, fit.w)
    shift = fit.w - data.w
    sums = data.sums[rows]
    if shift:
        sums = sums - ((1j * shift) * np.arange(1.0, orders + 1.0))[:, None] * data.moments[rows]
    near, far = block_kernels(data.length, lines, fit.w, orders)
    half = 0.5 * fit.phasors
    waves = np.conj(turn) * half[:, None]  # X_l exp(j w_l t_m) / 2
    model = near @ waves + far @ np.conj(waves)
    residual: Complex = (sums - model) * turn[rows]
    return residual[:, :-1] if data.samples % data.length else residual


def noise_colour(fit: Fit, residual: Complex) -> Array:
    """Say how much stronger than white the noise around each order is.

    Parameters
    ----------
    fit
        The fit.
    residual
        Shape (K, M), from `block_residuals` for orders 1..K.

    Returns
    -------
    Array
        Shape (K,), at least 1; 1 wherever the excess could be chance.
    """
    orders, blocks = residual.shape
    groups = min(_GROUPS, blocks // 2)
    if groups < 6:
        return np.ones(orders)
    rows = blocks // groups
    sums = residual[:, : groups * rows].reshape(orders, groups, rows).sum(axis=2)
    freedom = 2.0 * groups - 3.0  # amplitude and phase are fitted, and one share of the frequency
    power = (sums.real**2 + sums.imag**2).sum(axis=1)
    # over one group, cosine and sine hold half the samples' variance each
    ratio = power / (freedom * 0.5 * rows * fit.projections.length * fit.variance)
    spread = 2.0 / (9.0 * freedom)
    loud = np.cbrt(ratio) > 1.0 - spread + _COLOURED * math.sqrt(spread)
    colour: Array = np.where(loud, np.maximum(ratio, 1.0), 1.0)
    return colour


@dataclass(frozen=True, slots=True)
class Drift:
    """How the fundamental moves inside the frame."""

    change: float
    """Change of frequency from the first to the last sample, radians per sample."""
    bend: float
    """Phase at the ends of the frame over that of a steady frequency, radians."""
    seen: bool
    """Whether it is larger than noise and large enough to matter."""


def frequency_drift(fit: Fit, residual: Complex) -> Drift:
    """Look for a frequency that moves inside the frame: a bent phase of the fundamental.

    `residual`, shape (K, M), is from `block_residuals` for orders 1..K.
    """
    t = fit.projections.centres[: residual.shape[1]] * (2.0 / fit.samples)
    if t.size < 6:
        return Drift(0.0, 0.0, False)
    one = complex(fit.phasors[1])
    phase = (residual[0] / (0.5 * fit.projections.length * one)).imag
    bend = t * t - float((t * t).mean())
    power = float(bend @ bend)
    curve = float(bend @ phase) / power
    # variance of one block's phase: 2 s^2 / (B A^2)
    sigma = math.sqrt(2.0 * fit.variance / (fit.projections.length * power)) / abs(one)
    seen = abs(curve) > _DRIFT_SEEN * sigma and abs(curve) > _DRIFT_MATTERS
    return Drift(change=8.0 * curve / fit.samples, bend=curve, seen=seen)
