"""The row of keys: what each does now, for the keyboard and for the mouse."""

from __future__ import annotations

from dataclasses import dataclass

from textual.reactive import reactive

from trimmer.screen.pictures.runs import Picture, Row, Run
from trimmer.screen.widgets.picture import PictureWidget


@dataclass(frozen=True, slots=True)
class Key:
    """A key on show."""

    cap: str
    """What is written on it."""
    does: str
    """What it does, in a word or two."""
    action: str
    """The action behind it."""


def keys_row(keys: tuple[Key, ...], width: int) -> Row:
    """Lay out as many keys as fit, the first ones first."""
    runs: list[Run] = []
    used = 0
    for key in keys:
        cap, does = f" {key.cap} ", f" {key.does}" if key.does else ""
        needed = len(cap) + len(does) + (2 if runs else 0)
        if used + needed > width:
            continue
        if runs:
            runs.append(Run("  ", "quiet"))
        runs += [Run(cap, "cap", key.action), Run(does, "quiet", key.action)]
        used += needed
    return (*runs, Run(" " * (width - used), "quiet"))


class KeysWidget(PictureWidget):
    """Keys that can be pressed and clicked."""

    keys: reactive[tuple[Key, ...]] = reactive(())

    def picture(self, width: int, height: int) -> Picture:  # noqa: ARG002
        """Lay out the keys in one row."""
        return (keys_row(self.keys, width),)
