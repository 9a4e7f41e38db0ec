"""First things first: what a first reading shows that is not the trims' to mend.

Time symmetry comes before the crest trims; a slewing output adds a third-order crest part which the
trims could hide, wrongly: it is taken out of what they are aimed at.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from trimmer.guidance import words
from trimmer.guidance.field import Array
from trimmer.measurement.diagnose import diagnose
from trimmer.measurement.reading import Reading
from trimmer.measurement.templates import SLOWEST, bandwidth, slewing

MOST: Final = 0.5
"""A cause that makes more than this share of THD is to be seen to first .."""
MATTERS: Final = 0.004
""".. if it makes this much THD itself."""
SLEWS: Final = 0.003
"""Slewing that leans the wave by more than this is kept out of the trims' aim."""
LEANS: Final = 0.1
"""A slewing output leans by at least this share of what it adds to the crests. Near its limit it makes a
triangle, which leans by nothing: a crest part that no skew part vouches for is not believed in."""
FORM: Final = 0.05
"""The closed forms of slewing and bandwidth are trusted to this share of the largest part."""
MARKED: Final = 10.0
"""Slewing must explain the odd skew parts better than bandwidth alone by this sum of squares .."""
FACTOR: Final = 4.0
""".. and by this factor."""


@dataclass(frozen=True, slots=True, eq=False)
class First:
    """What is to be said and heeded before the first turn."""

    greeting: str
    """One sentence, empty where there is nothing to say."""
    foreign: Array | None
    """Shape (m,), parts that the trims must not be used to hide."""


def look_first(reading: Reading) -> First:
    """Look at a first reading."""
    slewed = slewing_in(reading)
    if slewed is not None:
        share = 100.0 * float(np.linalg.norm(slewed))
        return First(words.SLEWING.format(thd=share), slewed)
    causes = {cause.cause: cause for cause in diagnose([reading])}
    for name in ("clipping-in-unit", "supply"):
        if name in causes:
            return First(causes[name].remedy, None)
    lean = causes.get("time-symmetry")
    if lean is not None and lean.thd > max(MATTERS, MOST * reading.thd.value):
        return First(words.SYMMETRY_FIRST.format(thd=100.0 * lean.thd), None)
    return First("", None)


def slewing_in(reading: Reading) -> Array | None:
    """Give the parts that a slewing output adds, None where it does not slew.

    Slewing and bandwidth come together at high frequencies. Both lean the wave, and the trims do not:
    so the odd skew parts alone, in which the two differ in shape, tell how much there is of each; the
    crest part of slewing follows from its skew part.

    Returns
    -------
    Array or None
        Shape (2(K-1),).
    """
    marks, slow, rows = _forms(reading.orders)
    seen = reading.parts[rows]
    trust = (FORM * float(np.max(np.abs(seen)))) ** 2
    weight = 1.0 / (np.diag(reading.random_covariance)[rows] + trust)
    left = seen - marks[:, rows]
    size = np.maximum(left @ (weight * slow[rows]) / float(slow[rows] ** 2 @ weight), 0.0)
    misfit = (left - size[:, None] * slow[rows]) ** 2 @ weight
    best = int(np.argmin(misfit))
    plain = float(misfit[-1])  # the last form is no slewing at all
    clear = plain - misfit[best] > MARKED and plain > FACTOR * misfit[best]
    if not clear or float(np.linalg.norm(marks[best, rows])) < SLEWS:
        return None
    return np.asarray(marks[best], dtype=np.float64)


@cache
def _forms(orders: int) -> tuple[Array, Array, NDArray[np.intp]]:
    """Parts of slewing outputs, the last of none, shape (n, m); of bandwidth; odd skew rows."""
    ratios = np.append(np.linspace(SLOWEST, 0.995, 120), 1.0)
    marks = np.array([slewing(float(ratio), orders) for ratio in ratios])
    leaning = np.linalg.norm(marks[:, 1::2], axis=1) >= LEANS * np.linalg.norm(
        marks[:, 0::2], axis=1
    )
    marks = marks[leaning]
    k = np.repeat(np.arange(2, orders + 1), 2)
    rows = np.flatnonzero((k % 2 == 1) & (np.arange(k.size) % 2 == 1))
    return marks, bandwidth(orders), rows
