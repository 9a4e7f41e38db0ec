"""Telling apart dialects whose preambles look alike, by one frame read twice.

The same ten numbers mean 0.184 V in one form and 50.584 V in another. A stopped frame, read once
as codes and once as text in volts, decides between the forms, and settles sign and byte order
too. Where an instrument sends no text, plausible reference values decide, and it is said.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.contract import SourceError
from drivers.visa.dialect import Dialect
from drivers.visa.formula import FormulaError
from drivers.visa.frame import Fields, Reading, convert, values_of, volts_of

_SPAN_SHARE = 0.02
_DIGITS_SHARE = 1e-3
"""Text may carry as few as three or four digits."""

_CLEARLY = 0.5
"""A later candidate must fit twice as well to take the place of an earlier one."""


@dataclass(frozen=True, slots=True)
class Settled:
    """A form that was settled."""

    dialect: Dialect
    """The dialect."""
    reading: Reading
    """Sign and byte order."""


def agree(rivals: Sequence[Dialect], fields: Fields, payload: bytes) -> bool:
    """Say whether all rivals read a frame alike, so that nothing needs to be settled."""
    read = []
    for rival in rivals:
        try:
            read.append(convert(rival, fields, payload, Reading()).volts)
        except SourceError:
            return False
    span = max(float(np.ptp(read[0])), 1e-30)
    return all(bool(np.abs(other - read[0]).max() <= 1e-9 * span) for other in read[1:])


def settle(
    rivals: Sequence[Dialect], fields: Fields, payload: bytes, text: Sequence[float]
) -> Settled | None:
    """Find the rival, sign and byte order that give the volts of the text.

    Parameters
    ----------
    rivals
        Candidates, the most plausible first.
    fields, payload
        A frame as codes.
    text
        The same frame in volts, or its last part where it was read in windows.

    Returns
    -------
    Settled or None
        None where nothing fits.
    """
    volts = np.asarray(text, dtype=np.float64)
    good = np.abs(volts) < 1e30
    if not good.any():
        return None
    allowed = _SPAN_SHARE * float(np.ptp(volts[good])) + _DIGITS_SHARE * float(
        np.abs(volts[good]).max()
    )
    best: Settled | None = None
    least = np.inf
    for rival in rivals:
        for reading, read in _readings(rival, fields, payload):
            if read.size < volts.size:
                continue
            # Nine tenths of the samples: marks for clipped samples are no volts.
            misfit = float(np.quantile(np.abs(read[-volts.size :] - volts)[good], 0.9))
            if misfit < (least if best is None else _CLEARLY * least):
                best, least = Settled(rival, reading), misfit
    return best if least <= max(allowed, 1e-12) else None


def _readings(
    rival: Dialect, fields: Fields, payload: bytes
) -> Iterator[tuple[Reading, NDArray[np.float64]]]:
    """Read a frame in every way, the dialect's own first."""
    ways = [Reading(signed, big) for signed in (None, False, True) for big in (None, False, True)]
    for way in ways:
        try:
            volts = volts_of(rival, fields, values_of(rival.codes, fields, payload, way))
        except (SourceError, FormulaError):
            continue
        if np.isfinite(volts).all():
            yield way, volts
