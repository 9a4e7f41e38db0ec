"""Guard rails: a turn that changed nothing, another screw, another way, another kind of unit."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from enum import Enum
from typing import Final

import numpy as np

from trimmer.guidance.estimate import Estimate
from trimmer.guidance.explain import Explained, Movement, explain, fits
from trimmer.guidance.field import Array
from trimmer.guidance.general import column_scale
from trimmer.guidance.habit import expected_moves
from trimmer.guidance.hand import Hand
from trimmer.guidance.moves import Move
from trimmer.guidance.seen import Seen

CHANCE: Final = 3.0
"""A change within so many standard deviations of none is none."""
PLAIN: Final = 1.5
"""Standard deviations of misfit up to which a turn explains its reading plainly .."""
PLAIN_SLIP: Final = 2.5
""".. if it is no further than this from what was asked for."""
DUE: Final = 8.0
"""A turn must be due to change the reading by so many times that, for no change to mean anything."""
LEAST_MADE: Final = 0.05
"""Of a turn that reached the wiper at least this share is made."""
DRIFT: Final = 4.0
"""Standard deviations of change of a reading that nobody turned .."""
DRIFT_SHARE: Final = 0.05
""".. and its size over THD .."""
DRIFT_THD: Final = 3e-4
""".. or by itself, from which on it matters."""
MISTAKE: Final = 12.0
"""How much better a mistake must explain a reading than the turn asked for: hands err in about one turn
of fifty (a guess), and a wrong alarm costs more than a late one."""
RIVAL: Final = 6.0
"""A mistake that explains a reading no worse than this is kept in mind."""
STRANGE: Final = 8.0
"""Standard deviations of misfit from which on no turn of a unit of this kind explains a reading."""


def excess(before: Seen, after: Seen) -> float:
    """Give how far the squared change of a reading stands above chance, in standard deviations."""
    variance = _variance(before, after)
    size = variance.size
    square = float(np.sum((after.parts[:size] - before.parts[:size]) ** 2 / variance))
    return (square - size) / float(np.sqrt(2.0 * size))


def _variance(before: Seen, after: Seen) -> Array:
    size = min(before.parts.size, after.parts.size)
    return after.variance[:size] + before.variance[:size]


def is_dead(before: Seen, after: Seen, move: Move, est: Estimate) -> bool:
    """Tell whether a turn that was due to change the reading changed nothing.

    Where the trim's column is known the change is looked for along it, where a short turn shows that
    is lost in the noise of all parts together.
    """
    if excess(before, after) >= CHANCE:
        return False
    variance = _variance(before, after)
    size = variance.size
    known = est.known[move.trim]
    column = column_scale(size // 2 + 1)
    if known:
        column = est.belief.columns(est.here)[move.trim, :size]
    weighted = column / variance
    strength = float(weighted @ column)
    way = max(0.0, abs(move.asked) - est.habit.play[move.trim])
    if way**2 * strength < DUE * CHANCE * float(np.sqrt(2.0 * size)):
        return False
    made = float(weighted @ (after.parts[:size] - before.parts[:size])) / strength
    return not known or abs(made) < max(CHANCE / float(np.sqrt(strength)), LEAST_MADE * way)


def drifted(before: Seen, after: Seen) -> bool:
    """Tell whether a reading moved, for sure and enough to matter, while nobody turned."""
    size = min(before.parts.size, after.parts.size)
    change = float(np.linalg.norm(after.parts[:size] - before.parts[:size]))
    return excess(before, after) > DRIFT and change > max(DRIFT_SHARE * before.thd, DRIFT_THD)


class Verdict(Enum):
    """How a reading after a turn is best explained."""

    AS_ASKED = "as asked"
    WRONG_TRIM = "wrong trim"
    WRONG_WAY = "wrong way"
    STRANGE = "strange"


@dataclass(frozen=True, slots=True)
class Finding:
    """The best explanation of a reading after a turn."""

    verdict: Verdict
    move: Move
    """The turn as it was probably made."""
    rival: Move | None = None
    """Another way in which it may have been made, hardly less likely."""


def look_into(before: Estimate, moves: Sequence[Move], hand: Hand, after: Seen) -> Finding:
    """Explain a reading after the last of some moves, by the field as it was known before.

    Only columns that were known can speak. A turn of a trim of which nothing is known may do anything.

    Parameters
    ----------
    before
        The estimate before the turn.
    moves
        All moves, the last one led to the reading.
    hand
        Errors of the hand.
    after
        The reading.
    """
    last = moves[-1]
    size = before.belief.mean.shape[0]
    if last.dead or after.parts.size < size:
        return Finding(Verdict.AS_ASKED, last)
    asked = _explained(before, moves, hand, after, last)
    if _plain(asked, size):
        return Finding(Verdict.AS_ASKED, last)
    best, found = asked.surprise, Finding(Verdict.AS_ASKED, last)
    for verdict, move in _mistakes(last, before):
        mistake = _explained(before, moves, hand, after, move)
        if not fits(mistake.misfit, size):
            continue
        if mistake.surprise + MISTAKE < best:
            best, found = mistake.surprise + MISTAKE, Finding(verdict, move)
        elif found.verdict is Verdict.AS_ASKED and mistake.surprise < asked.surprise + RIVAL:
            found = Finding(Verdict.AS_ASKED, last, move)
    if found.verdict is Verdict.AS_ASKED and found.rival is None and _strange(asked, size):
        return Finding(Verdict.STRANGE, last)
    return found


def _plain(asked: Explained, size: int) -> bool:
    """Whether the turn asked for explains the reading so well that nothing else need be thought of."""
    left = (asked.misfit - size) / float(np.sqrt(2.0 * size))
    return left < PLAIN and abs(asked.slip) < PLAIN_SLIP


def _strange(asked: Explained, size: int) -> bool:
    return (asked.misfit - size) / float(np.sqrt(2.0 * size)) > STRANGE


def _mistakes(last: Move, before: Estimate) -> list[tuple[Verdict, Move]]:
    mistakes: list[tuple[Verdict, Move]] = []
    if before.known[last.trim]:
        mistakes.append((Verdict.WRONG_WAY, replace(last, asked=-last.asked)))
    if before.known[1 - last.trim]:
        other = replace(last, trim=1 - last.trim)
        mistakes.append((Verdict.WRONG_TRIM, other))
        mistakes.append((Verdict.WRONG_TRIM, replace(other, asked=-last.asked)))
    return mistakes


def _explained(
    before: Estimate, moves: Sequence[Move], hand: Hand, after: Seen, move: Move
) -> Explained:
    size = before.belief.mean.shape[0]
    expected = expected_moves([*moves[:-1], move], hand, 0.1)
    sigma = float(np.sqrt(expected.covariance[-1, -1]))
    span = 1.6 * abs(move.asked) + 3.0 * hand.jitter
    thought = Movement(move.trim, float(expected.steps[-1]), sigma, -span, span)
    return explain(before.belief, after.parts[:size], after.variance[:size], thought)
