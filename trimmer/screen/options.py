"""What a session's screen was asked to be like."""

from __future__ import annotations

from dataclasses import dataclass

from trimmer.reports import Screwdriver
from trimmer.screen.pictures.raster import Dots


@dataclass(frozen=True, slots=True)
class Options:
    """Choices made where the screen is opened."""

    source: str = ""
    """SOURCE word, for as long as nobody has answered."""
    cautions: bool = True
    """Show the cautions and wait for a key before the session begins."""
    hand: Screwdriver | None = None
    """Turns the simulated unit's trims; None where a real hand does."""
    travel: float = 0.75
    """Whole mechanical travel of a trim, turns: the keys' steps are parts of it."""
    bell: bool = True
    """Ring the terminal's bell."""
    dots: Dots = Dots.BRAILLE
    """How finely curves are drawn."""
    wait_to_close: bool = True
    """Keep the sheet on the screen until a key is pressed."""
    dark: bool = True
    """Light on dark or dark on light."""
