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
from trimmer.measurement.projection import Projections, Record, project

_BLUR = 2e-5
"""Turn of the highest order within half a block (rad) below which moments carry the sums exactly:
the neglected term is a sixth of its square."""
_STEPS = 30
_STAGES = (1, 3, 8, 20)


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
    even_inverse: Array
    """Shape (L, L), inverse Gram matrix of the cosines."""
    odd_inverse: Array
    """Shape (L-1, L-1), inverse Gram matrix of the sines."""
    even_tilt: Array
    """Shape (L,), change of ``a`` per change of ``w``: ``-G^-1 g`` of the even block."""
    odd_tilt: Array
    """Shape (L-1,), the same of the odd block."""
    stiffness: float
    """Information on ``w`` once the amplitudes are free: ``1 / stiffness`` times the noise's variance
    is the variance of ``w``."""
    converged: bool
    """Whether the last step was below the arithmetic's grain."""
    projections: Projections
    """What the fit was made from."""
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

    @property
    def phasors(self) -> Complex:
        """Shape (L,), ``X_i = a_i - j b_i`` about the middle of the record."""
        phasors: Complex = self.cosines - 1j * self.sines
        return phasors


@dataclass(frozen=True, slots=True, eq=False)
class _Solved:
    """The amplitudes at one frequency, and the Gauss-Newton step for the frequency."""

    normal: Normal
    cosines: Array
    sines: Array
    even_inverse: Array
    odd_inverse: Array
    even_tilt: Array
    odd_tilt: Array
    explained: float
    stiffness: float
    step: float


def solve(projections: Projections, w: float, orders: int | None = None) -> _Solved:
    """Solve for all amplitudes at the fundamental `w`, and for the next step of `w`.

    Parameters
    ----------
    projections
        The data.
    w
        Fundamental, radians per sample.
    orders
        Fit only the offset and this many orders; None takes all lines.
    """
    lines = projections.lines if orders is None else Lines(orders, np.empty(0))
    normal = normal_equations(projections.samples, lines, w)
    first, second = projections.totals(w, orders)
    even_data, odd_data = first.real, -first.imag[1:]
    even_inverse, odd_inverse = _inverse(normal.even), _inverse(normal.odd)
    cosines = even_inverse @ even_data
    sines = np.concatenate(([0.0], odd_inverse @ odd_data))
    k = lines.multiples()
    k_cos, k_sin = k * cosines, k * sines
    # derivative of the model: t (-k a sin + k b cos); its products with basis, itself and data
    even_g = -(normal.even_slope @ k_cos)
    odd_g = (normal.odd_slope @ k_sin)[1:]
    own = k_cos @ normal.sine_curve @ k_cos + k_sin @ normal.cosine_curve @ k_sin
    data_g = k_cos @ second.imag + k_sin @ second.real
    even_tilt, odd_tilt = -(even_inverse @ even_g), -(odd_inverse @ odd_g)
    stiffness = float(own + even_g @ even_tilt + odd_g @ odd_tilt)
    score = float(data_g - cosines @ even_g - sines[1:] @ odd_g)
    step = score / stiffness if stiffness > 0.0 else 0.0
    return _Solved(
        normal=normal,
        cosines=cosines,
        sines=sines,
        even_inverse=even_inverse,
        odd_inverse=odd_inverse,
        even_tilt=even_tilt,
        odd_tilt=odd_tilt,
        explained=float(cosines @ even_data + sines[1:] @ odd_data),
        stiffness=stiffness,
        step=step if math.isfinite(step) else 0.0,
    )


def _inverse(gram: Array) -> Array:
    """Invert a Gram matrix; where two lines cannot be told apart, share between them."""
    try:
        inverse: Array = np.linalg.inv(gram)
    except np.linalg.LinAlgError:
        inverse = np.linalg.pinv(gram, hermitian=True)
    return inverse


def refine(projections: Projections, w: float, orders: int | None = None) -> tuple[float, bool]:
    """Gauss-Newton for the frequency on given projections.

    A step is bounded by half a resolution cell, and halved until the residual no longer grows.

    Returns
    -------
    tuple
        The frequency, and whether it settled.
    """
    cell = math.pi / projections.samples
    solved = solve(projections, w, orders)
    for _ in range(_STEPS):
        step = max(-cell, min(cell, solved.step))
        if abs(step) <= 1e-9 * cell / max(orders or projections.lines.orders, 1):
            return w + step, True
        for _ in range(6):
            tried = solve(projections, w + step, orders)
            if tried.explained >= solved.explained * (1.0 - 1e-13):
                break
            step *= 0.5
        w, solved = w + step, tried
        if w <= 0.0:
            break
    return w, False


def fit(record: Record, lines: Lines, w: float, *, staged: bool = True) -> Fit:
    """Fit `lines` to a record, starting from the fundamental `w` (radians per sample).

    Parameters
    ----------
    record
        The samples.
    lines
        Orders and nuisance lines to fit.
    w
        Start, within about a quarter of ``2 pi / N`` of the truth.
    staged
        True to fit few orders first and take in more as the frequency gets better: the more orders
        the narrower the way to the minimum.
    """
    projections = project(record, lines, w)
    if staged:
        for orders in (*[stage for stage in _STAGES if stage < lines.orders], lines.orders):
            w, _ = refine(projections, w, orders)
    converged = False
    for _ in range(4):
        if projections.blur(w) > _BLUR:
            projections = project(record, lines, w)
        w, converged = refine(projections, w)
        if converged and projections.blur(w) <= _BLUR:
            break
    return _finished(projections, w, converged)


def _finished(projections: Projections, w: float, converged: bool) -> Fit:
    solved = solve(projections, w)
    grain = np.finfo(np.float64).eps * projections.power
    return Fit(
        samples=projections.samples,
        lines=projections.lines,
        w=w,
        cosines=solved.cosines,
        sines=solved.sines,
        residual_power=max(projections.power - solved.explained, grain),
        power=projections.power,
        even_inverse=solved.even_inverse,
        odd_inverse=solved.odd_inverse,
        even_tilt=solved.even_tilt,
        odd_tilt=solved.odd_tilt,
        stiffness=max(solved.stiffness, np.finfo(np.float64).tiny),
        converged=converged,
        projections=projections,
        normal=solved.normal,
    )
