"""One period folded over its ideal sine, the difference magnified, with its scale in percent."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trimmer.measurement.figures import shape_at
from trimmer.screen.pictures.raster import Dots, Mask, told
from trimmer.screen.pictures.runs import Picture, Role, Run, blank, joined, longest, row

Curve = NDArray[np.float64]
"""Shape (n,), ratios to the fundamental, over one period that begins at the rising zero."""

_STEPS = (1, 2, 5, 10, 20, 50, 100, 200, 500, 1000)
_ROOM = 0.55
"""The magnified difference may take this much of the crest's height at most."""
_SCALES = (0.02, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0, 20.0, 50.0, 100.0)
_APART = 10
"""From this many rows on the difference has a strip of its own."""
_LABEL = 8
"""Cells to the left of it for its scale."""


@dataclass(frozen=True, slots=True, eq=False)
class Trace:
    """What a period can be drawn from: the samples, or the fitted parts where samples are too few."""

    parts: Curve
    """Shape (2(K-1),), ``c_2, s_2 .. c_K, s_K``, ratios."""
    samples: Curve
    """Shape (n,), in any unit; may be empty."""
    period: float
    """Samples to a period, not a whole number as a rule."""


@dataclass(frozen=True, slots=True, eq=False)
class Period:
    """One period in points: the upper crest a quarter of the way along, the lower at three quarters."""

    ideal: Curve
    """The sine."""
    difference: Curve
    """What the fitted shape has more than the sine."""
    folded: Curve | None
    """What the samples have more than the sine; None where they are too few."""


def period_of(trace: Trace, points: int) -> Period:
    """Give one period of a trace.

    Parameters
    ----------
    trace
        The samples and the fitted parts.
    points
        Points over the period.
    """
    theta = 2 * np.pi * ((np.arange(points) + 0.5) / points - 0.25)
    fitted = np.asarray(shape_at(trace.parts, theta) - np.cos(theta))
    return Period(np.cos(theta), fitted, folded(trace, points))


def folded(trace: Trace, points: int) -> Curve | None:
    """Fold the samples: each falls into the part of the period that it was taken in.

    The mean of what the samples differ from the ideal sine *there* is given. The sine is the samples'
    own fundamental over whole periods, so that nothing of the difference depends on a phase told from
    elsewhere.
    """
    whole = int(trace.samples.size // trace.period * trace.period) if trace.period > 0 else 0
    if whole < 3 * points:
        return None
    samples = trace.samples[:whole] - trace.samples[:whole].mean()
    turn = np.exp(-2j * np.pi * np.arange(whole) / trace.period)
    fundamental = 2.0 * np.mean(samples * turn)
    if abs(fundamental) == 0.0:
        return None
    angle = np.angle(np.conj(turn) * fundamental)
    rest = samples / abs(fundamental) - np.cos(angle)
    place = ((angle / (2 * np.pi) + 0.25) % 1.0 * points).astype(int) % points
    count = np.bincount(place, minlength=points)
    if not count.all():
        return None
    return np.asarray(np.bincount(place, weights=rest, minlength=points) / count)


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
    at = _pixel(curve, low, high, rows, dots)
    before = np.concatenate([at[:1], at[:-1]])
    far = before + np.sign(at - before)
    line = np.arange(rows * dots.value[1])[:, None]
    return np.asarray((line >= np.minimum(at, far)) & (line <= np.maximum(at, far)))


def _pixel(curve: Curve, low: float, high: float, rows: int, dots: Dots) -> NDArray[np.intp]:
    pixels = rows * dots.value[1]
    place = (high - curve) / (high - low) * (pixels - 1)
    return np.clip(np.rint(place), 0, pixels - 1).astype(np.intp)


def wave(trace: Trace | None, width: int, rows: int, dots: Dots = Dots.BRAILLE) -> Picture:
    """Draw the period over its ideal sine.

    Parameters
    ----------
    trace
        What to draw; None where nothing has been read yet.
    width, rows
        Size in cells, the caption's row included.
    dots
        How finely a cell is divided.

    Returns
    -------
    Picture
        A caption; the period with its difference from the dotted ideal sine magnified and filled in;
        with room for it, the difference again by itself over a scale in percent.
    """
    if trace is None or rows < 3 or width < 12:
        return (row("shape", width, "quiet"), *blank(width, rows - 1))
    period = period_of(trace, width * dots.value[0])
    caption = row(_caption(period.difference, width), width, "quiet")
    if rows < _APART:
        return (caption, *_over(period, rows - 1, dots))
    under = max(5, (rows - 1) // 2)
    strip = _strip(period_of(trace, (width - _LABEL) * dots.value[0]), under, dots)
    return (caption, *_over(period, rows - 1 - under, dots), *strip)


def _caption(difference: Curve, width: int) -> str:
    times, peak = magnification(difference), 100.0 * float(np.max(np.abs(difference)))
    return longest(
        width,
        f"shape against its ideal sine, difference ×{times}, {peak:.2f} % at most",
        f"shape, difference ×{times}, {peak:.2f} % at most",
        f"difference ×{times}, peak {peak:.2f} %",
        f"×{times}",
    )


def _over(period: Period, rows: int, dots: Dots) -> Picture:
    """Lay the magnified period over the ideal sine, the space between them dotted."""
    shown = period.ideal + magnification(period.difference) * period.difference
    high = float(max(1.0, np.max(np.abs(shown)))) * 1.02
    line = drawn(shown, -high, high, rows, dots)
    sine = drawn(period.ideal, -high, high, rows, dots)
    a, b = (_pixel(curve, -high, high, rows, dots) for curve in (shown, period.ideal))
    y, x = np.indices(line.shape)
    between = (y >= np.minimum(a, b)) & (y <= np.maximum(a, b)) & ((x + y) % 2 == 0)
    return _layers(((line | between, "trace"), (sine, "ideal")), dots)


def _strip(period: Period, rows: int, dots: Dots) -> Picture:
    """Draw the difference by itself over a scale in percent, what the samples say dotted behind it."""
    peak = 100.0 * float(np.max(np.abs(period.difference)))
    scale = next((step for step in _SCALES if step >= peak), 100.0)
    high = scale / 100.0
    curve = drawn(period.difference, -high, high, rows, dots)
    zero = drawn(np.zeros_like(period.difference), -high, high, rows, dots)
    layers: list[tuple[Mask, Role]] = [(curve, "care"), (zero, "ideal")]
    if period.folded is not None:
        at = _pixel(period.folded, -high, high, rows, dots)
        layers.insert(1, (np.arange(curve.shape[0])[:, None] == at, "quiet"))
    marks = {0: f"+{scale:g} %", rows // 2: "0", rows - 1: f"-{scale:g} %"}
    return tuple(
        (Run(f"{marks.get(y, ''):>{_LABEL - 1}} ", "quiet"), *runs)
        for y, runs in enumerate(_layers(tuple(layers), dots))
    )


def _layers(layers: tuple[tuple[Mask, Role], ...], dots: Dots) -> Picture:
    """Lay pictures over each other; a cell belongs to the first that has ink there.

    Without braille what is not the first is told by dots, so that two curves differ by glyph and not
    by colour alone.
    """
    cells: list[list[tuple[str, Role]]] = []
    for depth, (ink, role) in reversed(list(enumerate(layers))):
        glyphs = told(ink, dots)
        if not cells:
            cells = [[(" ", role)] * len(glyphs[0]) for _ in glyphs]
        for y, line in enumerate(glyphs):
            for x, glyph in enumerate(line):
                if glyph != " ":
                    cells[y][x] = ("·" if dots is Dots.BLOCK and depth else glyph, role)
    return tuple(joined(line) for line in cells)
