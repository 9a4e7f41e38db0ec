"""The bar that fills while the hand turns: the way the top of the screw goes, up to the mark."""

from __future__ import annotations

from trimmer.guidance.advice import Say, Sense
from trimmer.screen.pictures.runs import Picture, Role, joined

BEGIN = -0.25
"""Share at the bar's empty end; what is below 0 is the wrong way."""
END = 1.35
"""Share at the bar's far end; what is above 1 is too far."""

_ROLES: dict[Say, Role] = {
    "wait": "quiet",
    "turn": "go",
    "slow": "care",
    "stop": "halt",
    "wrong-trim": "halt",
    "wrong-way": "halt",
}


def cell_of(share: float, width: int) -> int:
    """Say in which of `width` cells a share lies, the ends taking what is beyond them."""
    return half_of(share, width) // 2


def half_of(share: float, width: int) -> int:
    """Say in which of ``2 width`` half cells a share lies, the ends taking what is beyond them."""
    place = (share - BEGIN) / (END - BEGIN) * 2 * width
    return min(2 * width - 1, max(0, int(place)))


def bar(
    share: float | None, width: int, rows: int, sense: Sense = "clockwise", say: Say = "turn"
) -> Picture:
    """Draw the bar.

    Parameters
    ----------
    share
        How far of the asked turn has been made, 1 is all of it; None where it cannot be told yet.
    width, rows
        Size in cells, at least 12 by 1.
    sense
        Clockwise fills to the right, counter-clockwise to the left, as the top of the screw goes.
    say
        The word for the hand, which gives the filled part its role.

    Returns
    -------
    Picture
        Empty track, ``█`` made, ``╳`` the wrong way, ``▚`` too far, a full-height mark at 1.
    """
    zero, goal = cell_of(0.0, width), cell_of(1.0, width)
    cells: list[tuple[str, Role]] = [_track(at, zero, goal, share is None) for at in range(width)]
    if share is not None:
        half = half_of(share, width)
        here = half // 2
        for at in range(zero, min(here, goal)):
            cells[at] = ("█", _ROLES[say])
        if half % 2 and zero <= here < goal:
            cells[here] = ("▌" if sense == "clockwise" else "▐", _ROLES[say])
        for at in range(goal + 1, here + 1):
            cells[at] = ("▚", "halt")
        for at in range(here, zero):
            cells[at] = ("╳", "halt")
    cells[goal] = ("█", "strong" if share is None or share < 1.0 else "halt")
    ordered = cells if sense == "clockwise" else cells[::-1]
    return tuple(joined(ordered) for _ in range(rows))


def _track(at: int, zero: int, goal: int, unknown: bool) -> tuple[str, Role]:
    """Give the empty track: the asked stretch shaded, what is outside it bare."""
    if not zero <= at < goal:
        return " ", "quiet"
    return ("╌" if unknown else "░"), "quiet"
