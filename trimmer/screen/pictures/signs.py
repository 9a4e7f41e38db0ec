"""The signs beside the words: told apart by their shape alone, from a metre away, without colour."""

from __future__ import annotations

import math
from typing import Literal

import numpy as np

from trimmer.guidance.advice import Sense, Trim
from trimmer.screen.pictures.raster import Canvas, Mask, Point

Sign = Literal["turn", "slow", "stop", "wrong-trim", "wrong-way", "wait", "lost", "done", "ended"]


def screw(canvas: Canvas, sense: Sense, angle: float) -> Mask:
    """Draw a trim from the screwdriver's side: its slotted screw, and round it the way to turn.

    Parameters
    ----------
    canvas
        Where to draw.
    sense
        Which way the arrow goes round.
    angle
        How far the slot stands from upright, radians clockwise.
    """
    centre, radius, inner = _rings(canvas)
    across: Point = (math.sin(angle) * radius, -math.cos(angle) * radius)
    slot = canvas.stroke(
        (centre[0] - across[0], centre[1] - across[1]),
        (centre[0] + across[0], centre[1] + across[1]),
        max(1.0, 0.3 * inner),
    )
    return np.asarray(_round(canvas, sense, 0.0) | (canvas.disc(centre, inner) & ~slot))


def slowing(canvas: Canvas, sense: Sense) -> Mask:
    """The way to turn in short pieces, and upright bars where the screw was: slowly now."""
    centre, _, inner = _rings(canvas)
    bars = np.zeros((1, 1), dtype=bool)
    for place in (-0.72, 0.0, 0.72):
        x = centre[0] + place * inner
        bars = bars | canvas.stroke(
            (x, centre[1] - 0.8 * inner), (x, centre[1] + 0.8 * inner), max(1.0, 0.3 * inner)
        )
    return np.asarray(_round(canvas, sense, 0.55) | bars)


def _rings(canvas: Canvas) -> tuple[Point, float, float]:
    """Give the centre, the arrow's outer radius and the screw's."""
    radius = min(canvas.columns / 2, 2 * canvas.rows / 1.82) - 0.2
    centre = (canvas.columns / 2, radius + (2 * canvas.rows - 1.82 * radius) / 2)
    return centre, radius, radius - 1.4 * _thick(radius) - max(1.0, 0.12 * radius)


def _thick(radius: float) -> float:
    return max(1.5, 0.22 * radius)


def _round(canvas: Canvas, sense: Sense, gaps: float) -> Mask:
    """An arrow round the screw, left out for so much of its way in even gaps."""
    centre, radius, _ = _rings(canvas)
    thick = _thick(radius)
    middle, tip = radius - 0.9 * thick, math.radians(82)
    body = canvas.arc(centre, middle - thick / 2, middle + thick / 2, math.radians(-132), tip)
    if gaps:
        x, y = canvas.grid()
        turned = np.arctan2(x - centre[0], centre[1] - y)
        body &= (turned * 3.5 / math.pi) % 1.0 > gaps
    at = (centre[0] + middle * math.sin(tip), centre[1] - middle * math.cos(tip))
    arrow = body | _head(canvas, at, (math.cos(tip), math.sin(tip)), 1.6 * thick)
    return np.asarray(arrow if sense == "clockwise" else arrow[:, ::-1])


def _head(canvas: Canvas, at: Point, along: Point, half: float) -> Mask:
    """An arrow's head at `at`, pointing `along` (a unit vector), `half` as wide to each side."""
    across = (along[1], -along[0])
    return canvas.polygon(
        [
            (at[0] + across[0] * half, at[1] + across[1] * half),
            (at[0] - across[0] * half, at[1] - across[1] * half),
            (at[0] + along[0] * half * 1.8, at[1] + along[1] * half * 1.8),
        ]
    )


def octagon(canvas: Canvas) -> Mask:
    """A filled octagon with a level bar left open: as far as here and no further."""
    x, y = canvas.grid()
    cx, cy = canvas.middle
    radius = min(canvas.columns / 2, float(canvas.rows)) - 0.2
    dx, dy = np.abs(x - cx), np.abs(y - cy)
    body = (dx <= radius) & (dy <= radius) & (dx + dy <= radius * math.sqrt(2))
    bar = (dx <= 0.62 * radius) & (dy <= 0.19 * radius)
    return np.asarray(body & ~bar)


def crossed(canvas: Canvas, asked: Trim) -> Mask:
    """Two screws, one above the other: an arrow at the one asked for, a cross over the other."""
    cx, _ = canvas.middle
    quarter = canvas.rows / 2
    radius = min(0.9 * quarter, canvas.columns / 5)
    places = {"upper": quarter, "lower": canvas.rows * 2 - quarter}
    good = (cx + 0.45 * radius, places[asked])
    bad = (cx + 0.45 * radius, places["lower" if asked == "upper" else "upper"])
    slot = canvas.stroke((good[0], good[1] - radius), (good[0], good[1] + radius), 1.0)
    asked_screw = canvas.disc(good, radius) & ~slot
    left = good[0] - radius - 0.6
    shaft = canvas.stroke((left - 2.4 * radius, good[1]), (left - 1.2, good[1]), 0.7 * radius)
    point = canvas.polygon(
        [
            (left - 1.5 * radius, good[1] - radius),
            (left, good[1]),
            (left - 1.5 * radius, good[1] + radius),
        ]
    )
    arm, width = 1.15 * radius, max(1.0, 0.5 * radius)
    cross = canvas.stroke((bad[0] - arm, bad[1] - arm), (bad[0] + arm, bad[1] + arm), width)
    cross |= canvas.stroke((bad[0] - arm, bad[1] + arm), (bad[0] + arm, bad[1] - arm), width)
    return np.asarray(asked_screw | shaft | point | cross)


def turn_round(canvas: Canvas, sense: Sense) -> Mask:
    """An arrow that goes up, round and down again on the side of the sense asked for."""
    cx, cy = canvas.middle
    radius = min(canvas.columns / 3.4, canvas.rows / 1.9)
    thick = max(1.6, 0.55 * radius)
    top = cy - canvas.rows + thick / 2 + radius + 0.2
    bow = canvas.arc((cx, top), radius - thick / 2, radius + thick / 2, -math.pi / 2, math.pi / 2)
    up = canvas.stroke((cx - radius, top), (cx - radius, 2 * canvas.rows - 0.3), thick)
    end = 2 * canvas.rows - 0.3 - 1.9 * thick
    down = canvas.stroke((cx + radius, top), (cx + radius, max(top, end)), thick)
    head = _head(canvas, (cx + radius, max(top, end)), (0.0, 1.0), 1.15 * thick)
    arrow = bow | up | down | head
    return np.asarray(arrow if sense == "clockwise" else arrow[:, ::-1])


def hourglass(canvas: Canvas) -> Mask:
    """Two triangles tip to tip between two bars: the tool is busy, the hand is not."""
    x, y = canvas.grid()
    cx, cy = canvas.middle
    half = min(canvas.columns / 2.6, canvas.rows * 0.92)
    dx, dy = np.abs(x - cx), np.abs(y - cy)
    glass = (dy <= half) & (dx <= 0.18 * half + 0.62 * dy)
    hollow = (y < cy - 0.2 * half) & (y > cy - 0.82 * half) & (dx <= 0.62 * dy - 0.16 * half)
    bars = (dy > half * 0.86) & (dy <= half) & (dx <= 0.9 * half)
    return np.asarray((glass & ~hollow) | bars)


def tick(canvas: Canvas) -> Mask:
    """A tick."""
    cx, cy = canvas.middle
    size = min(canvas.columns / 2, float(canvas.rows)) - 0.3
    width = max(1.4, 0.3 * size)
    low = (cx - 0.25 * size, cy + 0.62 * size)
    long = canvas.stroke(low, (cx + 0.85 * size, cy - 0.7 * size), width)
    short = canvas.stroke((cx - 0.9 * size, cy + 0.0 * size), low, width)
    return np.asarray(long | short | canvas.disc(low, width / 2))


def gap(canvas: Canvas) -> Mask:
    """A line that is broken in the middle: what should arrive does not."""
    x, y = canvas.grid()
    cx, cy = canvas.middle
    half = min(canvas.columns / 2, float(canvas.rows)) - 0.3
    thick = max(0.8, 0.16 * half)
    wire = (np.abs(y - cy) <= thick) & (np.abs(x - cx) >= 0.42 * half) & (np.abs(x - cx) <= half)
    plugs = (np.abs(y - cy) <= 0.45 * half) & (np.abs(np.abs(x - cx) - 0.52 * half) <= thick)
    return np.asarray(wire | plugs)


def square(canvas: Canvas) -> Mask:
    """A plain filled square: ended."""
    x, y = canvas.grid()
    cx, cy = canvas.middle
    half = 0.7 * min(canvas.columns / 2, float(canvas.rows))
    return np.asarray((np.abs(x - cx) <= half) & (np.abs(y - cy) <= half))


def sign(
    kind: Sign, columns: int, rows: int, trim: Trim, sense: Sense, angle: float = 0.0
) -> list[str]:
    """Draw a sign in block characters.

    Parameters
    ----------
    kind
        Which.
    columns, rows
        Size in cells.
    trim, sense
        What is asked of the hand, where the sign tells it.
    angle
        How far the slot stands from upright, radians clockwise.

    Returns
    -------
    list of str
        One string for each row, `columns` wide.
    """
    canvas = Canvas(max(4, columns), max(2, rows))
    masks = {
        "turn": lambda: screw(canvas, sense, angle),
        "slow": lambda: slowing(canvas, sense),
        "stop": lambda: octagon(canvas),
        "wrong-trim": lambda: crossed(canvas, trim),
        "wrong-way": lambda: turn_round(canvas, sense),
        "wait": lambda: hourglass(canvas),
        "lost": lambda: gap(canvas),
        "done": lambda: tick(canvas),
        "ended": lambda: square(canvas),
    }
    return canvas.told(masks[kind]())
