"""The screen of a tuning session: takes its reports up and shows each in its place."""

from __future__ import annotations

from time import monotonic
from typing import ClassVar

from textual import work
from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Horizontal
from textual.message import Message
from textual.screen import Screen
from textual.worker import get_current_worker

from trimmer.guidance.advice import Sense, Trim
from trimmer.reports import Conversation, Word
from trimmer.screen.bells import STROKES_S, rung
from trimmer.screen.commands import key
from trimmer.screen.hand import KeyedHand
from trimmer.screen.help_words import TUNING
from trimmer.screen.mailbox import Mailbox, reports
from trimmer.screen.options import Options
from trimmer.screen.pictures.raster import Dots
from trimmer.screen.shown import Shown, shown
from trimmer.screen.view import View, take
from trimmer.screen.widgets.keys import KeysWidget
from trimmer.screen.widgets.panes import CourseWidget, PartsWidget, ShapeWidget
from trimmer.screen.widgets.turn import (
    BarWidget,
    LineWidget,
    SignWidget,
    StatusWidget,
    WordsWidget,
    WordyWidget,
)

FRAME_S = 1 / 20
"""The shortest time between two frames."""


PANES_S = 0.5
"""The shortest time between two pictures of the panes, and two sentences, while the hand turns: a slow
line has no room for more, and the eyes are on the bar."""
BESIDE_S = 20.0
"""How long the cautions stand beside a session on the simulated unit."""


class TuneScreen(Screen[None]):
    """Guides the two trims: what to do, how far along, why and what is left, figures."""

    CSS_PATH = "tune.tcss"
    HELP = TUNING
    VERTICAL_BREAKPOINTS = [  # noqa: RUF012 - declared so by the base class
        (0, "-tiny"),
        (20, "-short"),
        (32, "-tall"),
        (50, "-high"),
    ]
    BINDINGS: ClassVar[list[BindingType]] = [
        key("enter,space", "say('moved')", "I have turned it", "The turn is made: read again."),
        key("b", "say('back')", "Take the last turn back", "Say how to undo the last turn."),
        key("e", "say('at-stop')", "The trim is at its end", "It will not go further that way."),
        key("o", "say('skip')", "Ask for another way", "Not this turn: say another one."),
        key("up", "hold('upper')", "Screwdriver on the upper trim"),
        key("down", "hold('lower')", "Screwdriver on the lower trim"),
        key("left", "turn('counter-clockwise', False)", "Turn counter-clockwise"),
        key("right", "turn('clockwise', False)", "Turn clockwise"),
        key("comma,shift+left", "turn('counter-clockwise', True)", "A touch counter-clockwise"),
        key("full_stop,shift+right", "turn('clockwise', True)", "A touch clockwise"),
        key(
            "m", "mute", "Sound on or off", "One stroke: slow. Two: stop. Three: wrong. Four: done."
        ),
        key("g", "glyphs", "Fine or plain curves", "For a font without braille, or with it."),
    ]

    class Mail(Message):
        """Reports lie in the mailbox."""

    class Over(Message):
        """The session has ended."""

        def __init__(self, view: View, left: bool) -> None:
            super().__init__()
            self.view = view
            self.left = left

    def __init__(self, session: Conversation, options: Options) -> None:
        super().__init__()
        self.view = View(source=options.source)
        self.options = options
        self.hand = None if options.hand is None else KeyedHand(options.hand, options.travel)
        self.silent = not options.bell
        self.dots = options.dots
        self._place_widgets()
        self._session = session
        self._mailbox = Mailbox()
        self.leaving = False
        self._ended = False
        self._told = False
        self._frame_at = 0.0
        self._frame_due = False
        self._beside_until = 0.0
        self._panes_due = 0.0
        self._panes_follow = False

    def _place_widgets(self) -> None:
        """Make the widgets; held by name, so that nothing is looked up in every frame."""
        self.resting: dict[Trim, LineWidget] = {
            "upper": LineWidget(id="upper-rest", classes="rest"),
            "lower": LineWidget(id="lower-rest", classes="rest"),
        }
        self.sign, self.words = SignWidget(id="sign"), WordsWidget(id="words")
        self.bar, self.why = BarWidget(id="bar"), WordyWidget(id="why")
        self.shape, self.parts = ShapeWidget(id="shape"), PartsWidget(id="parts")
        self.course, self.matters = CourseWidget(id="course"), LineWidget(id="matters")
        self.status, self.keys = StatusWidget(id="status"), KeysWidget(id="keys")

    def compose(self) -> ComposeResult:
        """Lay out: the turn, the bar, why, the panes, what matters, where things stand, keys."""
        yield self.resting["upper"]
        with Horizontal(id="turn"):
            yield self.sign
            yield self.words
        yield self.resting["lower"]
        yield self.bar
        yield self.why
        with Horizontal(id="panes"):
            yield self.shape
            yield self.parts
            yield self.course
        yield self.matters
        yield self.status
        yield self.keys

    def on_mount(self) -> None:
        """Begin: the session in its thread, the clock for the reading's age."""
        if self.options.cautions and self.hand is not None:
            self._beside_until = monotonic() + BESIDE_S
        self.display_view()
        self.set_interval(1.0, self.display_view)
        # After the first paint: what the session loads and asks would hold it up.
        self.call_after_refresh(self.follow)

    @work(thread=True, exclusive=True, exit_on_error=False, group="readings")
    def follow(self) -> None:
        """Run the session and put its reports into the mailbox."""
        worker = get_current_worker()
        for report in reports(self._session, lambda: worker.is_cancelled):
            if self._mailbox.put(report):
                self.post_message(self.Mail())
        self._ended = True
        self.post_message(self.Mail())

    def on_tune_screen_mail(self) -> None:
        """Take the mail up now, or as soon as a frame may be drawn again."""
        wait = self._frame_at + FRAME_S - monotonic()
        if wait <= 0.0:
            self.take_mail()
        elif not self._frame_due:
            self._frame_due = True
            self.set_timer(wait, self.take_mail)

    def take_mail(self) -> None:
        """Take all reports up and show what they make of the view."""
        ended = self._ended  # before the mailbox is emptied: what was said last is then in it
        self._frame_due = False
        self._frame_at = now = monotonic()
        for report in self._mailbox.take():
            before, self.view = self.view, take(self.view, report, now)
            self.ring(before)
        self.display_view()
        if (self.view.over or ended) and not self._told:
            self._told = True
            self.post_message(self.Over(self.view, self.leaving))

    @property
    def caught_up(self) -> bool:
        """Whether everything the session has said is on the screen."""
        return self._mailbox.empty and not self._frame_due

    def ring(self, before: View) -> None:
        """Ring for the change from `before` to now."""
        bell = None if self.silent else rung(before, self.view)
        for delay in STROKES_S[bell] if bell is not None else ():
            self.set_timer(max(delay, 0.001), self.app.bell)

    def display_view(self) -> None:
        """Give every widget its value; those whose value is the same stay as they are."""
        now = monotonic()
        value = shown(self.view, now, self.hand, self.silent, now < self._beside_until)
        self.sign.order = self.words.order = value.order
        self.bar.asked, self.bar.sense = value.asked, value.order.sense
        self.bar.say, self.bar.share = value.say, value.share
        for trim, line in self.resting.items():
            line.lines = value.resting[trim]
            line.display = bool(value.resting[trim])
        self.matters.lines, self.status.parts = value.matters, value.status
        self.status.set_class(value.stale, "-stale")
        self.keys.keys = value.keys
        following = self.view.word is not None
        if not (following and self._panes_follow and now < self._panes_due):
            self._panes_due, self._panes_follow = now + PANES_S, following
            self._show_panes(value)

    def _show_panes(self, value: Shown) -> None:
        """Show why, shape, parts and course; while the hand turns less often than the bar."""
        self.why.sentences = value.why
        self.shape.trace, self.shape.dots = self.view.trace, self.dots
        self.parts.split = self.view.parts
        self.course.steps, self.course.floor = self.view.steps, self.view.floor

    def check_action(self, action: str, parameters: tuple[object, ...]) -> bool | None:  # noqa: ARG002
        """Only the simulated unit's trims can be turned from here."""
        return action not in ("hold", "turn") or self.hand is not None

    def action_say(self, word: Word) -> None:
        """Say a word to the session."""
        self._session.say(word)

    def action_hold(self, trim: Trim) -> None:
        """Put the screwdriver on a trim."""
        if self.hand is not None:
            self.hand.trim = trim
            self.display_view()

    def action_turn(self, sense: Sense, fine: bool) -> None:
        """Turn the trim the screwdriver is on."""
        if self.hand is not None:
            self.hand.turn(sense, fine)

    def action_mute(self) -> None:
        """Sounds on or off."""
        self.silent = not self.silent
        self.display_view()

    def action_glyphs(self) -> None:
        """Draw curves in braille or in block characters."""
        self.dots = Dots.BLOCK if self.dots is Dots.BRAILLE else Dots.BRAILLE
        self._panes_follow = False
        self.display_view()

    def leave(self) -> None:
        """End the session early; what was measured is in the book."""
        self.leaving = True
        self._session.say("quit")
        self.workers.cancel_node(self)
