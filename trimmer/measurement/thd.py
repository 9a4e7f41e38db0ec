"""Total harmonic distortion with its interval."""

from __future__ import annotations

import math

import numpy as np

from trimmer.measurement.kernels import Array
from trimmer.measurement.reading import Interval


def thd_of(parts: Array, covariance: Array, noise_power: float) -> Interval:
    square = float(parts @ parts)
    value = math.sqrt(max(square - noise_power, 0.0))
    sigma = math.sqrt(max(float(parts @ covariance @ parts) / max(square, 1e-300), 0.0))
    return Interval(value, sigma, max(0.0, value - 1.96 * sigma), value + 1.96 * sigma)
