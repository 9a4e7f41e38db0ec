"""A picture as rows of runs: text and the part it plays, without colours."""

from __future__ import annotations

import textwrap
from dataclasses import dataclass
from typing import Literal

from rich.cells import cell_len, set_cell_size

Role = Literal["plain", "strong", "quiet", "cap", "go", "care", "halt", "trace", "ideal"]
"""What a run is for; a face decides on colour and weight, and the picture must do without."""


@dataclass(frozen=True, slots=True)
class Run:
    """A piece of a row in one style."""

    text: str
    """What is shown; every character is one cell wide."""
    role: Role = "plain"
    """What it is for."""
    action: str = ""
    """What a click on it does, as an action of the screen; empty for nothing."""


Row = tuple[Run, ...]
Picture = tuple[Row, ...]


def row(text: str, width: int, role: Role = "plain") -> Row:
    """Give a row of one run, cut or padded to `width`."""
    return (Run(fitted(text, width), role),)


def fitted(text: str, width: int) -> str:
    """Cut a text to `width` cells with an ellipsis, or pad it; wide characters count for two."""
    if cell_len(text) > width:
        return set_cell_size(text, width - 1) + "…" if width > 0 else ""
    return set_cell_size(text, width)


def picture(lines: list[str], width: int, height: int, role: Role = "plain") -> Picture:
    """Centre lines of equal width in a space of `width` by `height`, cut where they are larger."""
    wide = max((len(line) for line in lines), default=0)
    left = max(0, (width - wide) // 2)
    top = max(0, (height - len(lines)) // 2)
    shown = [row(" " * left + line, width, role) for line in lines[:height]]
    return (*blank(width, top), *shown, *blank(width, height - top - len(shown)))


def blank(width: int, height: int) -> Picture:
    """Empty rows."""
    return (row("", width),) * max(0, height)


def plain(drawn: Picture) -> list[str]:
    """Give the text alone, row by row."""
    return ["".join(run.text for run in runs) for runs in drawn]


def joined(cells: list[tuple[str, Role]]) -> Row:
    """Join neighbouring cells of one role into runs."""
    runs: list[Run] = []
    for text, role in cells:
        if runs and runs[-1].role == role:
            runs[-1] = Run(runs[-1].text + text, role)
        else:
            runs.append(Run(text, role))
    return tuple(runs)


def longest(width: int, *texts: str) -> str:
    """Give the first of several wordings, long ones first, that fits; the last one if none does."""
    return next((text for text in texts if len(text) <= width), texts[-1])


def wrapped(text: str, width: int, most: int) -> list[str]:
    """Break a text at its spaces into at most so many lines, cut where it is longer still."""
    lines = textwrap.wrap(text, width) if width > 0 else []
    if len(lines) > most:
        lines = [*lines[: most - 1], " ".join(lines[most - 1 :])]
    return [fitted(line, width).rstrip() for line in lines]
