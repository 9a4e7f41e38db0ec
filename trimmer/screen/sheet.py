"""The sheet at the end: the verdict, the figures, what is left and what to do about it."""

from __future__ import annotations

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Horizontal, VerticalScroll
from textual.screen import Screen
from textual.widgets import Static

from drivers.contract import clean
from trimmer.screen.commands import key
from trimmer.screen.help_words import SHEET
from trimmer.screen.orders import order
from trimmer.screen.sheet_words import failed_lines, sheet_lines
from trimmer.screen.view import View
from trimmer.screen.widgets.keys import Key, KeysWidget
from trimmer.screen.widgets.panes import CourseWidget, ShapeWidget
from trimmer.screen.widgets.turn import SignWidget, WordsWidget

KEYS = (
    Key("Enter", "close", "screen.close"),
    Key("?", "help", "app.explain"),
    Key("t", "light/dark", "app.turn_light"),
)


class SheetScreen(Screen[None]):
    """Shows how a session ended."""

    CSS_PATH = "sheet.tcss"
    HELP = SHEET
    VERTICAL_BREAKPOINTS = [(0, "-short"), (32, "-tall")]  # noqa: RUF012 - declared so by the base class
    BINDINGS: ClassVar[list[BindingType]] = [
        key("enter,escape,q", "close", "Close the sheet", "It stays in the book."),
    ]

    def __init__(self, view: View) -> None:
        super().__init__()
        self.view = view
        self.set_class(view.reading is None, "-unread")

    def compose(self) -> ComposeResult:
        """Lay out the verdict, the words, the pictures, the key."""
        sign, words = SignWidget(id="sign"), WordsWidget(id="words")
        shape, course, keys = (
            ShapeWidget(id="shape"),
            CourseWidget(id="course"),
            KeysWidget(id="keys"),
        )
        sign.order = words.order = order(self.view)
        shape.trace = self.view.trace
        course.steps, course.floor = self.view.steps, self.view.floor
        keys.keys = KEYS
        with Horizontal(id="verdict"):
            yield sign
            yield words
        with VerticalScroll(id="sheet"):
            lines = failed_lines(self.view) if self.view.failed else sheet_lines(self.view)
            for kind, text in lines:
                yield Static(clean(text, 1000), classes=kind, markup=False)
        with Horizontal(id="panes"):
            yield shape
            yield course
        yield keys

    def action_close(self) -> None:
        """Close."""
        self.dismiss(None)
