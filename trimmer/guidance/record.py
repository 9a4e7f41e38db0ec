"""What has been asked and read so far, and the walk of the trims that follows from it."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from trimmer.guidance.general import beyond_third
from trimmer.guidance.habit import expected_moves
from trimmer.guidance.hand import Hand
from trimmer.guidance.moves import Move
from trimmer.guidance.path import Walk
from trimmer.guidance.seen import Seen, is_read, merged, nothing_seen


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

    def add_unread(self, move: Move) -> None:
        """Take a move of whose end there is no reading, another one following."""
        self.moves.append(move)
        self.places.append([nothing_seen(self.here)])

    def replace_last(self, reading: Seen) -> None:
        """Take a reading instead of all earlier ones of the present place."""
        self.places[-1] = [reading]

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

    def readable(self) -> list[int]:
        """Give the indices of the places that were read."""
        return [i for i, place in enumerate(self.places) if is_read(place[0])]

    def thds(self) -> list[float]:
        """Give the THD of each place that was read, by its surest reading."""
        return [min(self.places[i], key=lambda r: r.thd_sigma).thd for i in self.readable()]

    def thd_before_last(self) -> float:
        """Give the THD before the last move."""
        thds = self.thds()
        return thds[-2] if len(thds) > 1 else thds[-1]

    def walk(self, hand: Hand, scale_sigma: float) -> Walk:
        """Give the walk for the search of the most probable path, the present place at 0."""
        size = 2 * (self.orders - 1)
        together = [merged(place) for place in self.places]
        n = len(self.moves)
        steps = np.zeros((n + 1, 2, n))
        for i, move in enumerate(self.moves):
            steps[: i + 1, move.trim, i] = -1.0
        expected = expected_moves(self.moves, hand, scale_sigma)
        away = np.linalg.norm(steps @ expected.steps, axis=1)
        left_out = beyond_third(self.orders, away)
        return Walk(
            parts=np.array([r.parts[:size] for r in together]),
            variance=np.array([r.variance[:size] for r in together]) + left_out**2,
            steps=steps,
            expected=expected.steps,
            spread=expected.covariance,
        )
