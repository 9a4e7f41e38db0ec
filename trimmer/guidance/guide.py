"""The guide: readings in, one turn at a time out, until there is nothing left that a hand can gain."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np

from trimmer.guidance import words
from trimmer.guidance.advice import Advice, Confirm, Done, Follow, Trim, Verdict
from trimmer.guidance.aim import Aim, Box
from trimmer.guidance.choice import (
    Choice,
    choose,
    crest_weights,
    first_size,
    mirrored_way,
    worse_crest,
)
from trimmer.guidance.estimate import Estimate, estimate
from trimmer.guidance.field import Array, shift_matrix
from trimmer.guidance.following import Following
from trimmer.guidance.hand import Hand, hand_for
from trimmer.guidance.memory import KindPrior, Learned
from trimmer.guidance.moves import Move
from trimmer.guidance.pace import Lag
from trimmer.guidance.rails import Verdict as Explanation
from trimmer.guidance.rails import is_dead, look_into
from trimmer.guidance.record import Record
from trimmer.guidance.remainder import remainder
from trimmer.guidance.seen import Seen, seen, seen_document, seen_from
from trimmer.measurement.reading import Reading

Answer = Advice | Confirm | Done
Call = Literal["observe", "longer", "at-stop", "back", "skip", "quit"]

MOST_TURNS = 40
"""After so many turns the guide gives up: something is wrong that it does not see."""


@dataclass(frozen=True, slots=True)
class BestSeen:
    """The best setting read so far."""

    turn: int
    """Turns made before it."""
    thd: float
    """THD there, ratio."""
    net_turns: dict[Trim, float]
    """Net turns of each trim from the start to there; plus is clockwise."""


class Guide:
    """Guides a person through one unit's two trims. Pure: no clock, no input or output.

    Parameters
    ----------
    travel_turns
        The trims' whole mechanical travel, turns of the screw.
    followed
        Whether the hand is told live when to stop, and so errs less.
    prior
        What is known of units of this kind; None where nothing is.
    limit_thd
        THD the person is content with, ratio; None to go down to the floor.
    """

    def __init__(
        self,
        *,
        travel_turns: float = 0.75,
        followed: bool = False,
        prior: KindPrior | None = None,
        limit_thd: float | None = None,
    ) -> None:
        if not travel_turns > 0.0:
            raise ValueError("the travel of the trims must be a positive number of turns")
        self.travel_turns = travel_turns
        self.followed = followed
        self.prior = prior
        self.limit_thd = limit_thd
        self._hand: Hand = hand_for(travel_turns, followed)
        self._record = Record()
        self._estimate: Estimate | None = None
        self._pending: Choice | None = None
        self._confirmed = False
        self._skipped: int | None = None
        self._kind = prior
        self._notice = ""
        self._following: Following | None = None
        self._lag = Lag()
        self._log: list[dict[str, Any]] = []
        self._done: Done | None = None

    # ---- calls -------------------------------------------------------------------------------

    def observe(self, reading: Reading, *, longer: bool = False) -> Answer:
        """Take a still reading at the present setting.

        The first one is the start; later ones come after the turn asked for was made, or, with
        `longer`, after a `Confirm`.
        """
        return self._take("longer" if longer else "observe", reading)

    def at_stop(self, reading: Reading) -> Answer:
        """Take a reading after a turn that ended at the trim's end stop, made in part or not at all."""
        return self._take("at-stop", reading)

    def back(self, reading: Reading) -> Answer:
        """Advise how to take the last turn back."""
        return self._take("back", reading)

    def skip(self, reading: Reading) -> Answer:
        """Advise another turn than the one asked for, which was not made."""
        return self._take("skip", reading)

    def quit(self, reading: Reading | None = None) -> Done:
        """End the guidance at the person's wish."""
        answer = self._take("quit", reading)
        assert isinstance(answer, Done)
        return answer

    def follow(self, reading: Reading, time_s: float) -> Follow:
        """Take a live reading while the hand turns.

        Parameters
        ----------
        reading
            The reading.
        time_s
            When it was taken, monotonic seconds.

        Raises
        ------
        ValueError
            Where no turn has been asked for.
        """
        if self._pending is None or self._estimate is None:
            raise ValueError("no turn has been asked for, so there is none to follow")
        if self._following is None:
            self._following = Following(
                turn=self.turns_made,
                trim=self._pending.trim,
                asked=self._pending.way,
                base=self._record.here,
                belief=self._estimate.belief,
                best=self._estimate.best,
                box=self._estimate.box,
                known=self._estimate.known,
                lag=self._lag,
            )
        return self._following.take(seen(reading), time_s)

    # ---- what is known -----------------------------------------------------------------------

    @property
    def turns_made(self) -> int:
        """Turns made so far, those without effect included."""
        return len(self._record.moves)

    @property
    def net_turns(self) -> dict[Trim, float]:
        """Turns of each trim from the start, estimated as really made; plus is clockwise."""
        return self._net(self.turns_made)

    @property
    def best_seen(self) -> BestSeen | None:
        """The best setting read so far."""
        if not self._record.places:
            return None
        thds = [min(place, key=lambda r: r.thd_sigma).thd for place in self._record.places]
        turn = int(np.argmin(thds))
        return BestSeen(turn, thds[turn], self._net(turn))

    @property
    def floor(self) -> tuple[float, float] | None:
        """THD that no turn can remove and its standard uncertainty; None until both columns are known."""
        est = self._estimate
        return (est.floor_thd, est.floor_sigma) if est is not None and all(est.known) else None

    @property
    def columns(self) -> Array | None:
        """Shape (2, 2(K-1)), parts per turn of the screw, upper first; None until both are known."""
        est = self._estimate
        if est is None or not all(est.known):
            return None
        return est.belief.columns(est.here) / self.travel_turns

    @property
    def basis(self) -> Array | None:
        """Shape (2(K-1), 2), orthonormal basis of what the trims reach; None until known."""
        columns = self.columns
        if columns is None:
            return None
        q, _ = np.linalg.qr(columns.T)
        return np.asarray(q)

    def learned(self) -> Learned | None:
        """Give what this unit taught, at its best setting; None until both columns are known."""
        est = self._estimate
        if est is None or not all(est.known):
            return None
        belief = est.belief.moved_to(est.best)
        shift = shift_matrix(est.best)
        own = np.einsum("fg,kgh,fh->kf", shift, est.found.given_steps, shift)
        return Learned(
            orders=self._record.orders,
            weights=belief.mean,
            sigma=np.sqrt(own),
            columns_sigma=np.sqrt(belief.covariance[:, [1, 2], [1, 2]].T),
            travel_turns=self.travel_turns,
            fundamental_hz=self._record.here.fundamental_hz,
        )

    # ---- state -------------------------------------------------------------------------------

    def document(self) -> dict[str, Any]:
        """Give the whole state as a JSON-able document."""
        return {
            "version": 1,
            "travel_turns": self.travel_turns,
            "followed": self.followed,
            "prior": None if self.prior is None else self.prior.to_document(),
            "limit_thd": self.limit_thd,
            "lag": {"mean_s": self._lag.mean_s, "count": self._lag.count},
            "log": self._log,
        }

    @classmethod
    def from_document(cls, document: dict[str, Any]) -> Guide:
        """Take a guide up again where its document left it, by going through its log.

        Raises
        ------
        ValueError
            Where it is not such a document.
        """
        if document.get("version") != 1:
            raise ValueError(f"guidance state of version {document.get('version')!r}, not 1")
        prior = document["prior"]
        guide = cls(
            travel_turns=float(document["travel_turns"]),
            followed=bool(document["followed"]),
            prior=None if prior is None else KindPrior.from_document(prior),
            limit_thd=document["limit_thd"],
        )
        for entry in document["log"]:
            one = None if entry["seen"] is None else seen_from(entry["seen"])
            guide._step(entry["call"], one, entry["way"], None)
        guide._lag = Lag(float(document["lag"]["mean_s"]), float(document["lag"]["count"]))
        return guide

    @property
    def answer(self) -> Answer | None:
        """The last answer, for a session that is taken up again."""
        return self._answer if self._log else None

    # ---- one step ----------------------------------------------------------------------------

    def _take(self, call: Call, reading: Reading | None) -> Answer:
        one = None if reading is None else seen(reading)
        return self._step(call, one, self._followed_way(), reading)

    def _followed_way(self) -> float | None:
        """Way of the asked trim as seen by following, where it was followed and known."""
        watched, self._following = self._following, None
        return None if watched is None else watched.outcome().way

    def _step(
        self, call: Call, one: Seen | None, way: float | None, reading: Reading | None
    ) -> Answer:
        self._log.append(
            {"call": call, "seen": None if one is None else seen_document(one), "way": way}
        )
        self._answer: Answer = self._respond(call, one, way, reading)
        return self._answer

    def _respond(
        self, call: Call, one: Seen | None, way: float | None, reading: Reading | None
    ) -> Answer:
        self._notice = ""
        if one is not None:
            self._record_reading(call, one, way)
        if call == "quit" or not self._record.places:
            return self._finish("stopped", words.STOPPED, reading)
        if call == "back" and self._record.moves:
            return self._take_back()
        if call == "skip" and self._pending is not None:
            self._skipped = self._pending.trim
        return self._advise(reading)

    def _record_reading(self, call: Call, one: Seen, way: float | None) -> None:
        if not self._record.places:
            self._record.begin(one)
        elif self._pending is not None and call in ("observe", "at-stop"):
            self._turned(one, call == "at-stop", way)
        else:
            self._record.again(one)
            self._confirmed = call == "longer"
        self._think()

    def _turned(self, one: Seen, stopped: bool, way: float | None) -> None:
        assert self._pending is not None
        asked = self._pending.share
        move = Move(self._pending.trim, asked, stopped=stopped, followed=way)
        before = self._record.here
        self._record.add(move, one)
        self._pending = None
        self._confirmed = False
        self._skipped = None
        if self._estimate is not None and is_dead(before, one, move, self._estimate):
            self._record.change_last(replace(move, dead=True, followed=None))

    def _think(self) -> None:
        before = self._estimate
        if before is not None and len(self._record.places[-1]) == 1 and self._record.moves:
            self._look_into(before)
            before = self._estimate
        self._estimate = estimate(self._record, self._hand, self._kind, before)

    def _look_into(self, before: Estimate) -> None:
        """See whether another trim, another sense or another kind of unit explains the reading."""
        moves = self._record.moves
        last = moves[-1]
        found = look_into(before, moves, self._hand, self._record.here)
        trim = words.TRIMS[found.move.trim]
        first = all(m.trim != last.trim or m.dead for m in moves[:-1])
        match found.verdict:
            case Explanation.WRONG_WAY if self._kind is not None and first:
                self._kind = self._kind.turned(last.trim == 0, last.trim == 1)
                self._notice = words.KIND_TURNED.format(trim=trim)
                self._estimate = None
            case Explanation.WRONG_WAY:
                self._notice = words.WRONG_WAY.format(trim=trim)
                self._record.change_last(found.move)
            case Explanation.WRONG_TRIM:
                self._notice = words.WRONG_TRIM.format(trim=trim)
                self._record.change_last(found.move)
            case Explanation.STRANGE if self._kind is not None:
                self._kind = None
                self._estimate = None
                self._notice = words.KIND_DIFFERS
            case _:
                pass

    # ---- advice ------------------------------------------------------------------------------

    def _advise(self, reading: Reading | None) -> Answer:
        est = self._estimate
        assert est is not None
        if self.turns_made >= MOST_TURNS:
            return self._finish("unstable", words.UNSTABLE, reading)
        unknown = [t for t in (0, 1) if not est.known[t] and not self._given_up(t)]
        if unknown:
            return self._ask(self._probe(est, unknown))
        if not any(est.known):
            return self._finish("no-response", words.NO_RESPONSE, reading)
        choice = choose(est, self._record, self._hand, self._usable(est))
        if choice is not None and not self._content():
            return self._ask(choice)
        if not self._confirmed:
            self._pending = None
            sigma = max(0.004 * self._record.here.thd, 1e-5)
            return Confirm(self.turns_made, sigma, words.CONFIRM)
        return self._end(est, reading)

    def _content(self) -> bool:
        return self.limit_thd is not None and self._record.here.thd <= self.limit_thd

    def _usable(self, est: Estimate) -> tuple[int, ...]:
        live = tuple(t for t in (0, 1) if est.known[t])
        others = tuple(t for t in live if t != self._skipped)
        return others or live

    def _given_up(self, trim: int) -> bool:
        """Whether a trim answered in neither sense."""
        dead = {m.sense for m in self._record.moves if m.trim == trim and m.dead}
        return len(dead) == 2

    def _probe(self, est: Estimate, unknown: list[int]) -> Choice:
        """Choose a turn that teaches a column, as useful a one as can be."""
        here = self._record.here
        worse = worse_crest(here.parts)
        order = sorted(unknown, key=lambda t: (t == self._skipped, self._dead_turns(t), t != worse))
        trim = order[0]
        dead = [m.sense for m in self._record.moves if m.trim == trim and m.dead]
        known = est.known[1 - trim]
        if known:
            way = mirrored_way(here.parts[: self._size()], est.belief.columns(est.here)[1 - trim])
            way = float(np.sign(way) or 1.0) * float(np.clip(abs(way), 0.03, 0.10))
        else:
            way = first_size(here.parts)
        if dead:
            way = -dead[-1] * abs(way)
        reason = words.FIRST_OTHER if known or trim != worse else words.FIRST
        if dead:
            reason = words.OTHER_SENSE
        elif self._dead_turns(1 - trim):
            reason = words.OTHER_TRIM
        share = est.habit.to_ask(self._record.moves, trim, way)
        return Choice(trim, share, way, None, False, reason.format(trim=words.TRIMS[trim]))

    def _dead_turns(self, trim: int) -> int:
        return sum(1 for m in self._record.moves if m.trim == trim and m.dead)

    def _size(self) -> int:
        return 2 * (self._record.orders - 1)

    def _take_back(self) -> Advice:
        est = self._estimate
        assert est is not None
        last = self._record.moves[-1]
        made = float(est.found.steps[-1])
        way = -made if abs(made) > 1e-6 else -last.asked
        share = est.habit.to_ask(self._record.moves, last.trim, way)
        thd = self._record.places[-2][0].thd
        choice = Choice(last.trim, share, way, thd, False, words.BACK)
        return replace(self._ask(choice), going_back=True)

    def _ask(self, choice: Choice) -> Advice:
        est = self._estimate
        assert est is not None
        self._pending = choice
        both = all(est.known)
        self._rails(est)
        return Advice(
            turn=self.turns_made,
            trim=words.TRIMS[choice.trim],
            sense=words.sense_of(choice.share),
            turns=abs(choice.share) * self.travel_turns,
            expected_thd=choice.expected_thd,
            floor_thd=est.floor_thd if both else None,
            floor_sigma=est.floor_sigma if both else None,
            reason=choice.reason,
            rises_first=choice.rises,
            swapped=self._swapped(est),
            notice=self._notice,
        )

    def _rails(self, est: Estimate) -> None:
        """Say what a guard rail has to say of the last turn, unless something was said already."""
        if self._notice or not self._record.moves:
            return
        last = self._record.moves[-1]
        trim = words.TRIMS[last.trim]
        if last.dead and est.known[last.trim]:
            self._notice = words.END_OF_TRAVEL.format(trim=trim)
        elif last.stopped:
            self._notice = words.STOP_MET.format(trim=trim)
        elif self._swapped(est):
            self._notice = words.SWAPPED

    def _swapped(self, est: Estimate) -> bool:
        """Whether each trim clearly shapes the crest that the other is named after."""
        if not all(est.known):
            return False
        columns = est.belief.columns(est.here)
        upper, lower = crest_weights(columns.shape[1] // 2 + 1)
        on_upper, on_lower = abs(columns[:, 0::2] @ upper), abs(columns[:, 0::2] @ lower)
        return bool(on_lower[0] > 2.0 * on_upper[0] and on_upper[1] > 2.0 * on_lower[1])

    # ---- the end -----------------------------------------------------------------------------

    def _end(self, est: Estimate, reading: Reading | None) -> Done:
        wide = Box(est.here - 1.0, est.here + 1.0)
        beyond = Aim(est.belief).joint(est.best, wide)
        outside = np.max(np.abs(est.box.clip(beyond) - beyond)) > 0.01
        stopped = any(m.stopped or m.dead for m in self._record.moves)
        if outside and stopped:
            trim = int(np.argmax(np.abs(est.box.clip(beyond) - beyond)))
            reason = words.AT_STOP.format(trim=words.TRIMS[trim])
            return self._finish("end-stop", reason, reading)
        if not all(est.known):
            return self._finish("no-response", words.NO_RESPONSE, reading)
        return self._finish("at-floor", words.AT_FLOOR, reading)

    def _finish(self, verdict: Verdict, reason: str, reading: Reading | None) -> Done:
        floor = self.floor
        left = remainder(reading, self._record.here, self.basis) if self._record.places else ()
        self._pending = None
        return Done(
            turn=self.turns_made,
            verdict=verdict,
            floor_thd=None if floor is None else floor[0],
            floor_sigma=None if floor is None else floor[1],
            net_turns=self.net_turns,
            remainder=left,
            reason=reason,
        )

    def _net(self, turn: int) -> dict[Trim, float]:
        if self._estimate is None:
            return {"upper": 0.0, "lower": 0.0}
        places = self._estimate.found.places
        net = (places[turn] - places[0]) * self.travel_turns
        return {"upper": float(net[0]), "lower": float(net[1])}
