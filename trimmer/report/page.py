"""What stands on a page, as values: words already chosen, figures not yet drawn."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Row = tuple[str, str]
"""A name and what is said of it."""


@dataclass(frozen=True, slots=True, eq=False)
class Wave:
    """One period of the final wave."""

    theta: Array
    """Shape (n,), phase from the positive crest, radians."""
    shape: Array
    """Shape (n,), fitted shape in units of the fundamental's peak."""
    samples_theta: Array
    """Shape (m,), phase of the samples."""
    samples: Array
    """Shape (m,), samples folded over one period; empty where none were kept."""

    @property
    def difference(self) -> Array:
        """Shape (n,), fitted shape less the sine."""
        return np.asarray(self.shape - np.cos(self.theta))


@dataclass(frozen=True, slots=True, eq=False)
class Parts:
    """Crest and skew parts by order."""

    orders: Array
    """Shape (K-1,), 2 to K."""
    crest: Array
    """Shape (K-1,), ratios."""
    crest_sigma: Array
    """Shape (K-1,), standard uncertainties."""
    skew: Array
    """Shape (K-1,), ratios."""
    skew_sigma: Array
    """Shape (K-1,), standard uncertainties."""


@dataclass(frozen=True, slots=True, eq=False)
class Course:
    """A figure over turns, frequencies or units."""

    x: Array
    """Shape (n,)."""
    value: Array
    """Shape (n,), ratios."""
    low: Array
    """Shape (n,), lower ends of the 95 % intervals."""
    high: Array
    """Shape (n,), upper ends."""
    labels: tuple[str, ...] = ()
    """A label for each, where x is only a place."""
    limit: float | None = None
    """A limit to draw."""


@dataclass(frozen=True, slots=True, eq=False)
class Section:
    """A heading and lines of text."""

    heading: str
    """The heading."""
    lines: tuple[str, ...]
    """Sentences."""


@dataclass(frozen=True, slots=True, eq=False)
class Page:
    """One page."""

    title: str
    """What it is about."""
    subtitle: str
    """One line under it."""
    result: str
    """The one figure that matters, with its uncertainty."""
    facts: tuple[Row, ...]
    """Unit, settings, notes."""
    figures: tuple[Row, ...]
    """Figures with their uncertainties."""
    sections: tuple[Section, ...]
    """Text."""
    cautions: str
    """Cautions, and to whom they defer."""
    wave: Wave | None = None
    """Wave and difference."""
    parts: Parts | None = None
    """Parts by order."""
    turns: Course | None = None
    """THD by turn."""
    survey: Course | None = None
    """THD over frequency."""
    units: Course | None = None
    """THD over the units of a kind."""
    needed: tuple[int, ...] = ()
    """Turns needed, a number for each unit of a kind."""
    drift: Course | None = field(default=None)
    """THD over the minutes of a warm-up."""
