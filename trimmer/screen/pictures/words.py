"""Large words in a space: the largest letters that fit, on a ground that tells the states apart."""

from __future__ import annotations

from functools import lru_cache
from itertools import product
from typing import Literal

from trimmer.screen.pictures.letters import SIZES, Size, letters
from trimmer.screen.pictures.runs import Picture, Role, Row, Run, fitted

Ground = Literal["bare", "bars", "solid", "checks", "slants"]
"""What surrounds large words: nothing, upright bars, ink, a chequer, slanting lines."""

_TILES: dict[Ground, tuple[str, str]] = {
    "bare": (" ", " "),
    "bars": ("║   ", "║   "),
    "solid": ("█", "█"),
    "checks": ("▀▄", "▀▄"),
    "slants": ("╱", "╱"),
}
_GROUNDS: dict[Ground, Role] = {
    "bare": "strong",
    "bars": "care",
    "solid": "halt",
    "checks": "halt",
    "slants": "halt",
}
_INKS: dict[Ground, Role] = {
    "bare": "strong",
    "bars": "strong",
    "solid": "halt",
    "checks": "strong",
    "slants": "strong",
}
_INVERSE = str.maketrans(" ▘▝▀▖▌▞▛▗▚▐▜▄▙▟█", "█▟▙▄▜▐▚▗▛▞▌▖▀▝▘ ")

Ways = tuple[tuple[str, ...], ...]
"""Ways to break large words into lines, any of which will do."""


@lru_cache(maxsize=256)
def setting(ways: Ways, width: int, height: int) -> tuple[tuple[str, Size], ...]:
    """Choose lines and sizes: the smallest letters as large as can be, then all of them.

    Parameters
    ----------
    ways
        Ways to break the words into lines.
    width, height
        Space in cells.

    Returns
    -------
    tuple of (line, size)
        Empty where nothing fits.
    """
    best: tuple[tuple[int, int, int], tuple[tuple[str, Size], ...]] | None = None
    for lines in ways:
        for head, tail in product(SIZES, SIZES):
            sizes = [head, *[tail] * (len(lines) - 1)]
            total = sum(size.rows + size.air for size in sizes) - sizes[-1].air
            if tail.rows > head.rows or total > height:
                continue
            if any(size.width(line) > width for line, size in zip(lines, sizes, strict=True)):
                continue
            area = sum(size.rows * size.across for size in sizes)
            score = (min(size.rows for size in sizes), area, -len(lines))
            if best is None or score > best[0]:
                best = score, tuple(zip(lines, sizes, strict=True))
    return best[1] if best is not None else ()


def words(ways: Ways, aside: str, width: int, height: int, ground: Ground = "bare") -> Picture:
    """Draw large words, with a small line under them where there is room for it.

    Parameters
    ----------
    ways
        Ways to break the words into lines.
    aside
        The small line; empty for none.
    width, height
        Space in cells.
    ground
        What surrounds the words; ``solid`` cuts them out of ink.
    """
    margin = 0 if ground == "bare" else 2
    chosen = setting(ways, width - 2 * margin, height)
    lines = _lines(chosen) if chosen else [fitted(" ".join(ways[0]), width)]
    small = [fitted(aside, width - 2).rstrip()] if aside and len(lines) < height else []
    top = max(0, height - len(lines) - len(small)) // 2
    left = max(0, width - max(map(len, [*lines, *small]))) // 2 if ground == "bare" else None
    rows: list[Row] = []
    for y in range(height):
        at = y - top
        if 0 <= at < len(lines):
            inked = lines[at].translate(_INVERSE) if ground == "solid" else lines[at]
            rows.append(_laid(inked, _INKS[ground], width, y, ground, left))
        elif small and at == len(lines):
            rows.append(_laid(small[0], "plain", width, y, ground, left))
        else:
            rows.append(_laid("", "plain", width, y, ground, 0))
    return tuple(rows)


def _lines(chosen: tuple[tuple[str, Size], ...]) -> list[str]:
    """Draw the lines with the air they need between them."""
    drawn = [[*letters(text, size), *[""] * size.air] for text, size in chosen]
    lines = [line for block in drawn for line in block]
    return lines[: len(lines) - chosen[-1][1].air]


def _laid(text: str, role: Role, width: int, y: int, ground: Ground, left: int | None) -> Row:
    """Lay a text on its ground, a cell of air to each side of it; in the middle where `left` is None."""
    air = " " if text and ground not in ("bare", "solid") else ""
    shown = f"{air}{text}{air}"[:width]
    start = (width - len(shown)) // 2 if left is None else left
    tile = _TILES[ground][y % 2]
    field = (tile * (width // len(tile) + 1))[:width]
    return (
        Run(field[:start], _GROUNDS[ground]),
        Run(shown, role),
        Run(field[start + len(shown) :], _GROUNDS[ground]),
    )
