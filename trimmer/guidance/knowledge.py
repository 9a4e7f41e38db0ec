"""What a guide knows at a moment, and how a reading changes it."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Final

import numpy as np

from trimmer.guidance import words
from trimmer.guidance.estimate import Estimate, Offsets, estimate
from trimmer.guidance.field import Array
from trimmer.guidance.following import Outcome
from trimmer.guidance.hand import Hand
from trimmer.guidance.memory import KindPrior
from trimmer.guidance.moves import Move, mistaken
from trimmer.guidance.rails import Finding, Verdict, drifted, is_dead, look_into
from trimmer.guidance.record import Record
from trimmer.guidance.seen import Seen

STRAINED: Final = 3.0
"""Strain for each turn from which on the turns no longer fit together .."""
STRAINED_ANYHOW: Final = 15.0
""".. besides this much."""
LOOKED_BACK: Final = 6
"""So many turns are looked back on."""
TOLD_LATE: Final = 30.0
"""How much likelier it must be with a mistake in an earlier turn."""
TOLD: Final = 14.0
"""How much likelier all readings together must be one way for it to be taken as told."""


MOST_CORRECTIONS: Final = 3
"""So many corrections say that the guide is lost rather than the hand."""
MOST_BEGINNINGS: Final = 2
"""So often the guide begins afresh."""


@dataclass(slots=True)
class Forgotten:
    """Turns made before the guide began afresh."""

    turns: int = 0
    """Their number."""
    net: Array = field(default_factory=lambda: np.zeros(2))
    """Shape (2,), where they led, shares of the travel."""
    beginnings: int = 0
    """How often it began afresh."""


@dataclass(slots=True)
class Knowledge:
    """The record so far and what follows from it."""

    hand: Hand
    kind: KindPrior | None
    """What is known of units of this kind; None where nothing is, or where this unit differs."""
    offsets: Offsets
    record: Record = field(default_factory=Record)
    estimate: Estimate | None = None
    notice: str = ""
    """A guard rail's word on the last reading."""
    drifts: int = 0
    """How often in a row the reading moved while nobody turned."""
    suspicion: Finding | None = None
    """What the last reading looks like, until another one at the same setting bears it out."""
    before: Estimate | None = None
    """The estimate before the last turn."""
    corrections: int = 0
    """How often the last turns were taken for other ones than were asked for."""
    forgotten: Forgotten = field(default_factory=Forgotten)
    """What was before the guide began afresh."""
    rival: list[Move] | None = None
    """The moves as they may have been made instead, while it cannot be told."""

    def begin(self, one: Seen) -> None:
        """Take the first reading."""
        self.record.begin(one)
        self._think(None)

    def again(self, one: Seen) -> None:
        """Take a further reading of the present setting."""
        self.notice = ""
        suspicion, self.suspicion = self.suspicion, None
        if drifted(self.record.here, one):
            self.drifts += 1
            self.notice = words.DRIFTING
            self.record.replace_last(one)
            self._think(self.estimate)
            return
        self.drifts = 0
        self.record.again(one)
        self._think(self.estimate if suspicion is None else self._act_on(suspicion))

    def turned(self, trim: int, asked: float, one: Seen, stopped: bool, seen: Outcome) -> None:
        """Take a reading after a turn.

        Parameters
        ----------
        trim, asked
            The turn asked for, signed share of the travel.
        one
            The reading.
        stopped
            Whether the trim would not go further.
        seen
            What following saw of the turn.
        """
        assert self.estimate is not None
        self.notice = ""
        self.drifts, self.suspicion = 0, None
        before = self.record.here
        move = Move(
            trim,
            asked,
            stopped=stopped,
            told=stopped,
            unseen=not self.estimate.known[trim],
            followed=seen.way,
        )
        if seen.other != 0.0:
            move = self._astray(move, seen)
        self.record.add(move, one)
        if is_dead(before, one, move, self.estimate):
            known = self.estimate.known[move.trim]
            self.record.change_last(
                replace(move, dead=True, stopped=stopped or known, followed=None)
            )
        elif seen.other == 0.0:
            self._look_into()
        self._think(self.estimate)
        self._weigh_rival()
        self._look_back()
        if self.corrections >= MOST_CORRECTIONS:
            self._begin_afresh()

    def _astray(self, move: Move, seen: Outcome) -> Move:
        """Take in that the other trim was turned, instead of or besides the one asked for."""
        self.notice = words.WRONG_TRIM.format(trim=words.TRIMS[1 - move.trim])
        other = Move(1 - move.trim, seen.other, followed=seen.other)
        if not seen.way:
            return other
        self.record.add_unread(replace(other, extra=True))
        return move

    def _look_into(self) -> None:
        """See whether a mistake, or another kind of unit, explains the last reading better.

        It is not acted upon before a second reading has shown that the unit does not just drift.
        """
        assert self.estimate is not None
        self.before = self.estimate
        found = look_into(self.estimate, self.record.moves, self.hand, self.record.here)
        strange = found.verdict is Verdict.STRANGE and self.kind is None
        self.suspicion = None if found.verdict is Verdict.AS_ASKED or strange else found
        if found.rival is not None:
            self.rival = [*self.record.moves[:-1], found.rival]

    def _weigh_rival(self) -> None:
        """See whether the turns since speak for the moves as they may have been made instead."""
        assert self.estimate is not None
        if self.rival is None:
            return
        self.rival += self.record.moves[len(self.rival) :]
        other = Record(self.record.places, self.rival)
        instead = estimate(other, self.hand, self.kind, None, self.offsets)
        gained = self.estimate.found.cost - instead.found.cost
        if gained > TOLD:
            self.record.moves, self.rival = self.rival, None
            self.estimate, self.suspicion = instead, None
            self.corrections += 1
            self.notice = words.MISTAKEN
        elif gained < -TOLD:
            self.rival = None

    def _look_back(self) -> None:
        """Look for a mistake in an earlier turn once the turns no longer fit together.

        It takes some tens of milliseconds, and hardly ever happens to a hand that errs in size only.
        """
        assert self.estimate is not None
        moves = self.record.moves
        usual = STRAINED * len(moves) + STRAINED_ANYHOW
        if self.suspicion is not None or self.estimate.found.strain < usual:
            return
        found, best = None, self.estimate.found.cost - TOLD_LATE
        for i in range(max(0, len(moves) - LOOKED_BACK), len(moves)):
            for other in mistaken(moves[i]):
                tried = [*moves[:i], other, *moves[i + 1 :]]
                instead = estimate(
                    Record(self.record.places, tried), self.hand, self.kind, None, self.offsets
                )
                if instead.found.cost < best:
                    found, best = (tried, instead), instead.found.cost
        self.rival = None
        if found is None:
            self._begin_afresh()
            return
        self.record.moves, self.estimate = found
        self.corrections += 1
        self.notice = words.MISTAKEN

    def _act_on(self, found: Finding) -> Estimate | None:
        """Take a mistake for one. Gives the estimate to search on from, None to begin afresh."""
        moves = self.record.moves
        self.corrections += 1
        trim = words.TRIMS[found.move.trim]
        first = all(m.trim != found.move.trim or m.dead for m in moves[:-1])
        match found.verdict:
            case Verdict.WRONG_WAY if self.kind is not None and first:
                self.kind = self.kind.turned(found.move.trim == 0, found.move.trim == 1)
                self.notice = words.KIND_TURNED.format(trim=trim)
                return None
            case Verdict.WRONG_WAY:
                self.notice = words.WRONG_WAY.format(trim=trim)
                self.record.change_last(found.move)
            case Verdict.WRONG_TRIM:
                self.notice = words.WRONG_TRIM.format(trim=trim)
                self.record.change_last(found.move)
            case _:
                self.kind = None
                self.notice = words.KIND_DIFFERS
                return None
        return self.before

    def _begin_afresh(self) -> None:
        """Forget all readings but the last: the turns made do not fit what is believed of the unit."""
        gone = self.forgotten
        if self.estimate is None or gone.beginnings >= MOST_BEGINNINGS:
            return
        net = gone.net + self.estimate.net
        self.forgotten = Forgotten(self.turns, net, gone.beginnings + 1)
        here = self.record.here
        self.record = Record()
        self.record.begin(here)
        self.kind, self.rival, self.suspicion, self.corrections = None, None, None, 0
        self.notice = words.AFRESH
        self._think(None)

    @property
    def turns(self) -> int:
        """Turns made so far."""
        return self.forgotten.turns + sum(1 for m in self.record.moves if not m.extra)

    def net(self, place: int = -1) -> Array:
        """Give the net movement since the start at one of the places, shares of the travel."""
        if self.estimate is None:
            return np.zeros(2)
        places = self.estimate.found.places
        return np.asarray(self.forgotten.net + places[place] - places[0])

    def _think(self, before: Estimate | None) -> None:
        self.estimate = estimate(self.record, self.hand, self.kind, before, self.offsets)

    def given_up(self, trim: int) -> bool:
        """Tell whether a trim answered in neither sense, the last times it was turned."""
        senses = set()
        for move in reversed(self.record.moves):
            if move.trim != trim:
                continue
            if not move.dead:
                break
            senses.add(move.sense)
        return len(senses) == 2

    def in_doubt(self) -> int | None:
        """Give a known trim that has just not answered, its other sense not tried since."""
        assert self.estimate is not None
        if not self.record.moves or not self.record.moves[-1].dead:
            return None
        last = self.record.moves[-1]
        told = last.stopped and last.told
        doubtful = self.estimate.known[last.trim] and not told and not self.given_up(last.trim)
        return last.trim if doubtful else None

    def dead_senses(self, trim: int) -> list[int]:
        """Give the senses in which a trim did not answer, in order."""
        return [m.sense for m in self.record.moves if m.trim == trim and m.dead]
