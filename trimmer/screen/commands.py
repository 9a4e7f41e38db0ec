"""Every action of a screen by name: one list, made from its keys, for the palette and for the help."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import partial

from textual.app import App, SystemCommand
from textual.binding import Binding
from textual.screen import Screen

_CAPS = {
    "enter": "Enter",
    "space": "Space",
    "up": "↑",
    "down": "↓",
    "left": "←",
    "right": "→",
    "shift+left": "Shift ←",
    "shift+right": "Shift →",
    "full_stop": ".",
    "comma": ",",
    "question_mark": "?",
    "f1": "F1",
    "ctrl+c": "Ctrl C",
    "ctrl+q": "Ctrl Q",
    "ctrl+p": "Ctrl P",
    "escape": "Esc",
    "pageup": "PgUp",
    "pagedown": "PgDn",
}


@dataclass(frozen=True, slots=True)
class Deed:
    """Something that can be done."""

    keys: tuple[str, ...]
    """What is written on its keys."""
    name: str
    """What it does."""
    more: str
    """The same in a sentence."""
    action: str
    """The action, with the name of whoever does it."""


def deeds(app: App[int], screen: Screen[object]) -> Iterator[Deed]:
    """List what can be done on a screen and everywhere, in the order of its keys."""
    for owner, where in ((screen, "screen"), (app, "app")):
        for binding in type(owner).BINDINGS:
            if isinstance(binding, Binding) and _possible(owner, binding.action):
                caps = tuple(_CAPS.get(key, key) for key in binding.key.split(","))
                name = binding.description
                yield Deed(caps, name, binding.tooltip or name, f"{where}.{binding.action}")


def _possible(owner: App[int] | Screen[object], action: str) -> bool:
    return owner.check_action(action.partition("(")[0], ()) is not False


def commands(app: App[int], screen: Screen[object]) -> Iterator[SystemCommand]:
    """Give the deeds as entries of the command palette."""
    for deed in deeds(app, screen):
        yield SystemCommand(deed.name, deed.more, partial(perform, app, screen, deed.action))


def perform(app: App[int], screen: Screen[object], action: str | None) -> None:
    """Do an action in its owner's name, once whatever it was picked from has closed."""
    if action is not None:
        owner, _, name = action.partition(".")
        app.call_later(app.run_action, name, app if owner == "app" else screen)
