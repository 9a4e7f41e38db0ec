"""The crest frame: harmonics relative to the fundamental, seen from its positive crest.

``Z_k = X_k exp(-j k arg X_1) / |X_1| = c_k - j s_k``. With ``rho`` and ``phi`` the relative error
of length and the error of phase of ``X_1``, and ``u_k`` the error of ``X_k`` in the crest frame,
``dZ_k = u_k - Z_k drho - j k Z_k dphi`` to first order: all parts share the error of ``X_1``.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from trimmer.measurement.fit import Fit
from trimmer.measurement.kernels import Array


@dataclass(frozen=True, slots=True, eq=False)
class CrestFrame:
    """Harmonics of a fit in the crest frame, with what the fit's noise makes of them."""

    amplitude: float
    """``|X_1|`` in the scaled unit."""
    phase: float
    """``arg X_1`` about the middle of the record, radians."""
    parts: Array
    """Shape (2(K-1),), ``c_2, s_2, .., c_K, s_K``."""
    covariance: Array
    """Shape (2(K-1), 2(K-1)), from the noise of the fit alone."""
    noise_power: float
    """What the noise adds to the square of THD on average: the traces of ``X_2 .. X_K`` over
    ``|X_1|^2``. The phase error of ``X_1`` turns ``Z_k`` but does not lengthen it."""
    amplitude_variance: float
    """Variance of ``|X_1|``, scaled unit squared."""


def line_covariance(fit: Fit, orders: int, colour: Array) -> Array:
    """Covariance of ``a_1 .. a_K, b_1 .. b_K``, shape (2K, 2K), scaled unit squared.

    `colour`, shape (K,), is the noise around each order over white noise.
    """
    own = slice(1, orders + 1)
    tilt = fit.tilt[:, own].ravel()
    covariance = np.multiply.outer(tilt, tilt) / fit.stiffness
    covariance[:orders, :orders] += fit.inverse[0, own, own]
    covariance[orders:, orders:] += fit.inverse[1, own, own]
    factor = np.sqrt(fit.variance * np.concatenate((colour, colour)))
    return covariance * np.multiply.outer(factor, factor)


def crest_frame(fit: Fit, orders: int, colour: Array) -> CrestFrame:
    """Turn a fit's first `orders` orders into the crest frame (`colour` as in `line_covariance`)."""
    phasors = fit.phasors[1 : orders + 1]
    amplitude, phase = abs(complex(phasors[0])), math.atan2(phasors[0].imag, phasors[0].real)
    k = np.arange(1, orders + 1)
    turned = phasors * np.exp(-1j * k * phase) / amplitude
    crest, skew = turned.real, -turned.imag
    lines = line_covariance(fit, orders, colour)
    jacobian = _jacobian(crest, skew, phase) / amplitude
    covariance = jacobian @ lines @ jacobian.T
    parts = np.empty(2 * (orders - 1))
    parts[0::2], parts[1::2] = crest[1:], skew[1:]
    spread = np.diag(lines)
    along = np.zeros(2 * orders)
    along[0], along[orders] = math.cos(phase), -math.sin(phase)
    return CrestFrame(
        amplitude=amplitude,
        phase=phase,
        parts=parts,
        covariance=0.5 * (covariance + covariance.T),
        noise_power=float(spread[1:orders].sum() + spread[orders + 1 :].sum()) / amplitude**2,
        amplitude_variance=float(along @ lines @ along),
    )


def _jacobian(crest: Array, skew: Array, phase: float) -> Array:
    """Shape (2(K-1), 2K): change of the parts with ``a_1 .. b_K``, times the amplitude."""
    orders = crest.size
    k = np.arange(2, orders + 1)
    row = 2 * np.arange(orders - 1)
    cosine, sine = np.cos(k * phase), np.sin(k * phase)
    c, s = crest[1:], skew[1:]
    jacobian = np.zeros((2 * (orders - 1), 2 * orders))
    jacobian[row, k - 1], jacobian[row, orders + k - 1] = cosine, -sine
    jacobian[row + 1, k - 1], jacobian[row + 1, orders + k - 1] = sine, cosine
    cos_1, sin_1 = math.cos(phase), math.sin(phase)
    for column, length, turn in ((0, cos_1, -sin_1), (orders, -sin_1, -cos_1)):
        jacobian[row, column] += -c * length - k * s * turn
        jacobian[row + 1, column] += -s * length + k * c * turn
    return jacobian
