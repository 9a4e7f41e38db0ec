"""What has been asked and read so far, and the walk of the trims that follows from it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from trimmer.guidance.hand import Hand
from trimmer.guidance.path import Walk
from trimmer.guidance.seen import Seen, merged


@dataclass(frozen=True, slots=True)
class Move:
    """A turn as it was asked for and what became of it."""

    trim: int
    """0 upper, 1 lower, as the person has labelled them."""
    asked: float
    """Signed share of the travel, plus is clockwise."""
    stopped: bool = False
    """Whether the trim would not go further."""
    seen_share: float | None = None
    """Signed share of the travel really made, as seen while it was followed."""
    dead: bool = False
    """Whether nothing changed: the turn did not reach the wiper."""

    @property
    def sense(self) -> int:
        """+1 for clockwise, -1 for counter-clockwise."""
        return 1 if self.asked > 0 else -1


@dataclass(slots=True)
class Record:
    """Places in order, each with its readings, and the moves between them."""

    places: list[list[Seen]] = field(default_factory=list)
    """One list of readings for each place."""
    moves: list[Move] = field(default_factory=list)
    """``moves[i]`` leads from place i to place i + 1."""

    def begin(self, reading: Seen) -> None:
        """Take the first reading."""
        self.places.append([reading])

    def add(self, move: Move, reading: Seen) -> None:
        """Take a move and what was read after it."""
        self.moves.append(move)
        self.places.append([reading])

    def again(self, reading: Seen) -> None:
        """Take a further reading of the present place."""
        self.places[-1].append(reading)

    def change_last(self, move: Move) -> None:
        """Correct the last move."""
        self.moves[-1] = move

    @property
    def here(self) -> Seen:
        """The present place's readings, combined."""
        return merged(self.places[-1])

    @property
    def orders(self) -> int:
        """The highest order that all readings have."""
        return min(r.orders for place in self.places for r in place)

    def last_sense(self, trim: int, before: int | None = None) -> int:
        """Give the sense in which a trim was turned last, 0 where it was not."""
        for move in reversed(self.moves[:before]):
            if move.trim == trim and not move.dead:
                return move.sense
        return 0

    def expected_step(self, index: int, hand: Hand) -> tuple[float, float]:
        """Give the mean and standard deviation of a move as really made."""
        move = self.moves[index]
        if move.dead:
            return 0.0, 0.2 * hand.jitter
        if move.seen_share is not None:
            return move.seen_share, 0.05 * abs(move.seen_share) + 0.5 * hand.jitter
        size, sigma = abs(move.asked), hand.sigma(move.asked)
        before = self.last_sense(move.trim, index)
        if before == 0:
            size -= 0.5 * hand.backlash
            sigma = float(np.hypot(sigma, 0.7 * hand.backlash))
        elif before != move.sense:
            size -= hand.backlash
            sigma = float(np.hypot(sigma, hand.backlash_sigma))
        if move.stopped:
            sigma = float(np.hypot(sigma, 0.5 * size))
            size *= 0.5
        return move.sense * size, sigma

    def walk(self, hand: Hand) -> Walk:
        """Give the walk for the search of the most probable path, the present place at 0."""
        size = 2 * (self.orders - 1)
        together = [merged(place) for place in self.places]
        n = len(self.moves)
        steps = np.zeros((n + 1, 2, n))
        for i, move in enumerate(self.moves):
            steps[: i + 1, move.trim, i] = -1.0
        expected = [self.expected_step(i, hand) for i in range(n)]
        return Walk(
            parts=np.array([r.parts[:size] for r in together]),
            variance=np.array([r.variance[:size] for r in together]),
            steps=steps,
            expected=np.array([e[0] for e in expected]),
            sigma=np.array([e[1] for e in expected]),
        )


def with_last(record: Record, move: Move) -> Record:
    """Give a copy of a record in which the last move is another one."""
    return Record(places=list(record.places), moves=[*record.moves[:-1], move])


def other_ways(move: Move) -> Sequence[Move]:
    """Give the ways in which a move could have been mistaken: other sense, other trim, both."""
    return (
        replace(move, asked=-move.asked),
        replace(move, trim=1 - move.trim),
        replace(move, trim=1 - move.trim, asked=-move.asked),
    )
