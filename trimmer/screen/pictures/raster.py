"""Pixel pictures for a terminal: shapes drawn into a mask, the mask told in block or braille characters.

Lengths are in widths of a character cell, x to the right and y down; a cell is taken to be twice
as high as it is wide, which is true of most terminal fonts to 15 %.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from enum import Enum

import numpy as np
from numpy.typing import NDArray

Mask = NDArray[np.bool_]
"""Shape (height, width) in pixels; True is ink."""
Point = tuple[float, float]

_QUADRANTS = " ▘▝▀▖▌▞▛▗▚▐▜▄▙▟█"
_BRAILLE = np.array([[0x01, 0x08], [0x02, 0x10], [0x04, 0x20], [0x40, 0x80]])


class Dots(Enum):
    """How finely a cell is divided."""

    BLOCK = (2, 2)
    """Two by two, in block characters: bold, in every font."""
    BRAILLE = (2, 4)
    """Two by four, in braille characters: fine, thin, missing in some fonts."""


def told(mask: Mask, dots: Dots = Dots.BLOCK) -> list[str]:
    """Tell a mask in characters.

    Parameters
    ----------
    mask
        Shape (rows * dots high, columns * dots wide).
    dots
        How finely a cell is divided.

    Returns
    -------
    list of str
        One string for each row of cells.
    """
    wide, high = dots.value
    rows, columns = mask.shape[0] // high, mask.shape[1] // wide
    cells = mask.reshape(rows, high, columns, wide).transpose(0, 2, 1, 3)
    if dots is Dots.BLOCK:
        codes = cells.reshape(rows, columns, 4) @ np.array([1, 2, 4, 8])
        return ["".join(_QUADRANTS[code] for code in row) for row in codes]
    codes = (cells * _BRAILLE).sum(axis=(2, 3))
    return ["".join(chr(0x2800 + code) if code else " " for code in row) for row in codes]


@dataclass(frozen=True, slots=True, eq=False)
class Canvas:
    """Where a picture is drawn: the centres of its pixels, several samples to each."""

    columns: int
    """Width in cells."""
    rows: int
    """Height in cells."""
    dots: Dots = Dots.BLOCK
    """How finely a cell is divided."""
    fine: int = 3
    """Samples to a pixel in each direction; half of them inked makes the pixel ink."""

    @property
    def middle(self) -> Point:
        """The middle of the canvas."""
        return self.columns / 2, float(self.rows)

    def grid(self) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Give x and y of every sample, broadcastable to the whole canvas."""
        wide, high = self.dots.value
        across, down = self.columns * wide * self.fine, self.rows * high * self.fine
        x = (np.arange(across, dtype=np.float64) + 0.5) * (self.columns / across)
        y = (np.arange(down, dtype=np.float64) + 0.5) * (2.0 * self.rows / down)
        return x[None, :], y[:, None]

    def ink(self, samples: Mask) -> Mask:
        """Turn inked samples into inked pixels by majority."""
        samples = np.broadcast_to(samples, (self.grid()[1].shape[0], self.grid()[0].shape[1]))
        high, wide = samples.shape[0] // self.fine, samples.shape[1] // self.fine
        share = samples.reshape(high, self.fine, wide, self.fine).mean(axis=(1, 3))
        return np.asarray(share > 0.5)

    def told(self, samples: Mask) -> list[str]:
        """Tell inked samples in characters."""
        return told(self.ink(samples), self.dots)

    def disc(self, centre: Point, radius: float) -> Mask:
        """A filled circle."""
        x, y = self.grid()
        return np.asarray(np.hypot(x - centre[0], y - centre[1]) <= radius)

    def arc(self, centre: Point, inner: float, outer: float, begin: float, end: float) -> Mask:
        """A thick arc from `begin` to `end`, radians clockwise from twelve o'clock, begin < end."""
        x, y = self.grid()
        radius = np.hypot(x - centre[0], y - centre[1])
        angle = np.arctan2(x - centre[0], centre[1] - y)
        inside = (angle - begin) % (2 * np.pi) <= end - begin
        return np.asarray((radius >= inner) & (radius <= outer) & inside)

    def polygon(self, corners: Sequence[Point]) -> Mask:
        """A filled convex polygon."""
        x, y = self.grid()
        sides = []
        for (x0, y0), (x1, y1) in zip(corners, [*corners[1:], corners[0]], strict=True):
            sides.append((x1 - x0) * (y - y0) - (y1 - y0) * (x - x0) >= 0)
        return np.asarray(np.logical_and.reduce(sides) | np.logical_and.reduce([~s for s in sides]))

    def stroke(self, begin: Point, end: Point, width: float) -> Mask:
        """A straight bar with square ends."""
        x, y = self.grid()
        along_x, along_y = end[0] - begin[0], end[1] - begin[1]
        length = float(np.hypot(along_x, along_y)) or 1.0
        along = ((x - begin[0]) * along_x + (y - begin[1]) * along_y) / length
        across = ((x - begin[0]) * along_y - (y - begin[1]) * along_x) / length
        return np.asarray((along >= 0) & (along <= length) & (np.abs(across) <= width / 2))
