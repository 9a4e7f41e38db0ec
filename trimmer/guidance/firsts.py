"""First things first: what a first reading shows that is not the trims' to mend.

Time symmetry comes before the crest trims; a slewing output adds a third-order crest part which the
trims could hide, wrongly: it is taken out of what they are aimed at.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from trimmer.guidance import words
from trimmer.guidance.field import Array
from trimmer.measurement.diagnose import Remainder, diagnose
from trimmer.measurement.reading import Reading
from trimmer.measurement.templates import SLOWEST, slewing

MOST: Final = 0.5
"""A cause that makes more than this share of THD is to be seen to first .."""
MATTERS: Final = 0.004
""".. if it makes this much THD itself."""
SLEWS: Final = 0.002
"""Slewing that makes more THD than this is kept out of the trims' aim."""


@dataclass(frozen=True, slots=True, eq=False)
class First:
    """What is to be said and heeded before the first turn."""

    greeting: str
    """One sentence, empty where there is nothing to say."""
    foreign: Array | None
    """Shape (m,), parts that the trims must not be used to hide."""


def look_first(reading: Reading) -> First:
    """Look at a first reading."""
    causes = {cause.cause: cause for cause in diagnose([reading])}
    slews = causes.get("slewing")
    if slews is not None and slews.thd > SLEWS:
        return First(words.SLEWING.format(thd=100.0 * slews.thd), _slewing_of(slews, reading))
    for name in ("clipping-in-unit", "supply"):
        if name in causes:
            return First(causes[name].remedy, None)
    lean = causes.get("time-symmetry")
    if lean is not None and lean.thd > max(MATTERS, MOST * reading.thd.value):
        return First(words.SYMMETRY_FIRST.format(thd=100.0 * lean.thd), None)
    return First("", None)


def _slewing_of(cause: Remainder, reading: Reading) -> Array:
    """Parts of a slewing output that makes so much THD."""
    ratios = np.linspace(SLOWEST, 0.999, 240)
    marks = np.array([slewing(float(r), reading.orders) for r in ratios])
    nearest = int(np.argmin(np.abs(np.linalg.norm(marks, axis=1) - cause.thd)))
    return np.asarray(marks[nearest], dtype=np.float64)
