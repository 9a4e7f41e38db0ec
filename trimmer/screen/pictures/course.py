"""THD after each turn, running down to the floor that no turn can remove."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from trimmer.screen.pictures.runs import Picture, Role, blank, fitted, joined, longest, row


@dataclass(frozen=True, slots=True)
class Step:
    """THD after a turn."""

    turn: int
    """Turns made."""
    thd: float
    """Ratio."""
    sigma: float
    """Standard uncertainty, ratio."""


@dataclass(frozen=True, slots=True)
class Floor:
    """THD that no turn can remove."""

    thd: float
    """Ratio."""
    sigma: float
    """Standard uncertainty, ratio."""


def percent(ratio: float, digits: int = 2) -> str:
    """Write a ratio in percent."""
    return f"{100 * ratio:.{digits}f}"


def course(steps: Sequence[Step], floor: Floor | None, width: int, rows: int) -> Picture:
    """Draw THD by turn on a logarithmic scale.

    Parameters
    ----------
    steps
        The readings so far, oldest first.
    floor
        The floor, where it is known; drawn as a band of two standard uncertainties.
    width, rows
        Size in cells, caption and the row of turn numbers included.

    Returns
    -------
    Picture
        ``█`` is the top of a column at a turn's THD, ``▀▄`` in half rows, ``▒`` the floor's band.
    """
    if not steps or rows < 4 or width < 14:
        return (row("THD by turn", width, "quiet"), *blank(width, rows - 1))
    tall = rows - 2
    low, high = _range(steps, floor)
    label = 6
    every = 4 if width - label >= 4 * len(steps) else 3
    shown = list(steps)[-max(1, (width - label) // every) :]
    grid: list[list[tuple[str, Role]]] = [
        [_ground(y, tall, low, high, floor) for _ in range(width - label)] for y in range(tall)
    ]
    for at, step in enumerate(shown):
        _column(grid, at * every, step, low, high, last=at == len(shown) - 1)
    labels = _labels(tall, low, high)
    body = [
        joined([(fitted(labels.get(y, ""), label), "quiet"), *cells])
        for y, cells in enumerate(grid)
    ]
    numbers = "".join(f"{step.turn:^{every - 1}} " for step in shown)
    return (
        row(_caption(steps[-1], floor, width), width, "quiet"),
        *body,
        row(fitted("turn", label) + numbers, width, "quiet"),
    )


def _caption(last: Step, floor: Floor | None, width: int) -> str:
    now = f"THD {percent(last.thd)}"
    if floor is None:
        return longest(width, f"{now} ±{percent(last.sigma, 3)} %, by turn", f"{now} % by turn")
    return longest(
        width,
        f"{now} ±{percent(last.sigma, 3)} %, floor {percent(floor.thd)} ±{percent(floor.sigma)} %",
        f"{now} %, floor {percent(floor.thd)} %",
        f"{now}, floor {percent(floor.thd)}",
        now,
    )


def _range(steps: Sequence[Step], floor: Floor | None) -> tuple[float, float]:
    """Choose the scale: from a little under the lowest of all to the highest, in ratios."""
    values = [step.thd for step in steps] + ([floor.thd] if floor else [])
    high = max(max(values), 1e-5) * 1.15
    low = max(min(values) / 1.6, high / 1000)
    return min(low, high / 2), high


def _level(thd: float, tall: int, low: float, high: float) -> int:
    """Give the half row, counted from the top, at which a THD lies."""
    share = math.log(high / max(thd, low)) / math.log(high / low)
    return min(2 * tall - 1, max(0, int(share * 2 * tall)))


def _ground(y: int, tall: int, low: float, high: float, floor: Floor | None) -> tuple[str, Role]:
    """Give the empty cell of a row: the floor's band or nothing."""
    if floor is None:
        return " ", "quiet"
    top = _level(floor.thd + 2 * floor.sigma, tall, low, high) // 2
    bottom = _level(max(floor.thd - 2 * floor.sigma, low), tall, low, high) // 2
    return ("▒", "ideal") if top <= y <= bottom else (" ", "quiet")


def _column(
    grid: list[list[tuple[str, Role]]], x: int, step: Step, low: float, high: float, last: bool
) -> None:
    """Draw a turn's column from its THD down; the newest is the strongest."""
    tall = len(grid)
    top = _level(step.thd, tall, low, high)
    role: Role = "strong" if last else "plain"
    for y in range(top // 2, tall):
        glyph = "▄" if y == top // 2 and top % 2 else "█"
        for dx in range(2):
            if x + dx < len(grid[y]):
                grid[y][x + dx] = (glyph, role)


def _labels(tall: int, low: float, high: float) -> dict[int, str]:
    """Label the top and the bottom row with the THD at their middle, in percent."""
    step = math.log(high / low) / tall
    value = {y: high * math.exp(-step * (y + 0.5)) for y in (0, tall - 1)}
    return {y: f"{100 * v:.3g}"[:5] for y, v in value.items()}
