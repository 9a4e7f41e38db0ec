"""While the hand turns: how far each trim has gone, and the one word for the hand.

Every live reading is explained in turn by the asked trim in the asked sense, by the other sense, and by
the other trim, under the belief about the field and its doubt. The likeliest is what the hand does; a
mistake must be much likelier over a few readings before it is called one.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Final

import numpy as np

from trimmer.guidance.advice import Follow, Say
from trimmer.guidance.aim import Aim, Box
from trimmer.guidance.explain import Explained, Movement, explain, explain_both, fits
from trimmer.guidance.field import Array, FieldBelief
from trimmer.guidance.pace import Lag, Pace
from trimmer.guidance.rails import excess
from trimmer.guidance.seen import Seen
from trimmer.guidance.words import TRIMS

MOVED: Final = 5.0
"""Standard deviations by which a reading must differ from the last still one to count as moved."""
MOVED_ALONG: Final = 3.5
"""Standard deviations along the asked trim's column, twice running, that count as moved too."""
STILL: Final = 2.0
"""Standard deviations within which the two halves of a pause are the same .."""
STILL_SHARE: Final = 0.01
""".. besides this share of the turn."""
STILL_S: Final = 0.6
"""Readings unchanged for so long are still, seconds .."""
SLACK_S: Final = 0.05
"""Readings come a little early or late."""
PAUSE_S: Final = 1.6
""".. but on the way, a pause this long."""
NEAR: Final = 0.8
"""Share of the way from which on the hand is no longer on the way."""
MISTAKE: Final = 16.0
"""How much better, over the last few readings together, a mistake must explain what is read."""
LIKELIER: Final = 5.0
"""How much better it must explain the last one."""
TWICE: Final = 2
"""Readings in a row that must show a movement."""
RUNNING: Final = 3
"""The last few readings."""
ENOUGH: Final = 25.0
"""A change this many times the noise teaches a column well."""


@dataclass(frozen=True, slots=True)
class Outcome:
    """What a followed turn came to."""

    way: float | None
    """Signed way of the asked trim, share of the travel; None where it cannot be told."""
    other: float
    """Signed way of the other trim, 0 where it did not move."""


@dataclass(slots=True)
class Following:
    """One turn being watched."""

    turn: int
    trim: int
    asked: float
    """Signed share of the travel that the asked trim is to make."""
    base: Seen
    """The last still reading."""
    belief: FieldBelief
    """The field around the present place."""
    best: Array
    """Shape (2,), the best setting from here."""
    box: Box
    known: tuple[bool, bool]
    lag: Lag
    moved: bool = False
    moved_s: float | None = None
    """When the movement was first seen."""
    strayed: bool = False
    """Whether the other trim was seen to move."""
    running: int = 0
    """Readings in a row that show a movement along a column."""
    odds: list[float] = field(default_factory=list)
    """How much better a mistake explains the last few readings than the turn asked for."""
    place: Array = field(default_factory=lambda: np.zeros(2))
    history: list[tuple[float, Seen]] = field(default_factory=list)
    pace: Pace = field(init=False)

    def __post_init__(self) -> None:
        self.pace = Pace(self.lag)

    def take(self, reading: Seen, time_s: float) -> Follow:
        """Take a live reading and give the word for the hand."""
        self.history.append((time_s, reading))
        say = self._watch(reading)
        self.moved = self.moved or say is not None or excess(self.base, reading) > MOVED
        if not self.moved:
            share = 0.0 if self.known[self.trim] else None
            return self._word(share, "turn", False, reading)
        share, pace = self._progress(reading, time_s)
        still = self._is_still(share)
        if still:
            self.pace.rest()
            say = say or "wait"
        return self._word(share, say or pace, still, reading)

    def outcome(self) -> Outcome:
        """Give what the turn came to, once it is made."""
        if not self.moved or not self.known[self.trim]:
            return Outcome(None, 0.0)
        other = float(self.place[1 - self.trim]) if self.strayed else 0.0
        return Outcome(float(self.place[self.trim]), other)

    def _word(self, share: float | None, say: Say, still: bool, reading: Seen) -> Follow:
        return Follow(self.turn, TRIMS[self.trim], share, say, still, reading.thd)

    # ---- which trim, which way ---------------------------------------------------------------

    def _watch(self, reading: Seen) -> Say | None:
        """Give a word where the hand errs, None where it does not or cannot be judged."""
        if not any(self.known):
            return None
        parts, variance = self._fit(reading)
        asked = explain(self.belief, parts, variance, self._thought(self.trim, 1.0))
        surprise, say, mistake = min(self._mistakes(parts, variance), key=lambda x: x[0])
        self._note(asked, mistake)
        self.place = np.zeros(2)
        self.place[self.trim] = asked.way
        self.odds = [*self.odds[1 - RUNNING :], asked.surprise - surprise]
        erring = self.odds[-1] > LIKELIER and sum(self.odds) > MISTAKE
        erring = erring and fits(mistake.misfit, parts.size)
        if self.odds[-1] < 0.0:
            self.strayed = False  # the asked trim alone explains it: back again, or a false alarm
        if self.strayed and all(self.known):
            return self._astray(parts, variance, say if erring else None)
        if not erring:
            return None
        self.place = np.zeros(2)
        self.place[self.trim if say == "wrong-way" else 1 - self.trim] = mistake.way
        self.strayed = self.strayed or say == "wrong-trim"
        return say

    def _mistakes(self, parts: Array, variance: Array) -> list[tuple[float, Say, Explained]]:
        """Explanations by a trim or a sense that was not asked for, where its column is known."""
        found: list[tuple[float, Say, Explained]] = []
        if self.known[self.trim]:
            back = explain(self.belief, parts, variance, self._thought(self.trim, -1.0))
            found.append((back.surprise, "wrong-way", back))
        if self.known[1 - self.trim]:
            for sense in (1.0, -1.0):
                other = explain(self.belief, parts, variance, self._thought(1 - self.trim, sense))
                found.append((other.surprise, "wrong-trim", other))
        return found

    def _note(self, asked: Explained, mistake: Explained) -> None:
        """Note a movement that shows along the columns before it shows in the parts as a whole."""
        clear = max(abs(x.way) / x.sigma for x in (asked, mistake)) > MOVED_ALONG
        self.running = self.running + 1 if clear and self.known[self.trim] else 0
        self.moved = self.moved or self.running >= TWICE

    def _astray(self, parts: Array, variance: Array, say: Say | None) -> Say | None:
        """Judge once the other trim has moved: both may now be off their places."""
        place, sigma, misfit = explain_both(self.belief, parts, variance, self.place)
        if not fits(misfit, parts.size):
            self.strayed = False
            return None
        self.place = place
        own, other = self.place[self.trim], self.place[1 - self.trim]
        if abs(other) > max(4.0 * float(sigma[1 - self.trim]), 0.01) and abs(other) > abs(own):
            return "wrong-trim"
        back = own * self.asked < 0.0 and abs(own) > max(4.0 * float(sigma[self.trim]), 0.01)
        return "wrong-way" if back and say == "wrong-way" else None

    def _fit(self, reading: Seen) -> tuple[Array, Array]:
        """Cut a reading to the orders of the belief, and the belief to the reading's."""
        size = min(reading.parts.size, self.belief.mean.shape[0])
        if size < self.belief.mean.shape[0]:
            self.belief = replace(
                self.belief,
                mean=self.belief.mean[:size],
                covariance=self.belief.covariance[:size],
            )
        return reading.parts[:size], reading.variance[:size]

    def _thought(self, trim: int, sense: float) -> Movement:
        """A movement of a trim in the asked sense (+1) or against it (-1)."""
        way = sense * self.asked
        far = 1.5 * way + float(np.sign(way)) * 0.03
        return Movement(trim, 0.5 * way, 0.7 * abs(way) + 0.02, min(0.0, far), max(0.0, far))

    # ---- how far -----------------------------------------------------------------------------

    def _progress(self, reading: Seen, time_s: float) -> tuple[float | None, Say]:
        if not self.known[self.trim]:
            return None, self._probing(reading)
        target = abs(self._target(reading))
        way = float(self.place[self.trim]) * float(np.sign(self.asked))
        return way / target, self.pace.say(way, target, time_s)

    def _target(self, reading: Seen) -> float:
        """Way to go in all, what the reading shows beyond the belief taken into account.

        The bend of the response that the turn itself brings to light shifts the best setting; the
        turn is then called to where it was meant to end as seen from there.
        """
        if not all(self.known):
            return self.asked
        parts, _ = self._fit(reading)
        mean = self.belief.mean.copy()
        mean[:, 0] += parts - self.belief.at(self.place)
        there = Aim(replace(self.belief, mean=mean), caution=0.0).joint(self.place, self.box)
        wanted = self.asked + float(there[self.trim] - self.best[self.trim])
        low, high = sorted((0.6 * self.asked, 1.4 * self.asked))
        return float(np.clip(wanted, low, high))

    def _probing(self, reading: Seen) -> Say:
        """Say *stop* on a first turn once it has taught enough and going on leads away."""
        size = min(reading.parts.size, self.base.parts.size)
        change = reading.parts[:size] - self.base.parts[:size]
        noise = float(np.sum(reading.variance[:size] + self.base.variance[:size]))
        if float(change @ change) < ENOUGH**2 * noise / 4.0:
            return "turn"
        rows = [change]
        if self.known[1 - self.trim]:
            rows.append(self.belief.columns(np.zeros(2))[1 - self.trim, :size])
        basis = np.array(rows)
        normal = basis @ basis.T + 1e-12 * np.eye(len(rows))
        wanted = -np.linalg.solve(normal, basis @ self.base.parts[:size])
        return "stop" if wanted[0] <= 1.0 else "turn"

    # ---- still -------------------------------------------------------------------------------

    def _is_still(self, share: float | None) -> bool:
        on_the_way = share is not None and share < NEAR
        wanted = PAUSE_S if on_the_way else STILL_S
        now, last = self.history[-1]
        if self.moved_s is None:
            self.moved_s = now
        if now - self.moved_s < wanted - SLACK_S:
            return False
        recent = [s for t, s in self.history if now - t <= wanted]
        return len(recent) >= 4 and not _moves_on(recent, self.base, last)


def _moves_on(recent: list[Seen], base: Seen, last: Seen) -> bool:
    """Whether the later half of some readings is further along than the earlier half.

    Looked at along the change that the turn has made so far: in all parts together a slow movement
    is lost in the noise.
    """
    size = min(base.parts.size, *(s.parts.size for s in recent))
    half = len(recent) // 2
    parts = np.array([s.parts[:size] for s in recent])
    change = parts.mean(axis=0) - base.parts[:size]
    length = float(np.linalg.norm(change))
    along = change / length if length > 0.0 else change
    step = float(along @ (parts[-half:].mean(axis=0) - parts[:half].mean(axis=0)))
    noise = float(np.sqrt(2.0 / half * (along**2 @ last.variance[:size])))
    return abs(step) > STILL * noise + STILL_SHARE * length
