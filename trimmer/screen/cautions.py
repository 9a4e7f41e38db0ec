"""What to heed before a screwdriver goes near a unit; one key goes on."""

from __future__ import annotations

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import VerticalScroll
from textual.content import Content
from textual.screen import Screen
from textual.widgets import Static

from trimmer.screen import help_words
from trimmer.screen.commands import key
from trimmer.screen.widgets.keys import Key, KeysWidget

OPENING = "Before the case is opened"
CAUTIONS: tuple[tuple[str, str], ...] = (
    (
        "Mains kills.",
        "A mains-powered unit has lethal voltage inside. Unplug it, wait, discharge it and check "
        "that it is dead before a hand goes in. Work inside a live unit is for qualified people, "
        "and never alone.",
    ),
    (
        "Keep earth an earth.",
        "Never lift a protective earth to cure hum. An oscilloscope's clip is earth; so is the "
        "ground of a computer's sound input, which must never meet a mains-side circuit or one "
        "that is not isolated.",
    ),
    (
        "Know the level first.",
        "Check it with another meter. Stay inside the input's limits and measurement category; "
        "a line input wants no more than 1 to 2 V rms, so divide and limit.",
    ),
    (
        "The right tool, lightly.",
        "Use an insulated, non-metallic trimming tool and do not force a trim past its end. "
        "No wrist strap where mains is exposed.",
    ),
    (
        "Stop at smoke, heat or a level you did not expect.",
        "Nothing this program says makes a unit safe.",
    ),
    (
        "Others decide.",
        "Your local rules, the maker's papers and licensed practice come first, and standards "
        "such as IEC 61010-1, IEC 61010-031, IEC 60900, IEC 61340-5-1 and EN 50110-1.",
    ),
)
READY = (
    "To begin: a sine of about 1 kHz, loaded as in use, input DC coupled, level inside the range, "
    "a quarter of an hour warm (common practice). Set uneven rise and fall before the two trims."
)


class CautionsScreen(Screen[bool]):
    """Shows the cautions; gives True when they were read."""

    CSS_PATH = "cautions.tcss"
    HELP = help_words.CAUTIONS
    VERTICAL_BREAKPOINTS = [(0, "-short"), (30, "-tall")]  # noqa: RUF012 - declared so by the base class
    BINDINGS: ClassVar[list[BindingType]] = [
        key("enter,space,escape", "go_on", "I have read this: go on"),
    ]

    def compose(self) -> ComposeResult:
        """Lay out the cautions, the reminders, the key."""
        yield Static(OPENING, id="title", markup=False)
        with VerticalScroll(id="cautions"):
            for headline, rest in CAUTIONS:
                yield Static(Content.assemble((headline, "bold $warning"), f" {rest}"))
            yield Static(READY, id="ready", markup=False)
        keys = KeysWidget(id="keys")
        keys.keys = (
            Key("Enter", "I have read this: go on", "screen.go_on"),
            Key("q", "leave", "app.leave"),
        )
        yield keys

    def action_go_on(self) -> None:
        """Go on."""
        self.dismiss(True)
