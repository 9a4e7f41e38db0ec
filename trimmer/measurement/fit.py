"""Exact least squares for a fundamental, its harmonics and nuisance lines.

The amplitudes are linear and are solved for at each frequency; what is left is one equation for
the frequency, the residual times the derivative of the model, solved by Gauss-Newton (variable
projection: Golub, Pereyra, SIAM J. Numer. Anal. 10 (1973), in the form of Kaufman, BIT 15 (1975);
the four-parameter sine fit of IEEE Std 1057, here with all orders at once).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from trimmer.measurement.kernels import Array
from trimmer.measurement.model import Complex, Lines, Normal, normal_equations
from trimmer.measurement.projection import SHORT, Projections, Record, project
from trimmer.measurement.search import beat

_BLUR = 3e-6
"""Most that the highest order may turn within half a block (rad) between projection and fit."""
_BLUR_OF_MOMENTS = 4e-9
"""The same, times the block's share of the record."""
_STEPS = 30
_ROUNDS = 8
_GRAIN = 1e-14
_STAGES = (2, 8)
"""Orders fitted on the way: the more orders, the narrower the way to the minimum."""
_SURE_CYCLES = 8.0
"""From so many periods on the spectrum knows the frequency well enough for the second stage."""
_ROUGH, _NEAR, _FINE = 1e-2, 0.1, 1e-6
"""A frequency counts as settled when the next step turns the highest order by less than this (rad)
over half the record. The step is still taken, and what it leaves is its square."""


@dataclass(frozen=True, slots=True, eq=False)
class Fit:
    """The least-squares fit of a record, in the record's scaled unit."""

    samples: int
    """N."""
    lines: Lines
    """The lines fitted."""
    w: float
    """Fundamental, radians per sample."""
    cosines: Array
    """Shape (L,), ``a_i`` (line 0 is the offset)."""
    sines: Array
    """Shape (L,), ``b_i`` (line 0 is 0)."""
    residual_power: float
    """Sum of the squared residuals."""
    power: float
    """Sum of the squared samples, mean taken off."""
    inverse: Array
    """Shape (2, L, L), inverse Gram matrices of the cosines and of the sines."""
    tilt: Array
    """Shape (2, L), change of ``a`` and ``b`` per change of ``w``: ``-G^-1 g``."""
    stiffness: float
    """Information on ``w`` once the amplitudes are free: ``1 / stiffness`` times the noise's variance
    is the variance of ``w``."""
    converged: bool
    """Whether the last step was below the arithmetic's grain."""
    projections: Projections
    """What the fit was made from; it may hold more lines than were fitted."""
    normal: Normal
    """Normal equations at `w`."""

    @property
    def freedom(self) -> int:
        """Degrees of freedom left: N less the parameters."""
        return self.samples - 2 * self.lines.count

    @property
    def variance(self) -> float:
        """Variance of the noise of one sample, scaled unit."""
        return self.residual_power / max(self.freedom, 1)

    def room(self, cross: Array, itself: Array) -> Array:
        """Say what of other basis functions the fit cannot imitate.

        Parameters
        ----------
        cross
            Shape (2, C, L), their products with the fit's cosines and sines.
        itself
            Shape (2, C), their squares.

        Returns
        -------
        Array
            Shape (2, C), what is left of `itself`.
        """
        left: Array = itself - ((cross @ self.inverse) * cross).sum(axis=2)
        return left

    @property
    def phasors(self) -> Complex:
        """Shape (L,), ``X_i = a_i - j b_i`` about the middle of the record."""
        phasors: Complex = self.cosines - 1j * self.sines
        return phasors


@dataclass(frozen=True, slots=True, eq=False)
class Solution:
    """The amplitudes at one frequency, and the Gauss-Newton step for the frequency."""

    normal: Normal
    inverse: Array
    amplitudes: Array
    tilt: Array
    explained: float
    stiffness: float
    step: float


def solve(projections: Projections, w: float, lines: Lines, near: Array | None = None) -> Solution:
    """Solve for the amplitudes of `lines` at the fundamental `w`, and for the next step of `w`.

    The projections may hold more lines. `near` is the inverse Gram matrix at a frequency nearby,
    where there is one.
    """
    normal = normal_equations(projections.samples, lines, w)
    first, second = projections.totals(w, lines)
    data = np.empty((2, lines.count))
    data[0] = first.real
    np.negative(first.imag, out=data[1])
    data[1, 0] = 0.0
    inverse = _inverse(normal.gram) if near is None else near
    rounds = 1 if near is None else _ROUNDS
    amplitudes = _solution(normal.gram, inverse, data, rounds)
    k_cos, k_sin = lines.multiples() * amplitudes
    # derivative of the model: t (-k a sin + k b cos); its products with basis, itself and data
    with_basis, itself = normal.with_derivative(k_cos, k_sin)
    with_data = k_cos @ second.imag + k_sin @ second.real
    tilt = -_solution(normal.gram, inverse, with_basis, rounds)
    stiffness = float(itself + np.vdot(with_basis, tilt))
    score = float(with_data - np.vdot(amplitudes, with_basis))
    step = score / stiffness if stiffness > 0.0 else 0.0
    return Solution(
        normal=normal,
        inverse=inverse,
        amplitudes=amplitudes,
        tilt=tilt,
        explained=float(np.vdot(amplitudes, data)),
        stiffness=stiffness,
        step=step if math.isfinite(step) else 0.0,
    )


def _solution(gram: Array, inverse: Array, right: Array, rounds: int) -> Array:
    """Solve both Gram systems by an inverse that is nearly right, then by what it left.

    Each round takes the error down by as much as the inverse is good: a change of frequency within
    a resolution cell's hundredth costs one or two rounds, a matrix inversion costs fifty.
    """
    right = right[:, :, None]
    solution = inverse @ right
    for _ in range(rounds):
        change = inverse @ (right - gram @ solution)
        solution += change
        if rounds > 1 and float(np.abs(change).max()) <= _GRAIN * float(np.abs(solution).max()):
            break
    return solution[:, :, 0]


def _inverse(gram: Array) -> Array:
    """Invert; where two lines cannot be told apart, share between them."""
    try:
        return np.asarray(np.linalg.inv(gram), dtype=np.float64)
    except np.linalg.LinAlgError:
        return np.asarray(np.linalg.pinv(gram, hermitian=True), dtype=np.float64)


def _refine(
    projections: Projections,
    w: float,
    lines: Lines,
    tolerance: float,
    near: Array | None = None,
) -> tuple[float, bool, Solution]:
    """Gauss-Newton for the frequency on given projections.

    A step is bounded by half a resolution cell, and halved while it makes the fit worse.

    Returns
    -------
    tuple
        The frequency, whether it settled, and the solution that the last step started from.
    """
    cell = math.pi / projections.samples
    small = tolerance * 2.0 / (projections.samples * lines.orders)
    solved = solve(projections, w, lines, near)
    close = 0.02 * cell / lines.orders
    for _ in range(_STEPS):
        step = max(-cell, min(cell, solved.step))
        if abs(step) <= small:
            return w + step, True, solved
        near = solved.inverse if abs(step) < close else None
        tried = solve(projections, w + step, lines, near)
        for _ in range(6):
            if tried.explained >= solved.explained * (1.0 - 1e-13):
                break
            step *= 0.5
            tried = solve(projections, w + step, lines)
        w, solved = w + step, tried
        if not 0.0 < w < math.pi:
            break
    return w, False, solved


@dataclass(frozen=True, slots=True, eq=False)
class Approach:
    """A frequency close enough for a fit with all orders."""

    w: float
    """Radians per sample; 0 where it ran away."""
    wander: float
    """Size of the slow line over the fundamental."""
    projections: Projections
    """Of all orders in a short record, of a few in a long one, and of the slow line."""


def approach(record: Record, orders: int, w: float, unsure: float = 0.0) -> Approach:
    """Bring a coarse frequency to within the reach of a fit with all orders.

    Few orders are fitted first, more are taken in as the frequency gets better. A slow line stands
    for a wandering offset, which would pull at few periods.

    Parameters
    ----------
    record
        The samples.
    orders
        Orders to be fitted in the end.
    w
        Coarse frequency, radians per sample.
    unsure
        How far it may be off, where that is more than a few hundredths of ``2 pi / N``; else 0.

    Returns
    -------
    Approach
        Where it got to.
    """
    stages = [stage for stage in _STAGES if stage < orders] or [orders]
    if w * record.count > 2.0 * math.pi * _SURE_CYCLES:
        stages = stages[-1:]
    most = orders if record.count <= SHORT else stages[-1]
    slow = np.array([slow_line(record.count)])
    projections = project(record, Lines(most, slow), w)
    if unsure > 0.0:
        w = beat(projections, 1, w, unsure)
    for stage in stages:
        w, _, solved = _refine(projections, w, Lines(stage, slow), _ROUGH)
        if not 0.0 < w < math.pi / most:
            return Approach(0.0, 0.0, projections)
    sizes = np.hypot(*solved.amplitudes)
    return Approach(w, float(sizes[-1]) / max(float(sizes[1]), 1e-300), projections)


def slow_line(samples: int) -> float:
    """Frequency of the line that stands for a wandering offset: a twentieth of a period in the record.

    Its sine is nearly a straight line there, its cosine nearly a parabola.
    """
    return 0.1 * math.pi / samples


def fit(record: Record, lines: Lines, w: float, start: Projections | None = None) -> Fit:
    """Fit `lines` to a record, starting from the fundamental `w` (radians per sample).

    Parameters
    ----------
    record
        The samples.
    lines
        Orders and nuisance lines to fit.
    w
        Start, as `approach` gives it.
    start
        Projections near `w` on `lines` or more, where they are at hand.
    """
    projections = project(record, lines, w) if start is None else start
    w, _, solved = _refine(projections, w, lines, _NEAR)
    for _ in range(4):
        if _is_blurred(projections, w):
            projections = project(record, projections.lines, w)
        w, converged, solved = _refine(projections, w, lines, _FINE, solved.inverse)
        if not _is_blurred(projections, w) or not 0.0 < w < math.pi:
            break
    return _finished(projections, lines, solved, w, converged)


def _is_blurred(projections: Projections, w: float) -> bool:
    """Say whether `w` is too far from where the blocks were projected.

    The sums are off by a sixth of the blur's square; the moments, and with them the frequency, by
    the blur itself times the block's share of the record.
    """
    blur = projections.blur(w)
    return blur > _BLUR or blur * projections.length > _BLUR_OF_MOMENTS * projections.samples


def _finished(
    projections: Projections, lines: Lines, solved: Solution, w: float, converged: bool
) -> Fit:
    """Take stock of a fit; the amplitudes follow the last, tiny step of the frequency."""
    step = solved.step if converged else 0.0
    grain = np.finfo(np.float64).eps * projections.power
    gained = 0.5 * solved.stiffness * step * step
    amplitudes = solved.amplitudes + step * solved.tilt
    return Fit(
        samples=projections.samples,
        lines=lines,
        w=w,
        cosines=amplitudes[0],
        sines=amplitudes[1],
        residual_power=max(projections.power - solved.explained - gained, grain),
        power=projections.power,
        inverse=solved.inverse,
        tilt=solved.tilt,
        stiffness=max(solved.stiffness, np.finfo(np.float64).tiny),
        converged=converged,
        projections=projections,
        normal=solved.normal,
    )
