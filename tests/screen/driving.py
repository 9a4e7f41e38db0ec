"""Driving the application in a test: reports in, rendered rows out."""

from __future__ import annotations

import asyncio
from collections.abc import AsyncIterator, Callable
from contextlib import asynccontextmanager

from textual.pilot import Pilot

from tests.screen.scripted import Scripted
from trimmer.screen.app import TuneApp
from trimmer.screen.options import Options
from trimmer.screen.tune import TuneScreen

QUIET = Options("bench", cautions=False, bell=False)


async def until(pilot: Pilot[int], condition: Callable[[], bool], patience_s: float = 20.0) -> None:
    """Let the application run until a condition holds, and fail if it never does."""
    async with asyncio.timeout(patience_s):
        while not condition():
            await pilot.pause(0.01)
    await pilot.pause()


@asynccontextmanager
async def driven(
    session: Scripted, options: Options = QUIET, size: tuple[int, int] = (80, 24)
) -> AsyncIterator[Pilot[int]]:
    """Run the application until all reports of the script have been shown."""
    app = TuneApp(session, options)
    async with app.run_test(size=size, notifications=True) as pilot:
        await pilot.pause()
        yield pilot


async def shown(pilot: Pilot[int], session: Scripted) -> TuneScreen:
    """Wait until everything the session has said is on the screen; give the screen."""
    await until(pilot, lambda: session.said and screen_of(pilot).caught_up)
    return screen_of(pilot)


def screen_of(pilot: Pilot[int]) -> TuneScreen:
    """Find the tuning screen, whatever lies over it."""
    return next(screen for screen in pilot.app.screen_stack if isinstance(screen, TuneScreen))


def rows(pilot: Pilot[int]) -> list[str]:
    """Give the text on the screen, row by row."""
    strips = pilot.app.screen._compositor.render_strips(pilot.app.size)
    return ["".join(segment.text for segment in strip).rstrip() for strip in strips]


def text(pilot: Pilot[int]) -> str:
    """Give the text on the screen, its rows run together so that wrapped sentences are whole."""
    return " ".join(" ".join(row.split()) for row in rows(pilot))
