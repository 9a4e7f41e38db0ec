"""The guide: readings in, one turn at a time out, until there is nothing left that a hand can gain."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from trimmer.guidance.advice import Done, Follow, Trim
from trimmer.guidance.course import Answer, Call, Course
from trimmer.guidance.estimate import Estimate, Offsets
from trimmer.guidance.field import Array, shift_matrix
from trimmer.guidance.firsts import look_first, slewing_in
from trimmer.guidance.following import Following, Outcome
from trimmer.guidance.hand import hand_for
from trimmer.guidance.knowledge import Knowledge
from trimmer.guidance.memory import KindPrior, Learned
from trimmer.guidance.pace import Lag
from trimmer.guidance.remainder import remainder
from trimmer.guidance.seen import Seen, seen, seen_document, seen_from
from trimmer.guidance.warming import WarmDrift
from trimmer.measurement.reading import Reading

UNSEEN = Outcome(None, 0.0)


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
    warm
        How the parts will still change as the unit warms up; None where it is warm or not known.

    Raises
    ------
    ValueError
        Where the travel is not a positive number.
    """

    def __init__(
        self,
        *,
        travel_turns: float = 0.75,
        followed: bool = False,
        prior: KindPrior | None = None,
        limit_thd: float | None = None,
        warm: WarmDrift | None = None,
    ) -> None:
        if not 0.0 < travel_turns < float("inf"):
            raise ValueError("the travel of the trims must be a positive number of turns")
        self.travel_turns = travel_turns
        self.followed = followed
        self.prior = prior
        self.limit_thd = limit_thd
        self.warm = warm
        hand = hand_for(travel_turns, followed)
        self._course = Course(Knowledge(hand, prior, Offsets(warm)), travel_turns, limit_thd)
        self._following: Following | None = None
        self._lag = Lag()
        self._last: Reading | None = None
        self._log: list[dict[str, Any]] = []

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
        asked, est = self._course.pending, self._estimate
        if asked is None or est is None:
            raise ValueError("no turn has been asked for, so there is none to follow")
        if self._following is None:
            self._following = Following(
                turn=self.turns_made,
                trim=asked.trim,
                asked=asked.way,
                base=self._course.knowledge.record.here,
                belief=est.belief,
                best=est.best,
                box=est.box,
                known=est.known,
                lag=self._lag,
            )
        return self._following.take(seen(reading), time_s)

    # ---- what is known -----------------------------------------------------------------------

    @property
    def answer(self) -> Answer | None:
        """The last answer, for a session that is taken up again."""
        return self._course.answer

    @property
    def turns_made(self) -> int:
        """Turns made so far, those without effect included."""
        return self._course.turns

    @property
    def net_turns(self) -> dict[Trim, float]:
        """Turns of each trim from the start, estimated as really made; plus is clockwise."""
        return self._net(-1)

    @property
    def lag_s(self) -> float:
        """The person's lag from *stop* to the hand's rest, as learned by following; seconds."""
        return self._lag.mean_s

    @property
    def best_seen(self) -> BestSeen | None:
        """The best setting read so far, since the guide last began afresh."""
        record = self._course.knowledge.record
        if not record.places:
            return None
        thds = record.thds()
        best = int(np.argmin(thds))
        place = record.readable()[best]
        forgotten = self._course.knowledge.forgotten.turns
        turn = forgotten + sum(1 for m in record.moves[:place] if not m.extra)
        return BestSeen(turn, thds[best], self._net(place))

    @property
    def floor(self) -> tuple[float, float] | None:
        """THD that no turn can remove and its standard uncertainty; None until it is known."""
        est = self._known_estimate
        return None if est is None else (est.floor_thd, est.floor_sigma)

    @property
    def columns(self) -> Array | None:
        """Shape (2, 2(K-1)), parts per turn of the screw, upper first; None until both are known."""
        est = self._known_estimate
        return None if est is None else est.belief.columns(est.here) / self.travel_turns

    @property
    def basis(self) -> Array | None:
        """Shape (2(K-1), 2), orthonormal basis of what the trims reach; None until known."""
        columns = self.columns
        return None if columns is None else np.asarray(np.linalg.qr(columns.T)[0])

    def learned(self) -> Learned | None:
        """Give what this unit taught, at its best setting; None until both columns are known."""
        est = self._known_estimate
        record = self._course.knowledge.record
        if est is None or not record.moves:
            return None
        belief = est.belief.moved_to(est.best)
        shift = shift_matrix(est.best)
        own = np.einsum("fg,kgh,fh->kf", shift, est.found.given_steps, shift)
        return Learned(
            orders=record.orders,
            weights=belief.mean,
            sigma=np.sqrt(own),
            columns_sigma=np.sqrt(belief.covariance[:, [1, 2], [1, 2]].T),
            travel_turns=self.travel_turns,
            fundamental_hz=record.here.fundamental_hz,
        )

    @property
    def _estimate(self) -> Estimate | None:
        return self._course.knowledge.estimate

    @property
    def _known_estimate(self) -> Estimate | None:
        est = self._estimate
        return est if est is not None and all(est.known) else None

    def _net(self, place: int) -> dict[Trim, float]:
        net = self._course.knowledge.net(place) * self.travel_turns
        return {"upper": float(net[0]), "lower": float(net[1])}

    # ---- state -------------------------------------------------------------------------------

    def document(self) -> dict[str, Any]:
        """Give the whole state as a JSON-able document."""
        return {
            "version": 1,
            "travel_turns": self.travel_turns,
            "followed": self.followed,
            "prior": None if self.prior is None else self.prior.to_document(),
            "limit_thd": self.limit_thd,
            "warm": None if self.warm is None else self.warm.to_document(),
            "lag": {
                "mean_s": self._lag.mean_s,
                "count": self._lag.count,
                "creep": self._lag.creep,
            },
            "log": list(self._log),
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
        prior, warm = document["prior"], document["warm"]
        guide = cls(
            travel_turns=float(document["travel_turns"]),
            followed=bool(document["followed"]),
            prior=None if prior is None else KindPrior.from_document(prior),
            limit_thd=document["limit_thd"],
            warm=None if warm is None else WarmDrift.from_document(warm),
        )
        for entry in document["log"]:
            guide._replay(entry)
        lag = document["lag"]
        guide._lag = Lag(float(lag["mean_s"]), float(lag["count"]), float(lag["creep"]))
        return guide

    def _replay(self, entry: dict[str, Any]) -> None:
        one = None if entry["seen"] is None else seen_from(entry["seen"])
        foreign = entry["foreign"]
        self._meet(None if foreign is None else np.array(foreign), str(entry["greeting"]))
        self._step(entry["call"], one, Outcome(entry["way"], float(entry["other"])))

    # ---- one step ----------------------------------------------------------------------------

    def _take(self, call: Call, reading: Reading | None) -> Answer:
        if reading is not None:
            self._look_beyond(reading)
        watched, self._following = self._following, None
        made = call in ("observe", "at-stop") and watched is not None
        outcome = watched.outcome() if made and watched is not None else UNSEEN
        answer = self._step(call, None if reading is None else seen(reading), outcome)
        self._last = reading or self._last
        if isinstance(answer, Done):
            answer = replace(answer, remainder=remainder(self._last, self.basis))
            self._course.answer = answer
        return answer

    def _look_beyond(self, reading: Reading) -> None:
        """See what a reading says of things that are not the trims' to mend.

        Slewing has nothing to do with where the trims stand: it must show in every reading, or it is
        not believed in any more.
        """
        knowledge = self._course.knowledge
        if not knowledge.record.places:
            first = look_first(reading)
            self._meet(first.foreign, first.greeting)
        elif knowledge.offsets.foreign is not None and slewing_in(reading) is None:
            self._meet(None, self._course.greeting)

    def _meet(self, foreign: Array | None, greeting: str) -> None:
        self._course.knowledge.offsets = Offsets(self.warm, foreign)
        self._course.greeting = greeting

    def _step(self, call: Call, one: Seen | None, outcome: Outcome) -> Answer:
        foreign = self._course.knowledge.offsets.foreign
        self._log.append(
            {
                "call": call,
                "seen": None if one is None else seen_document(one),
                "way": outcome.way,
                "other": outcome.other,
                "foreign": None if foreign is None else foreign.tolist(),
                "greeting": self._course.greeting,
            }
        )
        return self._course.step(call, one, outcome)
