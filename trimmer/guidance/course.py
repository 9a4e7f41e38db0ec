"""The course of a guidance: one answer to each reading, from the first turn to the end."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Final, Literal

import numpy as np

from trimmer.guidance import words
from trimmer.guidance.advice import Advice, Confirm, Done, Verdict
from trimmer.guidance.aim import Aim, Box
from trimmer.guidance.choice import Choice, choose, go_back, other_sense, probe
from trimmer.guidance.crests import are_swapped
from trimmer.guidance.estimate import Estimate
from trimmer.guidance.following import Outcome
from trimmer.guidance.knowledge import Knowledge
from trimmer.guidance.seen import Seen

Answer = Advice | Confirm | Done
Call = Literal["observe", "longer", "at-stop", "back", "skip", "quit"]

MOST_TURNS: Final = 40
"""After so many turns something is wrong that is not seen: the guidance ends."""
MOST_DRIFTS: Final = 3
"""So often in a row a reading may move while nobody turns."""
MOST_RETURNS: Final = 3
"""So often the guide sends back to the best setting seen."""
CONFIRM_SHARE: Final = 0.004
"""A setting is confirmed by a reading that knows THD to this share of it."""
CONFIRM_THD: Final = 1e-5
"""No reading need know THD better than this."""


@dataclass(slots=True)
class Course:
    """What was asked last, and what is known."""

    knowledge: Knowledge
    travel_turns: float
    limit_thd: float | None
    greeting: str = ""
    """What is to be said first of all: time symmetry, slewing, supply."""
    pending: Choice | None = None
    confirmed: bool = False
    skipped: int | None = None
    """The trim whose turn was passed over."""
    returns: int = 0
    answer: Answer | None = field(default=None)

    def step(self, call: Call, one: Seen | None, seen: Outcome) -> Answer:
        """Take a call with its reading, and answer it."""
        if one is not None:
            self._take(call, one, seen)
        self.answer = self._answer(call)
        return self.answer

    @property
    def turns(self) -> int:
        """Turns made so far."""
        return self.knowledge.turns

    def _take(self, call: Call, one: Seen, seen: Outcome) -> None:
        if not self.knowledge.record.places:
            self.knowledge.begin(one)
        elif self.pending is not None and call in ("observe", "at-stop"):
            asked = self.pending
            self.pending, self.skipped, self.confirmed = None, None, False
            self.knowledge.turned(asked.trim, asked.share, one, call == "at-stop", seen)
        else:
            self.knowledge.again(one)
            self.confirmed = call == "longer" and not self.knowledge.notice

    def _answer(self, call: Call) -> Answer:
        est = self.knowledge.estimate
        if call == "quit" or est is None:
            return self._finish("stopped", words.STOPPED)
        if call == "back" and self.knowledge.record.moves:
            return self._take_back(est)
        if call == "skip" and self.pending is not None:
            self.skipped = self.pending.trim
        return self._advise(est)

    # ---- the next turn -----------------------------------------------------------------------

    def _advise(self, est: Estimate) -> Answer:
        know = self.knowledge
        if self.turns >= MOST_TURNS or know.drifts >= MOST_DRIFTS:
            return self._finish("unstable", words.UNSTABLE)
        alive = [t for t in (0, 1) if not know.given_up(t)]
        if not alive:
            return self._finish("no-response", words.NO_RESPONSE)
        if know.drifts or know.suspicion is not None:
            return self._confirm()
        in_doubt = know.in_doubt()
        if in_doubt is not None:
            return self._ask(other_sense(know, in_doubt), est)
        unknown = [t for t in alive if not est.known[t]]
        if unknown:
            return self._ask(probe(know, unknown, self.skipped), est)
        usable = tuple(t for t in alive if t != self.skipped) or tuple(alive)
        choice = None
        if self.limit_thd is None or know.record.here.thd > self.limit_thd:
            choice = choose(est, know.record, know.hand, usable)
        if choice is not None:
            return self._ask(choice, est)
        if not self.confirmed:
            return self._confirm()
        return self._return(est) or self._end(est)

    def _confirm(self) -> Confirm:
        self.pending = None
        sigma = max(CONFIRM_SHARE * self.knowledge.record.here.thd, CONFIRM_THD)
        reason = words.CONFIRM
        if self.knowledge.drifts:
            reason = words.DRIFTING
        elif self.knowledge.suspicion is not None:
            reason = words.SURPRISING
        return Confirm(self.turns, sigma, reason)

    def _ask(self, choice: Choice, est: Estimate) -> Advice:
        self.pending = choice
        both = all(est.known)
        swapped = both and are_swapped(est.belief.columns(est.here))
        return Advice(
            turn=self.turns,
            trim=words.TRIMS[choice.trim],
            sense=words.sense_of(choice.share),
            turns=abs(choice.share) * self.travel_turns,
            expected_thd=choice.expected_thd,
            floor_thd=est.floor_thd if both else None,
            floor_sigma=est.floor_sigma if both else None,
            reason=choice.reason,
            rises_first=choice.rises,
            swapped=swapped,
            notice=self._notice(swapped),
        )

    def _notice(self, swapped: bool) -> str:
        """Say what a guard rail has to say of the last turn, the gravest first."""
        know = self.knowledge
        if know.notice:
            return know.notice
        if not know.record.moves:
            return self.greeting
        last = know.record.moves[-1]
        trim = words.TRIMS[last.trim]
        if last.dead and know.estimate is not None and know.estimate.known[last.trim]:
            silent = know.given_up(last.trim)
            return (words.SILENT if silent else words.END_OF_TRAVEL).format(trim=trim)
        if last.stopped:
            return words.STOP_MET.format(trim=trim)
        return words.SWAPPED if swapped else ""

    def _take_back(self, est: Estimate) -> Advice:
        know = self.knowledge
        last = know.record.moves[-1]
        made = float(est.found.steps[-1])
        way = -made if abs(made) > 1e-6 else -last.asked
        share = est.habit.to_ask(know.record.moves, last.trim, way)
        thd = know.record.thd_before_last()
        choice = Choice(last.trim, share, way, thd, False, words.BACK)
        return replace(self._ask(choice, est), going_back=True)

    def _return(self, est: Estimate) -> Advice | None:
        """Send back to the best setting seen where the last one is clearly worse than it."""
        if self.returns >= MOST_RETURNS:
            return None
        choice = go_back(est, self.knowledge.record, self.knowledge.hand)
        if choice is None:
            return None
        self.returns += 1
        return replace(self._ask(choice, est), going_back=True)

    # ---- the end -----------------------------------------------------------------------------

    def _end(self, est: Estimate) -> Done:
        if not all(est.known) or any(self.knowledge.given_up(t) for t in (0, 1)):
            return self._finish("no-response", words.ONE_SILENT)
        beyond = Aim(est.aimed).joint(est.best, Box(est.here - 1.0, est.here + 1.0))
        outside = np.abs(est.box.clip(beyond) - beyond)
        stopped = any(m.stopped for m in self.knowledge.record.moves)
        if stopped and float(np.max(outside)) > 0.01:
            trim = words.TRIMS[int(np.argmax(outside))]
            return self._finish("end-stop", words.AT_STOP.format(trim=trim))
        return self._finish("at-floor", words.AT_FLOOR)

    def _finish(self, verdict: Verdict, reason: str) -> Done:
        est = self.knowledge.estimate
        known = est is not None and all(est.known)
        net = self.knowledge.net() * self.travel_turns
        self.pending = None
        return Done(
            turn=self.turns,
            verdict=verdict,
            floor_thd=est.floor_thd if est is not None and known else None,
            floor_sigma=est.floor_sigma if est is not None and known else None,
            net_turns={"upper": float(net[0]), "lower": float(net[1])},
            remainder=(),
            reason=reason,
            expected_thd_warm=est.warm_thd if est is not None else None,
        )
