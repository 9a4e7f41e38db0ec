"""One period against its ideal sine, the difference magnified until it shows, with a scale in percent."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from trimmer.screen.pictures.raster import Dots, Mask, told
from trimmer.screen.pictures.runs import Picture, Role, Row, Run, row

Curve = NDArray[np.float64]
"""Shape (n,), ratios to the fundamental, over one period that begins at the rising zero."""

_STEPS = (1, 2, 5, 10, 20, 50, 100, 200, 500, 1000)
_ROOM = 0.45
"""The magnified difference may take this much of the crest's height at most."""


def shape(parts: NDArray[np.float64], points: int) -> tuple[Curve, Curve]:
    """Give one period of the ideal sine and of the difference from it.

    Parameters
    ----------
    parts
        Shape (2(K-1),), ``c_2, s_2 .. c_K, s_K``, ratios.
    points
        Points over the period.

    Returns
    -------
    ideal, difference
        Shape (points,) each: ``cos theta`` and ``sum c_k cos k theta + s_k sin k theta``, with the
        upper crest a quarter of the way along and the lower one at three quarters.
    """
    theta = 2 * np.pi * (np.arange(points) / points - 0.25)
    order = np.arange(2, 2 + parts.size // 2)[:, None]
    difference = parts[0::2] @ np.cos(order * theta) + parts[1::2] @ np.sin(order * theta)
    return np.cos(theta), np.asarray(difference, dtype=np.float64)


def magnification(difference: Curve) -> int:
    """Choose the largest step that keeps the magnified difference inside its room."""
    peak = float(np.max(np.abs(difference), initial=0.0))
    fitting = [step for step in _STEPS if step * peak <= _ROOM]
    return fitting[-1] if fitting else 1


def drawn(curve: Curve, low: float, high: float, rows: int, dots: Dots) -> Mask:
    """Draw a curve with one value for each pixel column, joined up, clipped to `low`..`high`.

    Returns
    -------
    Mask
        Shape (rows * dots high, curve.size).
    """
    pixels = rows * dots.value[1]
    place = (high - curve) / (high - low) * (pixels - 1)
    at = np.clip(np.rint(place), 0, pixels - 1).astype(int)
    before = np.concatenate([at[:1], at[:-1]])
    half = (at + before) // 2
    top = np.minimum(at, np.where(at > before, half + 1, half))[None, :]
    bottom = np.maximum(at, np.where(at > before, half + 1, half))[None, :]
    line = np.arange(pixels)[:, None]
    return np.asarray((line >= np.minimum(top, at)) & (line <= np.maximum(bottom, at)))


def wave(
    parts: NDArray[np.float64] | None, width: int, rows: int, dots: Dots = Dots.BRAILLE
) -> Picture:
    """Draw the period, its difference from the ideal sine magnified, over the dotted ideal sine.

    Parameters
    ----------
    parts
        Shape (2(K-1),), ratios; None where nothing has been read yet.
    width, rows
        Size in cells, the caption's row included.
    dots
        How finely a cell is divided.

    Returns
    -------
    Picture
        A caption with the magnification and the size of 1 row in percent, then the curves.
    """
    if parts is None or rows < 3 or width < 12:
        return (row("shape", width, "quiet"), *(row("", width) for _ in range(rows - 1)))
    points = width * dots.value[0]
    ideal, difference = shape(parts, points)
    times = magnification(difference)
    high = 1.0 + _ROOM
    trace = drawn(ideal + times * difference, -high, high, rows - 1, dots)
    faint = drawn(ideal, -high, high, rows - 1, dots)
    faint[:, 1::2] = False
    per_row = 100.0 * 2 * high / (rows - 1) / times
    caption = f"shape, difference ×{times}, a row {per_row:.2g} %"
    return (row(caption, width, "quiet"), *_laid(trace, faint, dots))


def _laid(trace: Mask, faint: Mask, dots: Dots) -> Picture:
    """Lay the trace over the faint curve; a cell shows one of them, so that they differ in role."""
    above, below = told(trace, dots), told(faint, dots)
    rows: list[Row] = []
    for top, under in zip(above, below, strict=True):
        runs: list[Run] = []
        for ink, pale in zip(top, under, strict=True):
            role: Role = "trace" if ink != " " else "ideal"
            text = ink if ink != " " else _pale(pale, dots)
            if runs and runs[-1].role == role:
                runs[-1] = Run(runs[-1].text + text, role)
            else:
                runs.append(Run(text, role))
        rows.append(tuple(runs))
    return tuple(rows)


def _pale(cell: str, dots: Dots) -> str:
    """Give the ideal sine's cell; without braille a dot, so that the two differ by glyph."""
    return cell if dots is Dots.BRAILLE or cell == " " else "·"
