"""A clean source seen through the same input: what the measuring chain itself adds.

The chain's non-linearity and bandwidth add to the parts, to first order, whatever passes through
it. Where level and frequency match, the chain's parts are taken off; where they do not, they are
only held against the reading as an uncertainty.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any, Self

import numpy as np

from trimmer.measurement.combine import with_parts
from trimmer.measurement.kernels import Array
from trimmer.measurement.packing import pack_symmetric, unpack_symmetric
from trimmer.measurement.reading import Flag, Matrix, Reading, Vector

_LEVEL_OFF = 0.25
"""Level and offset may differ by this share of the amplitude for the parts to be taken off."""
_FREQUENCY_OFF = 2.0
"""Frequencies may differ by this factor for the skew parts to be taken off."""


@dataclass(frozen=True, slots=True, eq=False)
class Reference:
    """The parts that the measuring chain showed of a clean source."""

    fundamental_hz: float
    """Frequency of the clean source, Hz."""
    amplitude: float
    """Its peak, in the unit of the samples."""
    offset: float
    """Its mean, in the unit of the samples."""
    parts: Vector
    """Shape (2(K-1),), crest and skew parts, ratios. Read-only."""
    covariance: Matrix
    """Shape (2(K-1), 2(K-1)), of the random errors of `parts`. Read-only."""
    name: str = ""
    """What it was stored under."""

    def __post_init__(self) -> None:
        for field in ("parts", "covariance"):
            values = np.array(getattr(self, field), dtype=np.float64, copy=True)
            values.flags.writeable = False
            object.__setattr__(self, field, values)

    @property
    def thd(self) -> float:
        """THD of the chain with its clean source, ratio, noise not taken off."""
        return float(np.linalg.norm(self.parts))

    @classmethod
    def of(cls, reading: Reading, name: str = "") -> Self:
        """Make a reference of the reading of a clean source."""
        return cls(
            fundamental_hz=reading.fundamental_hz,
            amplitude=reading.amplitude,
            offset=reading.offset,
            parts=reading.parts,
            covariance=reading.random_covariance,
            name=name,
        )

    def document(self) -> dict[str, Any]:
        """Give it as a plain, lossless, JSON-able dictionary."""
        return {
            "name": self.name,
            "fundamental_hz": self.fundamental_hz,
            "amplitude": self.amplitude,
            "offset": self.offset,
            "parts": self.parts.tolist(),
            "covariance": pack_symmetric(self.covariance),
        }

    @classmethod
    def from_document(cls, document: dict[str, Any]) -> Self:
        """Take it back from `document`.

        Raises
        ------
        ValueError
            The document is no reference.
        """
        try:
            return cls(
                fundamental_hz=float(document["fundamental_hz"]),
                amplitude=float(document["amplitude"]),
                offset=float(document["offset"]),
                parts=np.array(document["parts"], dtype=np.float64),
                covariance=unpack_symmetric(document["covariance"]),
                name=str(document.get("name", "")),
            )
        except (KeyError, TypeError, ValueError) as error:
            raise ValueError(f"not a reference: {error}") from error

    def mismatch(self, reading: Reading) -> float:
        """Say how far level and offset are off those of the reference, over the amplitude."""
        off = abs(reading.amplitude - self.amplitude)
        if not reading.ac_coupled:
            off += abs(reading.offset - self.offset)
        return off / max(reading.amplitude, 1e-300)


def apply_reference(reading: Reading, reference: Reference) -> Reading:
    """Take a reference into account.

    Returns
    -------
    Reading
        With the chain's parts taken off where they match, else with them as an uncertainty; a
        flag where what was measured is hardly more than the chain itself.
    """
    size = reading.parts.size
    chain = np.zeros(size)
    known = min(size, reference.parts.size)
    chain[:known] = reference.parts[:known]
    own = np.zeros((size, size))
    own[:known, :known] = reference.covariance[:known, :known]
    mismatch = reference.mismatch(reading)
    ratio = reading.fundamental_hz / reference.fundamental_hz
    take = np.full(size, mismatch <= _LEVEL_OFF)
    if not 1.0 / _FREQUENCY_OFF <= ratio <= _FREQUENCY_OFF:
        take[1::2] = False
    systematic = own + np.diag(_doubt(chain, take, mismatch, ratio) ** 2)
    if reading.systematic.size:  # the reference has seen the non-linearity of what it took off
        seen = take & (np.arange(size) < known)
        systematic += np.diag(np.where(seen, 0.0, reading.systematic.diagonal()))
    told = with_parts(
        reading,
        reading.parts - np.where(take, chain, 0.0),
        reading.random_covariance + systematic,
        systematic,
    )
    flags = _flags(reading, told, reference, bool(take.all()))
    return replace(told, flags=(*told.flags, *flags))


def _doubt(chain: Array, take: Array, mismatch: float, ratio: float) -> Array:
    """Standard uncertainty of the chain's parts at another level or frequency.

    Parts taken off are trusted but for their change with the level (in proportion) and, the skew
    ones, with frequency; parts not taken off may be there in full.
    """
    trust = np.full(chain.size, mismatch)
    trust[1::2] += abs(math.log(ratio)) if ratio > 0.0 else 1.0
    doubt: Array = np.abs(chain) * np.where(take, trust, 1.0)
    return doubt


def _flags(before: Reading, after: Reading, reference: Reference, taken: bool) -> list[Flag]:
    flags = []
    if not taken:
        flags.append(
            Flag(
                "reference-unmatched",
                f"The reference was taken at {reference.amplitude:.3g} and "
                f"{reference.fundamental_hz:.6g} Hz, this reading at {before.amplitude:.3g} and "
                f"{before.fundamental_hz:.6g} Hz, so it was not taken off in full.",
                "Store a reference at this level and frequency.",
            )
        )
    if before.thd.value <= 2.0 * reference.thd:
        flags.append(
            Flag(
                "chain-floor",
                f"The {100 * before.thd.value:.3g} % seen are hardly more than the "
                f"{100 * reference.thd:.3g} % of the measuring chain itself; "
                f"{100 * after.thd.value:.3g} % remain.",
                "Use more of the digitiser's range or a better digitiser to see less distortion.",
            )
        )
    return flags
