"""Help in plain words, and every key as a line that can be clicked."""

from __future__ import annotations

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import VerticalScroll
from textual.reactive import reactive
from textual.screen import ModalScreen
from textual.widgets import Static

from trimmer.screen.commands import Deed
from trimmer.screen.pictures.runs import Picture, Run, fitted
from trimmer.screen.widgets.keys import Key, KeysWidget
from trimmer.screen.widgets.picture import PictureWidget

TUNING = """\
At the top stands what to do now: which trim, which way round, how far. The arrow and the bar go the \
way the top of the screw goes. Turn until the bar has reached the mark; no key is needed where the \
tool watches the hand.

Bars across the picture: nearly there, go slowly. All inked: stop. A chequer and a cross: that is the \
other trim. Slanting lines and an arrow that goes back: the wrong way round. An hourglass: leave both \
alone for a moment.

Below the bar stands why, and what distortion (THD) to expect. It may rise with one turn and fall \
with the next: that is said beforehand.

Shape: one period as it is, with its difference from the ideal sine (dotted) made larger. Parts: what \
each order adds at the crests and what leans in time; full ink is what the two trims can take away, \
grey is what they cannot. THD by turn runs down to the floor, the grey band: less than that no turn \
of these trims can give, and what it is made of is on the sheet at the end.

The line at the bottom says what the tool waits for, how old the reading is, where it comes from, and \
what the book already has. Each reading is in the book as soon as it is shown.
"""


class DeedsWidget(PictureWidget):
    """A list of what can be done; a click does it."""

    deeds: reactive[tuple[Deed, ...]] = reactive((), layout=True)

    def picture(self, width: int, height: int) -> Picture:
        """Write one deed to a row."""
        return tuple(
            (
                Run(fitted(" / ".join(deed.keys), 22), "cap", f"screen.pick({at})"),
                Run(fitted(deed.more, width - 22), "plain", f"screen.pick({at})"),
            )
            for at, deed in enumerate(self.deeds[:height])
        )

    def get_content_height(self, *_: object) -> int:
        """One row for each deed."""
        return len(self.deeds)


class HelpScreen(ModalScreen[str | None]):
    """Explains the screen beneath; gives the action that was picked, or nothing."""

    CSS_PATH = "help.tcss"
    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("escape,enter,question_mark,f1", "close", "Close the help", show=False),
    ]

    def __init__(self, deeds: tuple[Deed, ...], words: str = TUNING) -> None:
        super().__init__()
        self._deeds = deeds
        self._words = words

    def compose(self) -> ComposeResult:
        """Lay out the words, the keys, the way back."""
        with VerticalScroll(id="help"):
            yield Static(self._words, markup=False)
            yield DeedsWidget(id="deeds")
        yield KeysWidget(id="keys")

    def on_mount(self) -> None:
        """Show the keys."""
        self.query_one(DeedsWidget).deeds = self._deeds
        self.query_one(KeysWidget).keys = (
            Key("Esc", "back", "screen.close"),
            Key("↑↓", "more", "screen.close"),
        )

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)

    def action_pick(self, at: int) -> None:
        """Do what was clicked."""
        self.dismiss(self._deeds[at].action)
