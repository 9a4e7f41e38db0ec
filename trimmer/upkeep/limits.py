"""Limits of a kind, and whether a reading is inside, outside, or too uncertain to tell."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import asdict, dataclass, fields
from typing import Any, Literal

from trimmer.measurement.reading import Reading
from trimmer.measurement.thd import NORMAL_95

Verdict = Literal["inside", "outside", "cannot-tell"]


@dataclass(frozen=True, slots=True)
class Limits:
    """What a unit has to keep to; None where there is no limit."""

    thd: float | None = None
    """Largest THD, ratio."""
    symmetry: float | None = None
    """Largest distance of the rise share from one half, share of the period."""
    offset_v: float | None = None
    """Largest distance of the mean from zero, volts."""
    flatness: float | None = None
    """Largest change of the amplitude over the frequency range, ratio to the amplitude near 1 kHz."""

    def __post_init__(self) -> None:
        for each in fields(self):
            value = getattr(self, each.name)
            if value is not None and not 0.0 < value < math.inf:
                raise ValueError(f"the limit of {each.name} must be a positive number")

    @property
    def any(self) -> bool:
        """Whether there is one at all."""
        return any(value is not None for value in asdict(self).values())

    def over(self, other: Limits) -> Limits:
        """Give these limits, and the other's where there is none of these."""
        mine = {name: value for name, value in asdict(self).items() if value is not None}
        return Limits(**{**asdict(other), **mine})

    def to_document(self) -> dict[str, float | None]:
        """Give a JSON-able document."""
        return asdict(self)

    @classmethod
    def from_document(cls, document: Mapping[str, Any]) -> Limits:
        """Read it back; what a newer program added is left out.

        Raises
        ------
        ValueError
            A limit is no positive number.
        """
        names = {each.name for each in fields(cls)}
        return cls(**{name: value for name, value in document.items() if name in names})


def judged(low: float, high: float, limit: float) -> Verdict:
    """Say where a 95 % interval lies to a limit: all below, all above, or across it."""
    if high <= limit:
        return "inside"
    return "outside" if low > limit else "cannot-tell"


def judged_size(value: float, sigma: float, limit: float) -> Verdict:
    """Say whether the size of a figure known to a standard uncertainty is within a limit."""
    half = NORMAL_95 * sigma
    return judged(abs(value) - half, abs(value) + half, limit)


def verdicts(reading: Reading, limits: Limits) -> dict[str, Verdict]:
    """Judge one reading by each limit that applies to a single one.

    A limit on the offset cannot be judged where the source blocks DC or has no volts.
    """
    found: dict[str, Verdict] = {}
    if limits.thd is not None:
        found["thd"] = judged(reading.thd.low, reading.thd.high, limits.thd)
    if limits.symmetry is not None:
        off = reading.rise_share - 0.5
        found["symmetry"] = judged_size(off, reading.rise_share_sigma, limits.symmetry)
    if limits.offset_v is not None:
        seen = reading.has_volts and not reading.ac_coupled
        found["offset"] = (
            judged_size(reading.offset, reading.offset_sigma, limits.offset_v)
            if seen
            else "cannot-tell"
        )
    return found


def overall(found: Iterable[Verdict]) -> Verdict:
    """Give one verdict for several: outside if any is; inside if all are, and there is one."""
    every = list(found)
    if "outside" in every:
        return "outside"
    return "inside" if every and "cannot-tell" not in every else "cannot-tell"
