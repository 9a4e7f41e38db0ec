"""How long the screen takes, by hand: ``python -m tests.screen.measure_frames``.

A thread puts live readings into the mailbox as a session does, 30 a second; each is timed from there
to the moment the terminal's driver has been given the frame that shows it. The terminal itself is
left out. First paint is in ``test_terminal.py``.
"""

from __future__ import annotations

import asyncio
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

import numpy as np

from tests.screen.driving import QUIET
from tests.screen.scripted import STATES, Scripted, followed
from trimmer.reports import Report
from trimmer.screen.app import TuneApp

RATE_HZ = 30.0
FRAMES = 150
_PERIOD = 437.3


@dataclass
class Stream(Scripted):
    """A session whose hand turns: live readings at an even rate, each with its share of the turn."""

    given: dict[int, float] = field(default_factory=dict)
    """When each reading was handed over, by its number, seconds."""

    def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
        """Give the script's reports, then the live readings."""
        yield from (step for step in self.script if not isinstance(step, str | float))  # type: ignore[misc]
        noise = np.random.default_rng(7)
        clean = np.cos(2 * np.pi * np.arange(4000) / _PERIOD)
        interval_s = 1.0 / (1000.02 * _PERIOD)
        for number in range(FRAMES):
            if stop():
                return
            report = followed(number / FRAMES, upper=0.1 * (1 - number / FRAMES))
            samples = clean + 0.004 * noise.normal(size=clean.size)
            self.given[number] = time.perf_counter()
            yield replace(report, waveform=samples, interval_s=interval_s)
            time.sleep(1.0 / RATE_HZ)
        self.said = True


async def measure(size: tuple[int, int]) -> None:
    """Print the delays at one size of screen."""
    session = Stream(STATES["advice"])
    app = TuneApp(session, QUIET)
    delays: list[float] = []
    seen = -1
    painted = app._display

    def display(*args: object) -> None:
        nonlocal seen
        painted(*args)  # type: ignore[arg-type]
        word = getattr(app.screen, "view", None) and app.screen.view.word  # type: ignore[attr-defined]
        if word is not None and word.share is not None:
            number = round(word.share * FRAMES)
            if number > seen:
                seen = number
                delays.append(time.perf_counter() - session.given[number])

    app._display = display  # type: ignore[method-assign]
    async with app.run_test(size=size):
        busy = time.process_time()
        begun = time.perf_counter()
        while not session.said:
            await asyncio.sleep(0.05)
        share = (time.process_time() - busy) / (time.perf_counter() - begun)
    delay = 1e3 * np.array(delays)
    rate = len(delays) / (time.perf_counter() - begun)
    print(
        f"{size[0]}x{size[1]}: {len(delays)} frames shown, {rate:.1f} a second; reading to frame "
        f"{np.median(delay):.0f} ms median, {np.percentile(delay, 95):.0f} ms 95th percentile; "
        f"{100 * share:.0f} % of one core"
    )


if __name__ == "__main__":
    for columns_rows in ((80, 24), (120, 40), (200, 60)):
        asyncio.run(measure(columns_rows))
