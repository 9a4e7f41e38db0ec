"""The values that a measurement takes and gives: what is known of the digitiser, flags, the reading."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

Vector = NDArray[np.float64]
"""Shape (n,) float64."""
Matrix = NDArray[np.float64]
"""Shape (n, n) float64."""


class MeasurementError(Exception):
    """The record cannot answer.

    Parameters
    ----------
    code
        Short name of the refusal: ``no-signal``, ``too-few-cycles``, ``too-few-orders``,
        ``too-many-orders``, ``clipped``, ``not-a-number``, ``uneven-time``.
    message
        What was seen, with the numbers.
    remedy
        One imperative sentence: what to change at the bench.
    """

    def __init__(self, code: str, message: str, remedy: str) -> None:
        super().__init__(message)
        self.code = code
        self.remedy = remedy


@dataclass(frozen=True, slots=True)
class Flag:
    """Something a reading wants said of itself, without being refused."""

    code: str
    """``few-codes``, ``flat-without-noise``, ``hum``, ``wandering``, ``drifting``, ``stale``,
    ``chain-floor``, ``reference-unmatched``, ``ac-coupled``, ``orders-cut`` or ``not-settled``."""
    message: str
    """What was seen, with the numbers."""
    remedy: str
    """One imperative sentence."""


@dataclass(frozen=True, slots=True)
class Digitiser:
    """What is known of the digitiser behind a capture; None where it is not known."""

    bits: int | None = None
    """Bits of a code."""
    code: float | None = None
    """Size of one code, in the unit of the samples."""
    low_rail: float | None = None
    """Value of the lowest code."""
    high_rail: float | None = None
    """Value of the highest code."""
    clipped: int = 0
    """Samples the source itself marked as out of range."""
    nonlinearity_codes: float | None = None
    """Peak integral non-linearity in codes; None takes a cautious default for the number of bits."""
    ac_coupled: bool = False
    """True where the input blocks DC."""
    has_volts: bool = True
    """False where samples are fractions of full scale."""
    averaged: int = 1
    """Frames the source averaged into this one."""


@dataclass(frozen=True, slots=True)
class Interval:
    """A figure, its standard uncertainty, and its 95 % interval."""

    value: float
    """The figure."""
    sigma: float
    """Standard uncertainty, same unit."""
    low: float
    """Lower end of the 95 % interval."""
    high: float
    """Upper end of the 95 % interval."""


@dataclass(frozen=True, slots=True)
class Crests:
    """How pointed the crests are (ratios to the fundamental; + too pointed, - too flat)."""

    upper: float
    """Pointedness of the upper crest."""
    lower: float
    """Pointedness of the lower crest."""
    asymmetry: float
    """upper - lower."""
    upper_sigma: float
    """Standard uncertainty of `upper`."""
    lower_sigma: float
    """Standard uncertainty of `lower`."""
    asymmetry_sigma: float
    """Standard uncertainty of `asymmetry`."""


@dataclass(frozen=True, slots=True, eq=False)
class Reading:
    """One reading: the harmonics of a capture (or of several combined) in the crest frame.

    `parts` is ``[c_2, s_2, c_3, s_3, .., c_K, s_K]``, ratios to the fundamental. The total distortion
    is its length, less the noise it contains.
    """

    fundamental_hz: float
    """Fundamental frequency, Hz."""
    fundamental_sigma_hz: float
    """Its standard uncertainty, Hz."""
    amplitude: float
    """Peak of the fundamental, in the unit of the samples."""
    amplitude_sigma: float
    """Its standard uncertainty."""
    offset: float
    """Mean value, in the unit of the samples."""
    offset_sigma: float
    """Its standard uncertainty."""
    orders: int
    """K, the highest order reported."""
    parts: Vector
    """Shape (2(K-1),), crest and skew parts by turns, ratios. Read-only."""
    covariance: Matrix
    """Shape (2(K-1), 2(K-1)), covariance of `parts`, all causes together. Read-only."""
    noise: float
    """Standard deviation of the noise of one sample, in the unit of the samples."""
    thd: Interval
    """Total harmonic distortion relative to the fundamental, noise-corrected, with its interval."""
    thd_plus_noise: float
    """Residual of the one-tone fit over the fundamental (IEEE Std 1057)."""
    crests: Crests
    """Pointedness of the crests."""
    rise_share: float
    """Time from lower to upper crest over the period; 0.5 is symmetric."""
    rise_share_sigma: float
    """Its standard uncertainty."""
    flags: tuple[Flag, ...]
    """What the reading wants said of itself."""
    samples: int
    """Samples used, over all frames."""
    interval_s: float
    """Seconds between samples."""
    cycles: float
    """Periods seen, over all frames."""
    bits: int | None = None
    """Bits of the digitiser, where known."""
    has_volts: bool = True
    """Whether `amplitude` and `offset` are volts."""
    ac_coupled: bool = False
    """Whether the source blocks DC, so that `offset` says nothing of the unit."""
    frames: int = 1
    """Captures combined."""
    phase: float = 0.0
    """Phase of the fundamental at the first sample, radians: samples ~ amplitude cos(phase + w t)."""
    extra: dict[str, float] = field(default_factory=dict)
    """Named further figures (lines of hum, drift of frequency, ...)."""
    systematic: Matrix = field(default_factory=lambda: np.zeros((0, 0)))
    """Shape of `covariance`, the share of it that is the same in every reading taken through this
    input and so is not lowered by averaging; empty where there is none. Read-only."""
    noise_power: float = 0.0
    """What noise adds to the square of THD on average; taken off in `thd`."""
    freedom: float = math.inf
    """Degrees of freedom behind the noise's own estimate."""

    def __post_init__(self) -> None:
        for name in ("parts", "covariance", "systematic"):
            values = np.array(getattr(self, name), dtype=np.float64, copy=True)
            values.flags.writeable = False
            object.__setattr__(self, name, values)

    @property
    def crest_parts(self) -> Vector:
        """Shape (K-1,), ``c_2 .. c_K``."""
        return self.parts[0::2]

    @property
    def random_covariance(self) -> Matrix:
        """Covariance of what changes from reading to reading: `covariance` less `systematic`.

        This is the one to weigh differences of readings with.
        """
        return self.covariance - self.systematic if self.systematic.size else self.covariance

    @property
    def random_thd_sigma(self) -> float:
        """Share of `thd.sigma` that more frames lower, ratio."""
        if not self.systematic.size:
            return self.thd.sigma
        whole = float(self.parts @ self.covariance @ self.parts)
        random = float(self.parts @ self.random_covariance @ self.parts)
        return self.thd.sigma * math.sqrt(max(random, 0.0) / whole) if whole > 0.0 else 0.0

    @property
    def skew_parts(self) -> Vector:
        """Shape (K-1,), ``s_2 .. s_K``."""
        return self.parts[1::2]
