"""The Textual screen: a face of a session, and the only place with Textual."""

from __future__ import annotations

import os
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from trimmer.reports import Conversation, Screwdriver

WITHOUT_BRAILLE = ("linux", "cons25", "vt220")
"""Terminals whose font has no braille: text consoles without a window system."""


def run_tune(
    session: Conversation,
    *,
    source: str = "",
    cautions: bool = True,
    hand: Screwdriver | None = None,
    travel: float = 0.75,
    bell: bool = True,
    braille: bool | None = None,
    dark: bool = True,
    wait_to_close: bool = True,
) -> int:
    """Run a tuning session on the screen.

    Parameters
    ----------
    session
        What is shown, and what the person's words are said to. Run once, in a thread of its own.
    source
        SOURCE word, shown until somebody has answered.
    cautions
        Show the cautions first and wait for a key; with `hand` they stand beside the session.
    hand
        Turns the simulated unit's trims by keys; None where a real hand turns.
    travel
        Whole mechanical travel of a trim, turns.
    bell
        Ring the terminal's bell for slow, stop, wrong and done.
    braille
        Draw curves in braille or keep to block characters; None lets the terminal decide.
    dark
        Light on dark, or dark on light.
    wait_to_close
        Keep the sheet until a key is pressed.

    Returns
    -------
    int
        Exit status: 0 done, 3 signal, 4 source, 5 book, 130 ended before its end.
    """
    from trimmer.screen.app import TuneApp
    from trimmer.screen.options import Options
    from trimmer.screen.pictures.raster import Dots

    for stale in ("COLUMNS", "LINES"):
        os.environ.pop(stale, None)  # exported by some shells; they would pin the screen's size
    shown = os.environ.get("TERM") not in WITHOUT_BRAILLE if braille is None else braille
    dots = Dots.BRAILLE if shown else Dots.BLOCK
    options = Options(source, cautions, hand, travel, bell, dots, wait_to_close, dark)
    try:
        status = TuneApp(session, options).run()
    except KeyboardInterrupt:
        return 130
    return 1 if status is None else status
