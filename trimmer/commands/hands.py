"""A session whose turns are made by a simulated hand, blind or following the live word."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Self

from drivers.bench import Bench
from drivers.bench.hand import Hand
from trimmer.reports import Advised, Conversation, Followed, Report, Word

SIGN = {"clockwise": 1.0, "counter-clockwise": -1.0}
BY_EYE_S = 1.5
"""How long the hand takes over a turn that it judges by eye."""
STOPS = ("stop", "wrong-trim", "wrong-way")


class HandsOn:
    """A conversation in which a simulated hand answers each advice.

    Blind, the hand makes the turn as asked, with its errors, and says *moved* (or *at-stop* when it
    felt the stop). Followed, it turns until the live word says stop, like a person.
    """

    def __init__(self, session: Conversation, bench: Bench, *, seed: int) -> None:
        self._session = session
        self._bench = bench
        self._hand = Hand(bench, seed)
        self._turning = False
        self._slowed = False

    def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
        """Give the session's reports, turning the trims in between."""
        for report in self._session.run(stop):
            yield report
            match report:
                case Advised(advice=advice, follows=False):
                    self._hand.make(advice.trim, SIGN[advice.sense] * advice.turns)
                    at_stop = self._bench.at_stop(advice.trim)
                    self._session.say("at-stop" if at_stop else "moved")
                case Advised(advice=advice, follows=True) if advice.expected_thd is None:
                    # Nothing can say stop yet: the hand goes by eye, as a person does.
                    turns = SIGN[advice.sense] * advice.turns
                    self._hand.make(advice.trim, turns, seconds=BY_EYE_S)
                case Advised(advice=advice, follows=True):
                    self._hand.start(advice.trim, SIGN[advice.sense], advice.turns)
                    self._turning, self._slowed = True, False
                case Followed(word=word) if self._turning and word.say in STOPS:
                    self._hand.stop()
                    self._turning = False
                case Followed(word=word) if self._turning and word.say == "slow":
                    if not self._slowed:
                        self._hand.slow()
                    self._slowed = True

    def say(self, word: Word) -> None:
        """Pass a word on to the session."""
        self._session.say(word)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self._hand.stop()
