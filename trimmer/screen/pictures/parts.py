"""Crest and skew parts by order, split into what the trims reach and what they do not."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trimmer.screen.pictures.runs import (
    Picture,
    Role,
    Row,
    Run,
    blank,
    joined,
    longest,
    row,
)

_SCALES = (0.0005, 0.001, 0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0)


@dataclass(frozen=True, slots=True, eq=False)
class Split:
    """The parts of a reading, and how much of each the trims reach."""

    parts: NDArray[np.float64]
    """Shape (2(K-1),), ``c_2, s_2 .. c_K, s_K``, ratios."""
    sigma: NDArray[np.float64]
    """Shape (2(K-1),), their standard uncertainties."""
    reached: NDArray[np.float64] | None
    """Shape (2(K-1),), the share of each that lies in the span of the trims' columns; None until known."""

    @property
    def within(self) -> float | None:
        """Length of what the trims reach, ratio."""
        return None if self.reached is None else float(np.linalg.norm(self.reached))

    @property
    def beyond(self) -> float | None:
        """Length of what they do not reach, ratio."""
        return None if self.reached is None else float(np.linalg.norm(self.parts - self.reached))


def split(
    parts: NDArray[np.float64],
    covariance: NDArray[np.float64],
    reach: NDArray[np.float64] | None,
) -> Split:
    """Split parts by an orthonormal basis of what the trims reach.

    Parameters
    ----------
    parts
        Shape (2(K-1),), ratios.
    covariance
        Shape (2(K-1), 2(K-1)).
    reach
        Shape (m, n), orthonormal rows in the order of `parts`; where n is not 2(K-1) (another K),
        the common orders count. None where it is not known.
    """
    sigma = np.sqrt(np.maximum(covariance.diagonal(), 0.0))
    if reach is None or reach.size == 0:
        return Split(parts, sigma, None)
    common = min(parts.size, reach.shape[1])
    rows = reach[:, :common]
    reached = np.zeros_like(parts)
    reached[:common] = rows.T @ np.linalg.lstsq(rows.T, parts[:common], rcond=None)[0]
    return Split(parts, sigma, reached)


def scale_of(value: Split) -> float:
    """Choose the ratio at the end of a bar: the smallest step that holds the largest part."""
    peak = float(np.max(np.abs(value.parts), initial=0.0))
    return next((scale for scale in _SCALES if scale >= peak), 1.0)


def parts_table(value: Split | None, width: int, rows: int) -> Picture:
    """Draw the parts: an order to a row, the crest part's bar to the left, the skew part's to the right.

    Parameters
    ----------
    value
        The split; None where nothing has been read.
    width, rows
        Size in cells, the caption and the totals included.

    Returns
    -------
    Picture
        ``█`` the trims reach, ``▒`` they do not, ``■`` not known which, ``·`` lost in its own
        uncertainty. Where there is room, with figures.
    """
    if value is None or rows < 3 or width < 18:
        return (row("parts by order", width, "quiet"), *blank(width, rows - 1))
    scale = scale_of(value)
    orders = min(rows - 2, value.parts.size // 2)
    half = (width - 3) // 2
    body = [_order_row(value, k, half, width, scale) for k in range(orders)]
    return (
        row(_head(half, width, scale), width, "quiet"),
        *body,
        *blank(width, rows - 2 - orders),
        row(_totals(value, width), width, "plain"),
    )


def _head(half: int, width: int, scale: float) -> str:
    """Name the two columns from their middle lines on, and say what a bar to the end means."""
    figures = FIGURES if half - 1 >= FIGURES + 11 else 0
    middle = (half - 1 - figures - 1) // 2
    text = list(" " * width)
    for begin, name in ((3, "crest"), (3 + half, "skew")):
        at = begin + middle
        text[at : at + len(name)] = name
    unit = f"±{100 * scale:g}%"
    text[: len(unit)] = unit
    return "".join(text)


def _totals(value: Split, width: int) -> str:
    if value.within is None or value.beyond is None:
        return longest(width, "what the trims reach shows after two turns", "reach not known yet")
    within, beyond = 100 * value.within, 100 * value.beyond
    return longest(
        width,
        f"█ the trims reach {within:.3f} %   ▒ they do not reach {beyond:.3f} %",
        f"█ trims reach {within:.2f}   ▒ not {beyond:.2f} %",
        f"█ reach {within:.2f} ▒ not {beyond:.2f}",
    )


FIGURES = 14
"""Cells a figure with its uncertainty takes."""


def _order_row(value: Split, k: int, half: int, width: int, scale: float) -> Row:
    """Draw the row of order ``k + 2``."""
    figures = half - 1 >= FIGURES + 11
    room = half - 1 - (FIGURES if figures else 0)
    cells: list[Run] = [Run(f"{k + 2:>2} ", "quiet")]
    for index in (2 * k, 2 * k + 1):
        part, sigma = float(value.parts[index]), float(value.sigma[index])
        reached = None if value.reached is None else float(value.reached[index])
        cells += signed(part, sigma, reached, room, scale)
        if figures:
            cells.append(Run(f" {100 * part:+7.3f}±{100 * sigma:.3f}"[:FIGURES], "quiet"))
        cells.append(Run(" "))
    return (*cells, Run(" " * (width - sum(len(run.text) for run in cells))))


def signed(part: float, sigma: float, reached: float | None, width: int, scale: float) -> Row:
    """Draw a signed bar about a middle line: what is not reached nearest to it.

    Parameters
    ----------
    part, sigma, reached
        The part, its standard uncertainty and what the trims reach of it, ratios.
    width
        Cells; the middle line takes one.
    scale
        Ratio at either end.
    """
    side = (width - 1) // 2
    cells: list[tuple[str, Role]] = [(" ", "quiet")] * width
    cells[side] = ("│", "quiet")
    if abs(part) < 2 * sigma:
        cells[side] = ("·", "quiet")
        return joined(cells)
    per_half = scale / (2 * side)
    if reached is None:
        stretches = [(0.0, part / per_half, "unknown")]
    else:
        least = max(2 * sigma, per_half / 2)
        rest = (part - reached) / per_half if abs(part - reached) > least else 0.0
        reached = part if rest == 0.0 else reached if abs(reached) > least else 0.0
        begin = rest if rest * reached > 0 else 0.0
        stretches = [(0.0, rest, "beyond"), (begin, begin + reached / per_half, "reached")]
    for at in (*range(-side, 0), *range(1, side + 1)):
        inner = 2 * abs(at) - 1.5
        found = [_kind(math.copysign(place, at), stretches) for place in (inner, inner + 1.0)]
        cells[side + at] = _cell(found[0], found[1], at > 0)
    return joined(cells)


def _kind(place: float, stretches: list[tuple[float, float, str]]) -> str:
    """Say what covers a place; a stretch that would vanish keeps half a cell."""
    for begin, end, kind in stretches:
        low, high = min(begin, end), max(begin, end)
        if 0.0 < high - low < 0.5 and low <= 0.0 <= high:
            low, high = (low, 0.6) if end > begin else (-0.6, high)
        if low < place <= high:
            return kind
    return ""


_INKS: dict[str, tuple[str, str, str, Role]] = {
    "reached": ("█", "▌", "▐", "go"),
    "beyond": ("▒", "▒", "▒", "care"),
    "unknown": ("■", "■", "■", "plain"),
    "": (" ", " ", " ", "quiet"),
}
"""Glyph of a whole cell, of its half at the middle line's side to the right and to the left, role."""


def _cell(inner: str, outer: str, right: bool) -> tuple[str, Role]:
    """Give the cell whose halves are covered so; what lies nearer to the middle line counts."""
    whole, half_right, half_left, role = _INKS[inner]
    if outer == inner or (inner and outer):
        return whole, role
    return (half_right if right else half_left), role
