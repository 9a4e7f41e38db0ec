"""Sounds for a hand that does not look: one stroke for slow, two for stop, three for wrong, four for done."""

from __future__ import annotations

from typing import Literal

from trimmer.screen.view import View

Bell = Literal["slow", "stop", "wrong", "done"]

STROKES_S: dict[Bell, tuple[float, ...]] = {
    "slow": (0.0,),
    "stop": (0.0, 0.22),
    "wrong": (0.0, 0.22, 0.44),
    "done": (0.0, 0.5, 1.0, 1.5),
}
"""When the bell rings, seconds from now. Counting strokes works with any bell, whatever its tone."""


def bell_of(view: View) -> Bell | None:
    """Say which sound a state has, None for silence."""
    if view.over:
        return "done"
    if view.word is None or view.awaiting is not None:
        return None
    sounds: dict[str, Bell] = {
        "slow": "slow",
        "stop": "stop",
        "wrong-trim": "wrong",
        "wrong-way": "wrong",
    }
    return sounds.get(view.word.say)


def rung(before: View, after: View) -> Bell | None:
    """Say which sound to make on the way from one state to the next: only when it changes."""
    bell = bell_of(after)
    return None if bell == bell_of(before) else bell
