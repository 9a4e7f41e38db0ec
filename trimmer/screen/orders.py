"""What the hand should do now, from what is known: one sign, a few large words, an aside."""

from __future__ import annotations

import math
from dataclasses import dataclass

from trimmer.guidance.advice import Advice, Follow, Sense, Trim, Verdict
from trimmer.reports import Awaiting
from trimmer.screen.pictures.signs import Sign
from trimmer.screen.pictures.words import Ground, Ways
from trimmer.screen.view import View


@dataclass(frozen=True, slots=True)
class Order:
    """The one thing to do now."""

    sign: Sign
    """The sign beside the words."""
    words: Ways
    """Large words: several ways to break them into lines, any of which will do."""
    aside: str = ""
    """A small line under them."""
    trim: Trim | None = None
    """Which trim, where one is meant."""
    sense: Sense = "clockwise"
    """Which way."""
    slot_degrees: float = 0.0
    """How far the screw has gone in this turn, degrees clockwise, in steps of five."""
    ground: Ground = "bare"
    """What surrounds the words."""


_VERDICTS: dict[Verdict, tuple[Sign, Ways]] = {
    "at-floor": ("done", (("DONE",),)),
    "end-stop": ("done", (("BEST INSIDE", "THE STOPS"), ("BEST", "INSIDE", "STOPS"))),
    "no-response": ("ended", (("NO RESPONSE",), ("NO", "RESPONSE"))),
    "unstable": ("ended", (("UNSTEADY",),)),
    "stopped": ("ended", (("ENDED",),)),
}

_AWAITED: dict[str, tuple[Sign, Ways]] = {
    "source-lost": ("lost", (("SOURCE LOST",), ("SOURCE", "LOST"))),
    "signal": ("lost", (("NO SIGNAL",), ("NO", "SIGNAL"))),
    "confirming": ("wait", (("HANDS OFF",), ("HANDS", "OFF"))),
    "drifting": ("wait", (("LET IT WARM",), ("LET IT", "WARM"))),
}


def order(view: View) -> Order:
    """Say what to do now."""
    if view.failed is not None:
        return Order("ended", (("ENDED",),), ground="slants")
    if view.finished is not None:
        sign, words = _VERDICTS[view.finished.done.verdict]
        return Order(sign, words)
    if view.awaiting is not None and (view.awaiting.code != "file" or view.advice is None):
        return _awaited(view.awaiting)
    if view.advice is not None:
        return _turning(view.advice, view.word)
    if view.opened is None:
        return Order("wait", (("OPENING",),), view.source)
    return Order("wait", (("READING",),), "leave both trims alone for a moment")


def _awaited(awaiting: Awaiting) -> Order:
    sign, words = _AWAITED.get(awaiting.code, ("wait", (("WAIT",),)))
    return Order(sign, words, ground="bare" if sign == "wait" else "slants")


def _turning(advice: Advice, word: Follow | None) -> Order:
    """Say the turn, or the word for the hand that is making it."""
    say = "turn" if word is None else "wait" if word.still else word.say
    if say == "slow":
        return Order(
            "slow", (("SLOW",),), _left(advice, word), advice.trim, advice.sense,
            _slot(advice, word), "bars",
        )  # fmt: skip
    if say == "stop":
        return Order("stop", (("STOP",),), "", advice.trim, advice.sense, 0.0, "solid")
    if say == "wrong-trim":
        other = "lower" if advice.trim == "upper" else "upper"
        name = advice.trim.upper()
        return Order(
            "wrong-trim",
            (("WRONG TRIM", f"TURN {name}"), ("WRONG TRIM", name), ("WRONG", "TRIM", name)),
            f"leave the {other} trim, turn the {advice.trim} one",
            advice.trim, advice.sense, 0.0, "checks",
        )  # fmt: skip
    if say == "wrong-way":
        return Order(
            "wrong-way",
            (("WRONG WAY", "TURN BACK"), ("WRONG", "WAY", "BACK")),
            f"back and on: the {advice.trim} trim {advice.sense}",
            advice.trim, advice.sense, 0.0, "slants",
        )  # fmt: skip
    if say == "wait":
        return Order("wait", (("HOLD",),), "let the reading settle", advice.trim, advice.sense)
    return Order(
        "turn", _asked(advice), in_words(advice), advice.trim, advice.sense, _slot(advice, word)
    )


def _asked(advice: Advice) -> Ways:
    """Give the large words of a turn."""
    trim, size = advice.trim.upper(), amount(advice)
    if advice.sense == "clockwise":
        return ((f"{trim} {size}", "CLOCKWISE"), (trim, size, "CLOCKWISE"))
    return (
        (f"{trim} {size}", "COUNTER-CLOCKWISE"),
        (f"{trim} {size}", "COUNTER-", "CLOCKWISE"),
        (trim, size, "COUNTER-", "CLOCKWISE"),
    )


def amount(advice: Advice) -> str:
    """Write how far: degrees up to a whole turn, turns from there on."""
    degrees = advice.degrees
    if degrees >= 359.5:
        return f"{advice.turns:.1f} TURNS"
    return f"{degrees:.0f}°" if degrees >= 9.95 else f"{degrees:.1f}°"


def in_words(advice: Advice) -> str:
    """Compare a turn with what everyone has seen go round."""
    minutes = advice.degrees / 6.0
    if minutes >= 59.5:
        return f"{advice.degrees:.0f} degrees"
    if minutes >= 1.5:
        return f"as far as the long hand of a clock goes in {minutes:.0f} minutes"
    return "less than two minutes of a clock's long hand"


def _slot(advice: Advice, word: Follow | None) -> float:
    """Give the screw's angle so far, degrees clockwise, in steps that are worth redrawing."""
    share = 0.0 if word is None or word.share is None else word.share
    sense = 1.0 if advice.sense == "clockwise" else -1.0
    return 5.0 * round(sense * share * advice.degrees / 5.0)


def _left(advice: Advice, word: Follow | None) -> str:
    """Say how far it is still to go, in whole degrees so that it is not redrawn all the time."""
    share = 0.0 if word is None or word.share is None else word.share
    return f"{max(0.0, 1.0 - share) * advice.degrees:.0f}° to go"


def slot_radians(order_: Order) -> float:
    """Give the slot's angle in radians."""
    return math.radians(order_.slot_degrees)
