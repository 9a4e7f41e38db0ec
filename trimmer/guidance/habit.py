"""How a hand's turns come out on these two trims: the scale of each and the play of its screw.

A turn of `a` made in the sense of the last one moves the wiper by ``g a``, one that goes back on it by
``g a - b``: `g` is the trim's scale against what is believed of it, `b` the play. Both are the same in
all turns of a trim, so turns made say something of turns to come. All of it is linear and normal.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from trimmer.guidance.field import Array
from trimmer.guidance.hand import Hand
from trimmer.guidance.moves import Move, last_sense


@dataclass(frozen=True, slots=True, eq=False)
class Expected:
    """What is expected of all moves together, before their readings."""

    steps: Array
    """Shape (n,), signed shares of the travel."""
    covariance: Array
    """Shape (n, n)."""


@dataclass(frozen=True, slots=True)
class Habit:
    """Scale and play of each trim as they are believed now."""

    scale: tuple[float, float]
    """Way really made over way asked for."""
    play: tuple[float, float]
    """Share of the travel lost on reversal."""

    def to_ask(self, moves: Sequence[Move], trim: int, way: float) -> float:
        """Give the turn to ask for so that the wiper makes a way."""
        sense = 1 if way > 0 else -1
        lost = _lost(last_sense(moves, trim), sense) * self.play[trim]
        return way / self.scale[trim] + sense * lost


def _lost(before: int, sense: int) -> float:
    """Share of the play that a turn loses: all on reversal, perhaps half of it at first."""
    if before == 0:
        return 0.5
    return 0.0 if before == sense else 1.0


def expected_moves(moves: Sequence[Move], hand: Hand, scale_sigma: float) -> Expected:
    """Give what is expected of moves as asked for.

    Parameters
    ----------
    moves
        In order.
    hand
        Errors of the hand.
    scale_sigma
        Spread of a trim's scale against what is believed of it, relative.
    """
    design, own = _design(moves, hand)
    spread = np.diag([scale_sigma**2, hand.backlash_sigma**2] * 2)
    return Expected(
        steps=design @ _usual(hand),
        covariance=design @ spread @ design.T + np.diag(own**2),
    )


def habit(moves: Sequence[Move], hand: Hand, scale_sigma: float, steps: Array) -> Habit:
    """Give the scale and the play that moves as really made speak for.

    Parameters
    ----------
    steps
        Shape (n,), the moves as really made, signed shares of the travel.
    """
    usual = _usual(hand)
    if moves:
        design, own = _design(moves, hand)
        spread = np.diag([scale_sigma**2, hand.backlash_sigma**2] * 2)
        gain = spread @ design.T @ np.linalg.inv(design @ spread @ design.T + np.diag(own**2))
        usual = usual + gain @ (steps - design @ usual)
    scale = np.clip(usual[0::2], 0.5, 2.0)
    play = np.maximum(usual[1::2], 0.0)
    return Habit((float(scale[0]), float(scale[1])), (float(play[0]), float(play[1])))


def _usual(hand: Hand) -> Array:
    return np.array([1.0, hand.backlash, 1.0, hand.backlash])


def _design(moves: Sequence[Move], hand: Hand) -> tuple[Array, Array]:
    """How each move follows from scales and plays, shape (n, 4), and its own scatter, shape (n,)."""
    design = np.zeros((len(moves), 4))
    own = np.empty(len(moves))
    for i, move in enumerate(moves):
        column = 2 * move.trim
        if move.dead:
            own[i] = 0.2 * hand.jitter
            continue
        asked = move.asked if move.followed is None else move.followed
        own[i] = hand.sigma(asked, unseen=move.unseen)
        made = asked
        if move.stopped:
            made = 0.5 * asked
            own[i] = float(np.hypot(own[i], 0.5 * asked))
        design[i, column] = made
        if move.followed is None:
            lost = _lost(last_sense(moves[:i], move.trim), move.sense)
            design[i, column + 1] = -move.sense * lost
            if lost == 0.5:
                own[i] = float(np.hypot(own[i], 0.5 * hand.backlash))
    return design, own
