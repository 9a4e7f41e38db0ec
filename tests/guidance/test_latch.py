"""The live word holds within a turn."""

from __future__ import annotations

from trimmer.guidance.advice import Follow, Say
from trimmer.guidance.latch import Latch


def said(*words: tuple[Say, float | None]) -> list[Say]:
    latch = Latch()
    return [latch.hold(Follow(0, "upper", share, say, False)).say for say, share in words]


def test_slow_and_stop_do_not_flicker() -> None:
    heard = said(("turn", 0.1), ("slow", 0.7), ("turn", 0.68), ("stop", 0.95), ("slow", 0.93))
    assert heard == ["turn", "slow", "slow", "stop", "stop"]


def test_a_hand_that_goes_back_is_told_to_turn_again() -> None:
    assert said(("stop", 1.0), ("turn", 0.6), ("slow", 0.8)) == ["stop", "turn", "slow"]


def test_words_of_mistakes_and_waiting_pass() -> None:
    heard = said(("slow", 0.7), ("wrong-trim", 0.7), ("turn", 0.7), ("wait", 0.7))
    assert heard == ["slow", "wrong-trim", "slow", "wait"]


def test_an_unknown_share_latches_too() -> None:
    assert said(("turn", None), ("stop", None), ("turn", None)) == ["turn", "stop", "stop"]
