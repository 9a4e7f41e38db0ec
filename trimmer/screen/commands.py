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
    """More about it, in a sentence; may be empty."""
    action: str
    """The action, with the name of whoever does it."""


def key(keys: str, action: str, name: str, more: str = "") -> Binding:
    """Bind keys, separated by commas, to an action that has a name and a sentence."""
    return Binding(keys, action, name, show=False, tooltip=more, priority="ctrl+c" in keys)


def deeds(app: App[int], screen: Screen[object]) -> Iterator[Deed]:
    """List what can be done on a screen and everywhere, in the order of its keys."""
    for owner, where in ((screen, "screen"), (app, "app")):
        for binding in type(owner).BINDINGS:
            if isinstance(binding, Binding) and _possible(owner, binding.action):
                caps = tuple(_CAPS.get(name, name) for name in binding.key.split(","))
                name = binding.description
                yield Deed(caps, name, binding.tooltip, f"{where}.{binding.action}")


def _possible(owner: App[int] | Screen[object], action: str) -> bool:
    return owner.check_action(action.partition("(")[0], ()) is not False


def commands(app: App[int], screen: Screen[object]) -> Iterator[SystemCommand]:
    """Give the deeds as entries of the command palette."""
    for deed in deeds(app, screen):
        yield SystemCommand(
            deed.name, deed.more or deed.name, partial(perform, app, screen, deed.action)
        )


def perform(app: App[int], screen: Screen[object], action: str | None) -> None:
    """Do an action in its owner's name, once whatever it was picked from has closed."""
    if action is not None:
        owner, _, name = action.partition(".")
        app.call_later(app.run_action, name, app if owner == "app" else screen)
