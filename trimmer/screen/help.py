"""Help in plain words, and every key as a line that can be clicked."""

from __future__ import annotations

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import VerticalScroll
from textual.reactive import reactive
from textual.screen import ModalScreen
from textual.widgets import Static

from trimmer.screen.commands import Deed, key
from trimmer.screen.pictures.runs import Picture, Run, fitted
from trimmer.screen.widgets.keys import Key, KeysWidget
from trimmer.screen.widgets.picture import PictureWidget


class DeedsWidget(PictureWidget):
    """A list of what can be done; a click does it."""

    deeds: reactive[tuple[Deed, ...]] = reactive((), layout=True)

    def picture(self, width: int, height: int) -> Picture:
        """Write one deed to a row."""
        return tuple(
            (
                Run(fitted(" / ".join(deed.keys), 22), "cap", f"screen.pick({at})"),
                Run(fitted(_said(deed), width - 22), "plain", f"screen.pick({at})"),
            )
            for at, deed in enumerate(self.deeds[:height])
        )

    def get_content_height(self, *_: object) -> int:
        """One row for each deed."""
        return len(self.deeds)


def _said(deed: Deed) -> str:
    return f"{deed.name}. {deed.more}" if deed.more else deed.name


class HelpScreen(ModalScreen[str | None]):
    """Explains the screen beneath; gives the action that was picked, or nothing."""

    CSS_PATH = "help.tcss"
    BINDINGS: ClassVar[list[BindingType]] = [
        key("escape,enter,question_mark,f1", "close", "Close the help"),
    ]

    def __init__(self, words: str, deeds: tuple[Deed, ...]) -> None:
        super().__init__()
        self._deeds = deeds
        self._words = words

    def compose(self) -> ComposeResult:
        """Lay out the words, the keys, the way back."""
        deeds, keys = DeedsWidget(id="deeds"), KeysWidget(id="keys")
        deeds.deeds = self._deeds
        keys.keys = (
            Key("Esc", "back", "screen.close"),
            Key("↑", "", "screen.scroll(-8)"),
            Key("↓", "more", "screen.scroll(8)"),
        )
        with VerticalScroll(id="help"):
            yield Static(self._words, markup=False)
            yield deeds
        yield keys

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)

    def action_scroll(self, rows: int) -> None:
        """Go up or down in the text."""
        self.query_one("#help").scroll_relative(y=rows, animate=False)

    def action_pick(self, at: int) -> None:
        """Do what was clicked."""
        self.dismiss(self._deeds[at].action)
