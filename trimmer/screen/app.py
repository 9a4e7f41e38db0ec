"""The application: its screens, the keys that work everywhere, and what it was handed."""

from __future__ import annotations

from collections.abc import Iterable
from typing import ClassVar

from textual.app import App, SystemCommand
from textual.binding import BindingType
from textual.screen import Screen

from trimmer.reports import Conversation
from trimmer.screen.cautions import CautionsScreen
from trimmer.screen.commands import commands, deeds, key, perform
from trimmer.screen.help import HelpScreen
from trimmer.screen.interrupts import on_interrupt
from trimmer.screen.options import Options
from trimmer.screen.sheet import SheetScreen
from trimmer.screen.themes import DARK, LIGHT
from trimmer.screen.tune import TuneScreen

INTERRUPTED = 130
"""Exit status of a session that was ended before its end."""
GRACE_S = 2.0
"""How long an ended session may take to close its sheet."""


class TuneApp(App[int]):
    """One tuning session on the screen."""

    CSS_PATH = "look.tcss"
    TITLE = "trimmer"
    BINDINGS: ClassVar[list[BindingType]] = [
        key("q", "leave", "End", "What was measured so far is in the book."),
        key("ctrl+c,ctrl+q", "leave", "End at once", "What was measured so far is in the book."),
        key("question_mark,f1", "explain", "Help"),
        key("c", "caution", "Cautions"),
        key("t", "turn_light", "Light or dark"),
        key("ctrl+p", "command_palette", "Every action by name"),
    ]

    def __init__(self, session: Conversation, options: Options) -> None:
        super().__init__()
        self._session = session
        self._options = options
        self._tune: TuneScreen | None = None

    def on_mount(self) -> None:
        """Choose the palette; the cautions first, or the session at once."""
        for theme in (DARK, LIGHT):
            self.register_theme(theme)
        self.theme = (DARK if self._options.dark else LIGHT).name
        on_interrupt(self.action_leave)
        if self._options.cautions and self._options.hand is None:
            self.push_screen(CautionsScreen(), self._begin)
        else:
            self._begin(True)

    def _begin(self, read: bool | None) -> None:
        if not read:
            self.exit(INTERRUPTED)
            return
        self._tune = TuneScreen(self._session, self._options)
        self.push_screen(self._tune)

    def on_tune_screen_over(self, message: TuneScreen.Over) -> None:
        """Show the sheet, or go where that is what was asked."""
        if message.left:
            self.exit(INTERRUPTED)
            return
        failed = message.view.failed
        status = 0 if failed is None else failed.exit_status
        if not self._options.wait_to_close:
            self.exit(status)
            return
        self.push_screen(SheetScreen(message.view), lambda _: self.exit(status))

    def action_leave(self) -> None:
        """End: close the sheet that is shown, or the session before its end."""
        if isinstance(self.screen, SheetScreen):
            self.screen.dismiss(None)
        elif self._tune is None or self._tune.leaving:
            self.exit(INTERRUPTED)
        else:
            self._tune.leave()
            self.set_timer(GRACE_S, lambda: self.exit(INTERRUPTED))

    def action_explain(self) -> None:
        """Show the help of the screen in front."""
        beneath = self.screen
        if not isinstance(beneath, HelpScreen):
            shown = HelpScreen(beneath.HELP or "", tuple(deeds(self, beneath)))
            self.push_screen(shown, lambda act: perform(self, beneath, act))

    def action_caution(self) -> None:
        """Show the cautions again."""
        if not isinstance(self.screen, CautionsScreen):
            self.push_screen(CautionsScreen())

    def action_turn_light(self) -> None:
        """Change between light on dark and dark on light."""
        self.theme = LIGHT.name if self.theme == DARK.name else DARK.name

    def get_system_commands(self, screen: Screen[object]) -> Iterable[SystemCommand]:
        """List every action of the screen in front by name."""
        return commands(self, screen)
