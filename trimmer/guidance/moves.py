"""A turn as it was asked for, and what became of it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace


@dataclass(frozen=True, slots=True)
class Move:
    """A turn as it was asked for and what became of it."""

    trim: int
    """0 upper, 1 lower, as the person has labelled them."""
    asked: float
    """Signed share of the travel, plus is clockwise."""
    stopped: bool = False
    """Whether the trim would not go further."""
    told: bool = False
    """Whether the person said so."""
    unseen: bool = False
    """Whether the trim's column was not known, so that nobody could tell how far it went."""
    followed: float | None = None
    """Signed share of the travel really made, as seen while it was followed."""
    extra: bool = False
    """Whether it came on top of the turn asked for and is not counted."""
    dead: bool = False
    """Whether nothing changed: the turn did not reach the wiper."""

    @property
    def sense(self) -> int:
        """+1 for clockwise, -1 for counter-clockwise."""
        return 1 if self.asked > 0 else -1


def last_sense(moves: Sequence[Move], trim: int) -> int:
    """Give the sense in which a trim was turned last, 0 where it was not."""
    for move in reversed(moves):
        if move.trim == trim and not move.dead:
            return move.sense
    return 0


def mistaken(move: Move) -> tuple[Move, ...]:
    """Give the other ways in which a turn may have been made: other sense, other trim, both.

    A turn that was followed, or that did nothing, has none.
    """
    if move.dead or move.extra or move.followed is not None:
        return ()
    return (
        replace(move, asked=-move.asked),
        replace(move, trim=1 - move.trim),
        replace(move, trim=1 - move.trim, asked=-move.asked),
    )
