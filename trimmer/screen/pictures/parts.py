"""Crest and skew parts by order, split into what the trims reach and what they do not."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trimmer.screen.pictures.runs import Picture, Role, Row, Run, fitted, row

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
        ``█`` the trims reach, ``▒`` they do not, ``▪`` not known which, ``·`` lost in its own
        uncertainty. From 44 cells on with figures.
    """
    if value is None or rows < 3 or width < 18:
        return (row("parts by order", width, "quiet"), *(row("", width) for _ in range(rows - 1)))
    scale = scale_of(value)
    orders = min(rows - 2, value.parts.size // 2)
    figures = width >= 52
    half = (width - 4) // 2
    head = fitted(f"    crest ±{100 * scale:g} %", half + 3) + " skew"
    body = [_order_row(value, k, half, scale, figures) for k in range(orders)]
    filler = [row("", width)] * (rows - 2 - orders)
    fit = [(*runs, Run(" " * (width - sum(len(r.text) for r in runs)))) for runs in body]
    return (row(head, width, "quiet"), *fit, *filler, row(_totals(value, width), width, "plain"))


def _totals(value: Split, width: int) -> str:
    if value.within is None or value.beyond is None:
        return fitted(
            "█ reach not known yet" if width < 40 else "what the trims reach shows later", width
        )
    text = f"█ trims {100 * value.within:.2f}  ▒ rest {100 * value.beyond:.2f} %"
    longer = (
        f"█ the trims reach {100 * value.within:.3f} %   ▒ they do not {100 * value.beyond:.3f} %"
    )
    return longer if len(longer) <= width else text


def _order_row(value: Split, k: int, half: int, scale: float, figures: bool) -> Row:
    """Draw the row of order ``k + 2``."""
    cells = [Run(f"{k + 2:>2} ", "quiet")]
    for part in (0, 1):
        index = 2 * k + part
        reached = None if value.reached is None else float(value.reached[index])
        room = half - 14 if figures else half - 1
        cells += signed(float(value.parts[index]), float(value.sigma[index]), reached, room, scale)
        if figures:
            sigma = 100 * value.sigma[index]
            cells.append(Run(f"{100 * value.parts[index]:+7.3f}±{sigma:<5.3f}", "quiet"))
        cells.append(Run(" "))
    return tuple(cells)


def signed(part: float, sigma: float, reached: float | None, width: int, scale: float) -> list[Run]:
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
    cells: list[tuple[str, Role]] = [(" ", "quiet")] * (2 * side + 1)
    cells[side] = ("│", "quiet")
    if abs(part) < 2 * sigma:
        cells[side] = ("·", "quiet")
    elif reached is None:
        _fill(cells, side, 0.0, part, scale, "▪", "plain")
    else:
        rest = part - reached
        begin = rest if rest * reached > 0 else 0.0
        _fill(cells, side, begin, begin + reached, scale, "█", "go")
        _fill(cells, side, 0.0, rest, scale, "▒", "care")
    padded = [*cells, *[(" ", "quiet")] * (width - len(cells))]
    return _joined(padded)  # type: ignore[arg-type]


def _fill(
    cells: list[tuple[str, Role]],
    middle: int,
    begin: float,
    end: float,
    scale: float,
    glyph: str,
    role: Role,
) -> None:
    """Fill the cells between two values, at least one for a value that would show as half of one."""
    per_cell = scale / middle if middle else math.inf
    a, b = (round(value / per_cell) for value in (begin, end))
    if a == b and abs(end - begin) > per_cell / 2:
        b = a + (1 if end > begin else -1)
    for at in range(min(a, b), max(a, b) + 1):
        if at != 0 and abs(at) <= middle and (at != a or a == 0):
            cells[middle + at] = (glyph, role)


def _joined(cells: list[tuple[str, Role]]) -> list[Run]:
    runs: list[Run] = []
    for text, role in cells:
        if runs and runs[-1].role == role:
            runs[-1] = Run(runs[-1].text + text, role)
        else:
            runs.append(Run(text, role))
    return runs
