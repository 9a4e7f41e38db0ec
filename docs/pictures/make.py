"""Makes the pictures of the docs from the real program: `python docs/pictures/make.py`.

Each picture is the real screen on the built-in simulated unit, with a simulated hand, at a moment
that is waited for. Nothing is drawn by hand.
"""

from __future__ import annotations

import argparse
import asyncio
import re
import tempfile
from collections.abc import Callable, Iterator
from pathlib import Path

from textual.app import App

from trimmer.book import open_book
from trimmer.cli import build_parser
from trimmer.commands.hands import HandsOn
from trimmer.commands.holding import session_of
from trimmer.commands.opening import opened
from trimmer.reports import Advised, Conversation, Finished, Followed, Report, Word
from trimmer.screen.app import TuneApp
from trimmer.screen.options import Options

HERE = Path(__file__).parent
SEED = 3
SIZES = {"small": (80, 24), "large": (120, 40)}
PATIENCE_S = 90.0

Moment = Callable[[Report], bool]
MOMENTS: dict[str, Moment] = {
    "advice": lambda report: isinstance(report, Advised) and report.advice.turn == 2,
    "turn": lambda report: (
        isinstance(report, Followed)
        and report.word.turn == 2
        and report.word.share is not None
        and report.word.share > 0.45
    ),
    "sheet": lambda report: isinstance(report, Finished),
}


class Watched:
    """A conversation that remembers which moments have come, and holds still until seen."""

    def __init__(self, session: Conversation) -> None:
        self._session = session
        self.come: list[str] = []

    def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
        """Give the session's reports, marking the moments."""
        for report in self._session.run(stop):
            yield report
            for name, moment in MOMENTS.items():
                if name not in self.come and moment(report):
                    self.come.append(name)

    def say(self, word: Word) -> None:
        """Pass a word on."""
        self._session.say(word)


def portable(svg: str) -> str:
    """Take the fonts to fetch out of a picture: it must show without a network."""
    return re.sub(r"@font-face\s*\{[^}]*\}", "", svg)


async def shoot(size: str, options: argparse.Namespace, folder: Path) -> list[Path]:
    """Run one session at a size and write a picture at each moment."""
    made = []
    book_file = folder / f"{size}.sqlite"
    with open_book(book_file) as book, opened("bench", options) as source:
        assert source.bench is not None
        session = session_of(options, source, book, follow=True)
        with HandsOn(session, source.bench, seed=SEED) as turned:
            watched = Watched(turned)
            app: App[int] = TuneApp(watched, Options(source="bench", hand=source.bench))
            async with app.run_test(size=SIZES[size]) as pilot:
                for name in MOMENTS:
                    await _until(lambda name=name: name in watched.come)
                    await pilot.pause(0.15)
                    path = HERE / (f"{name}.svg" if size == "large" else f"{name}-{size}.svg")
                    path.write_text(portable(app.export_screenshot(title="trimmer")))
                    made.append(path)
    return made


async def _until(come: Callable[[], bool]) -> None:
    for _ in range(int(PATIENCE_S / 0.02)):
        if come():
            return
        await asyncio.sleep(0.02)
    raise SystemExit(f"the moment did not come within {PATIENCE_S:.0f} s")


def main() -> None:
    """Make all pictures."""
    options = build_parser().parse_args(["demo", "--seed", str(SEED), "--unit", "demo unit"])
    with tempfile.TemporaryDirectory() as folder:
        for size in SIZES:
            for path in asyncio.run(shoot(size, options, Path(folder))):
                print(path.relative_to(HERE.parent.parent))


if __name__ == "__main__":
    main()
