"""Someone with a screwdriver at a simulated circuit, told what to do by the real command.

The command runs as a process of its own on a folder; this side reads its lines, turns the trims
with a hand's errors, runs the simulator and saves the next capture.
"""

from __future__ import annotations

import contextlib
import json
import os
import queue
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import IO, Any

import numpy as np

from tests.circuits.netlist import Unit
from tests.circuits.optimum import thd_at
from tests.circuits.oscilloscope import Oscilloscope

TRAVEL_TURNS = 0.75
"""The trims' whole mechanical travel, turns of the screw."""
SCATTER = 0.15
"""The hand's error, standard deviation relative to what was asked."""
SLIP_DEGREES = 1.5
"""The hand's error however small the turn, standard deviation."""
SILENCE_S = 45.0
"""Longest wait for the command's next line."""
MOST_TURNS = 40
"""A person gives up after so many turns."""

Event = dict[str, Any]


@dataclass(frozen=True, slots=True)
class Bench:
    """A circuit on the bench, as found."""

    unit: Unit
    """The circuit's unit."""
    start: tuple[float, float]
    """Wipers (u, l) at the start, 0 to 1."""
    senses: tuple[int, int] = (1, 1)
    """+1 where clockwise moves that trim's wiper up, -1 where it moves it down, 0 where neither."""
    swapped: bool = False
    """True where the person calls the second trim *upper*."""
    seed: int = 0
    """Seed of the hand and of the noise."""
    bits: int = 8
    """Bits of the captures; their noise is 0.6 of a code."""
    clean: bool = False
    """True for captures without noise and quantisation."""


@dataclass(slots=True)
class Outcome:
    """How it went."""

    done: Event | None = None
    """The command's last line, where it came to that."""
    status: int | None = None
    """Exit status of the command."""
    wipers: tuple[float, float] = (0.5, 0.5)
    """Where the trims were left."""
    thd: float = float("nan")
    """THD there, free of noise, from the simulator."""
    turns: int = 0
    """Turns made by the person."""
    stops: int = 0
    """Turns that an end stop cut short."""
    track: list[float] = field(default_factory=list)
    """THD free of noise at the start and after each turn."""
    events: list[Event] = field(default_factory=list)
    """Every line of the command."""
    messages: str = ""
    """What it said on stderr."""

    def told(self) -> str:
        """Give the course in a few lines, for a failed test."""
        course = " ".join(f"{100 * thd:.3f}" for thd in self.track)
        return f"THD % by turn: {course}\nlast: {self.events[-1:]}\nstderr: {self.messages[-800:]}"


class Hand:
    """Turns two screws, not quite as far as asked."""

    def __init__(self, bench: Bench, rng: np.random.Generator) -> None:
        self._bench = bench
        self._rng = rng
        self.wipers = list(bench.start)

    def turn(self, trim: str, sense: str, turns: float) -> bool:
        """Make a turn as asked; gives True where the trim's end stop cut it short."""
        which = (trim == "lower") != self._bench.swapped
        way = self._bench.senses[which] * (1.0 if sense == "clockwise" else -1.0)
        made = turns * (1.0 + SCATTER * self._rng.standard_normal())
        made += SLIP_DEGREES / 360.0 * self._rng.standard_normal()
        aimed = self.wipers[which] + way * made / TRAVEL_TURNS
        self.wipers[which] = min(1.0, max(0.0, aimed))
        return abs(aimed - self.wipers[which]) > 0.01


def trim_by_the_command(bench: Bench, room: Path, *more: str) -> Outcome:
    """Trim a unit as told by ``trimmer tune FOLDER --json`` until its `done` line.

    Parameters
    ----------
    bench
        The circuit and how it is found.
    room
        An empty folder for captures, book and settings.
    more
        Further arguments of the command.
    """
    captures = room / "captures"
    captures.mkdir()
    rng = np.random.default_rng([81, bench.seed])
    scope, hand = Oscilloscope(rng, bits=bench.bits, clean=bench.clean), Hand(bench, rng)
    outcome = Outcome(wipers=bench.start)

    def save() -> None:
        outcome.wipers = (hand.wipers[0], hand.wipers[1])
        outcome.track.append(thd_at(bench.unit, *outcome.wipers))
        scope.save(bench.unit, *outcome.wipers, captures / f"{len(outcome.track):03d}.csv")

    with _command(captures, room, *more) as process:
        save()
        for event in _lines(process):
            outcome.events.append(event)
            if event["event"] == "done":
                outcome.done = event
                break
            if event["event"] != "advice":
                continue
            if outcome.turns >= MOST_TURNS:
                _say(process, "quit")
                continue
            stopped = hand.turn(event["trim"], event["sense"], event["turns"])
            outcome.turns += 1
            if stopped:
                outcome.stops += 1
                _say(process, "at-stop")
                time.sleep(0.6)  # the word first: a capture alone says that the turn was made
            save()
        outcome.status = process.wait(timeout=SILENCE_S)
    outcome.messages = (room / "messages.txt").read_text(encoding="utf-8")
    outcome.thd = outcome.track[-1]
    return outcome


@contextlib.contextmanager
def _command(captures: Path, room: Path, *more: str) -> Iterator[subprocess.Popen[str]]:
    """Run the command; whatever happens here, it is ended when this is left."""
    words = [sys.executable, "-m", "trimmer", "tune", str(captures), "--json"]
    words += ["--travel", str(TRAVEL_TURNS), "--unit", "bench unit", *more]
    with (
        (room / "messages.txt").open("w", encoding="utf-8") as messages,
        subprocess.Popen(
            words,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=messages,
            text=True,
            env={**os.environ, "TRIMMER_HOME": str(room / "home"), "OMP_NUM_THREADS": "1"},
        ) as process,
    ):
        try:
            yield process
        finally:
            if process.poll() is None:
                process.kill()


def _say(process: subprocess.Popen[str], word: str) -> None:
    """Say a word on the command's stdin, if it still listens."""
    assert process.stdin is not None
    with contextlib.suppress(BrokenPipeError):
        process.stdin.write(word + "\n")
        process.stdin.flush()


def _lines(process: subprocess.Popen[str]) -> Iterator[Event]:
    """Give the command's lines as they come; an end or a long silence ends them."""
    lines: queue.SimpleQueue[str] = queue.SimpleQueue()

    def pump(stream: IO[str]) -> None:
        for line in stream:
            lines.put(line)
        lines.put("")

    assert process.stdout is not None
    threading.Thread(target=pump, args=(process.stdout,), daemon=True).start()
    while True:
        try:
            line = lines.get(timeout=SILENCE_S)
        except queue.Empty:
            process.kill()
            return
        if not line:
            return
        yield json.loads(line)
