"""What each place on the tuning screen shows, worked out from the view."""

from __future__ import annotations

from dataclasses import dataclass

from trimmer.guidance.advice import Say, Trim
from trimmer.screen import sentences
from trimmer.screen.hand import KeyedHand
from trimmer.screen.orders import Order, order
from trimmer.screen.view import View
from trimmer.screen.widgets.keys import Key

BESIDE = "Simulated, nothing is live. In a real unit mains kills: c for more."


@dataclass(frozen=True, slots=True)
class Shown:
    """The values of all places at a moment."""

    order: Order
    """What to do."""
    share: float | None
    """How far the asked turn has been made."""
    say: Say
    """The word for the hand."""
    asked: bool
    """Whether a turn is asked for."""
    resting: dict[Trim, tuple[str, ...]]
    """What is said of each trim that is to be left alone."""
    matters: tuple[str, ...]
    """What the eyes should see besides."""
    why: tuple[str, str]
    """Why, and what to expect."""
    status: tuple[str, str, str, str]
    """Where things stand."""
    keys: tuple[Key, ...]
    """Keys on show, the weightiest first."""
    stale: bool
    """Whether watched readings have stopped."""


def shown(
    view: View, now: float, hand: KeyedHand | None, silent: bool, beside: bool = False
) -> Shown:
    """Work out what to show.

    Parameters
    ----------
    view
        What is known.
    now
        The monotonic clock, seconds.
    hand
        The hand on the keyboard, where there is one.
    silent
        Whether sounds are off.
    beside
        Whether the cautions stand beside the session.
    """
    todo, word = order(view), view.word
    return Shown(
        order=todo,
        share=None if word is None else word.share,
        say="turn" if word is None else word.say,
        asked=view.advice is not None and not view.over,
        resting={"upper": resting("upper", todo, hand), "lower": resting("lower", todo, hand)},
        matters=((BESIDE,) if beside else ()) + sentences.matters(view),
        why=(sentences.why(view), sentences.expectation(view)),
        status=sentences.status(view, now),
        keys=keys(view, hand, silent),
        stale=sentences.stale(view, now),
    )


def resting(trim: Trim, todo: Order, hand: KeyedHand | None) -> tuple[str, ...]:
    """Say that a trim is to be left alone; nothing for the one that is to be turned."""
    if todo.trim is None or todo.trim == trim:
        return ()
    said = f"{trim} trim: leave it alone"
    if hand is not None and hand.trim == trim:
        way = "↑ moves it up" if trim == "lower" else "↓ moves it down"
        said += f"  ◀ the screwdriver is on it: {way}"
    return (said,)


def keys(view: View, hand: KeyedHand | None, silent: bool) -> tuple[Key, ...]:
    """List the keys that do something now, the weightiest first."""
    listed: list[Key] = []
    turning = view.advice is not None and not view.over
    if hand is not None:
        other = "lower" if hand.trim == "upper" else "upper"
        listed += [
            Key("↑↓", "other trim", f"screen.hold('{other}')"),
            Key("←", "", "screen.turn('counter-clockwise', False)"),
            Key("→", f"turn {hand.trim}", "screen.turn('clockwise', False)"),
        ]
    if turning and not view.follows:
        listed.append(Key("Enter", "turned", "screen.say('moved')"))
    listed += [Key("?", "help", "app.explain"), Key("q", "end", "app.leave")]
    if hand is not None:
        listed += [
            Key(",", "", "screen.turn('counter-clockwise', True)"),
            Key(".", "a touch", "screen.turn('clockwise', True)"),
        ]
    if turning:
        listed += [
            Key("b", "take back", "screen.say('back')"),
            Key("e", "at its end", "screen.say('at-stop')"),
            Key("o", "other way", "screen.say('skip')"),
        ]
    listed += [
        Key("m", "sound off" if not silent else "sound on", "screen.mute"),
        Key("t", "light/dark", "app.turn_light"),
        Key("g", "glyphs", "screen.glyphs"),
        Key("c", "cautions", "app.caution"),
        Key("^P", "all", "app.command_palette"),
    ]
    return tuple(listed)
