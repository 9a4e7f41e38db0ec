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
_ROLES: dict[Ground, Role] = {
    "bare": "strong",
    "bars": "care",
    "solid": "halt",
    "checks": "halt",
    "slants": "halt",
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
    lines = [line for text, size in chosen for line in [*letters(text, size), *[""] * size.air]][
        : -chosen[-1][1].air or None if chosen else None
    ]
    if not chosen:
        lines = [fitted(" ".join(ways[0]), width)]
    small = [aside] if aside and len(lines) + 1 <= height else []
    left = max(0, width - max(map(len, [*lines, *small]), default=0)) // 2
    top = max(0, height - len(lines) - len(small)) // 2
    rows: list[Row] = []
    for y in range(height):
        at = y - top
        if 0 <= at < len(lines):
            rows.append(_laid(lines[at], width, y, ground, left if ground == "bare" else None))
        elif small and at == len(lines):
            rows.append(_noted(small[0], width, y, ground, left))
        else:
            rows.append(_laid("", width, y, ground, 0))
    return tuple(rows)


def _laid(line: str, width: int, y: int, ground: Ground, left: int | None) -> Row:
    """Lay a line of letters on its ground, a cell of air to each side of it."""
    role = _ROLES[ground]
    inked = line.translate(_INVERSE) if ground == "solid" else line
    start = (width - len(line)) // 2 if left is None else left
    air = 1 if line and ground not in ("bare", "solid") else 0
    begin = _tiled(0, max(0, start - air), y, ground)
    end = _tiled(start + len(line) + air, width, y, ground)
    space = " " * air
    return (Run(begin, role), Run(f"{space}{inked}{space}", _ink(ground)), Run(end, role))


def _noted(text: str, width: int, y: int, ground: Ground, left: int) -> Row:
    """Lay the small line."""
    shown = text if len(text) <= width - 2 else fitted(text, width - 2)
    start = left if ground == "bare" else (width - len(shown)) // 2
    air = 0 if ground == "bare" else 1
    begin = _tiled(0, max(0, start - air), y, ground)
    end = _tiled(start + len(shown) + air, width, y, ground)
    return (
        Run(begin, _ROLES[ground]),
        Run(f"{' ' * air}{shown}{' ' * air}", "plain"),
        Run(end, _ROLES[ground]),
    )


def _ink(ground: Ground) -> Role:
    return "halt" if ground == "solid" else "strong"


def _tiled(begin: int, end: int, y: int, ground: Ground) -> str:
    """Give a stretch of the ground, in step with its neighbours."""
    tile = _TILES[ground][y % 2]
    return "".join(tile[x % len(tile)] for x in range(begin, end))
