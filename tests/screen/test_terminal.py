"""The screen in a real terminal: a person at the keyboard of a tmux pane, 80x24 and 120x40."""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from uuid import uuid4

import pytest

pytestmark = [
    pytest.mark.terminal,
    pytest.mark.skipif(shutil.which("tmux") is None, reason="needs tmux"),
]
ROOT = Path(__file__).parents[2]


@dataclass
class Pane:
    """A terminal of its own with a program in it."""

    socket: str
    """Name of the tmux server's socket."""
    begun: float
    """When the program was started, monotonic seconds."""

    def tmux(self, *words: str) -> str:
        """Give tmux a command."""
        done = subprocess.run(
            ["tmux", "-L", self.socket, "-f", "/dev/null", *words],
            capture_output=True, text=True, check=True, timeout=10,
        )  # fmt: skip
        return done.stdout

    def press(self, *keys: str) -> None:
        """Press keys."""
        self.tmux("send-keys", *keys)

    def text(self) -> str:
        """Give what can be read in the pane."""
        return self.tmux("capture-pane", "-p")

    def await_text(self, words: str, patience_s: float = 15.0) -> str:
        """Wait until some words can be read."""
        end = time.monotonic() + patience_s
        while time.monotonic() < end:
            if words in (seen := self.text()):
                return seen
            time.sleep(0.03)
        raise AssertionError(f"{words!r} was not seen in {patience_s} s:\n{self.text()}")

    def interrupt(self) -> None:
        """Interrupt the program from outside, by a signal."""
        shell = int(self.tmux("display-message", "-p", "#{pane_pid}"))
        children = Path(f"/proc/{shell}/task/{shell}/children").read_text().split()
        os.kill(int(children[0]), signal.SIGINT)


@pytest.fixture
def size() -> tuple[int, int]:
    """The size of the terminal."""
    return 80, 24


@pytest.fixture
def pane(size: tuple[int, int], request: pytest.FixtureRequest) -> Iterator[Pane]:
    """A pane in which the small session runs."""
    words = getattr(request, "param", "")
    pane = Pane(f"trimmer-test-{uuid4().hex[:12]}", time.monotonic())
    program = f"{sys.executable} -m tests.screen.played {words}; echo left with $?; sleep 60"
    columns, rows = (str(length) for length in size)
    pane.tmux("new-session", "-d", "-x", columns, "-y", rows, "-c", str(ROOT), f"sh -c '{program}'")
    try:
        yield pane
    finally:
        pane.tmux("kill-server")


@pytest.mark.parametrize("size", [(80, 24), (120, 40)])
def test_a_newcomer_gets_to_the_sheet_by_doing_what_the_screen_says(pane: Pane) -> None:
    pane.await_text("waits for the hand")
    assert "turn upper" in pane.text()
    pane.press(*["Right"] * 6)
    seen = pane.await_text("the screwdriver is on it")
    assert "book has 2 readings" in seen
    assert "upper trim: leave it alone" in seen
    pane.press("Down")
    pane.press(*["Left"] * 5)
    seen = pane.await_text("What is left, and what to do about it")
    assert "THD 0.440 ±0.004 %" in seen
    pane.press("Enter")
    pane.await_text("left with 0")


def test_the_wrong_trim_and_the_wrong_way_are_seen(pane: Pane) -> None:
    pane.await_text("waits for the hand")
    pane.press("Left", "Left")
    pane.await_text("back and on: the upper trim clockwise")
    pane.press("Right", "Right", "Down", "Right")
    pane.await_text("leave the lower trim, turn the upper one")
    pane.press("q")
    pane.await_text("left with 130")


def test_ctrl_c_leaves_with_130_and_gives_the_terminal_back(pane: Pane) -> None:
    pane.await_text("waits for the hand")
    pane.press("C-c")
    seen = pane.await_text("left with 130")
    assert "ended with 130 after quit" in seen
    assert "waits for" not in seen


def test_an_interrupt_from_outside_leaves_with_130(pane: Pane) -> None:
    pane.await_text("waits for the hand")
    pane.interrupt()
    assert "ended with 130 after quit" in pane.await_text("left with 130")


def test_it_follows_the_size_of_its_terminal(pane: Pane) -> None:
    pane.await_text("waits for the hand")
    for columns, rows in ((100, 30), (60, 18), (200, 60), (80, 24)):
        pane.tmux("resize-window", "-x", str(columns), "-y", str(rows))
        end = time.monotonic() + 5.0
        while time.monotonic() < end:
            lines = pane.text().splitlines()
            if len(lines) == rows and "other trim" in lines[-1] and "waits for" in lines[-2]:
                break
            time.sleep(0.05)
        else:
            raise AssertionError(pane.text())
    pane.press("q")
    pane.await_text("left with 130")


@pytest.mark.parametrize("pane", ["--real-hand"], indirect=True)
def test_on_a_real_unit_the_cautions_come_first(pane: Pane) -> None:
    pane.await_text("Mains kills.")
    pane.press("Enter")
    pane.await_text("waits for the hand")
    pane.press("q")
    pane.await_text("left with 130")


def test_the_first_paint_is_said(pane: Pane) -> None:
    """How soon is printed (`pytest -s`): under a second on an idle machine."""
    pane.await_text("waits for", patience_s=30.0)
    print(f"first paint after {time.monotonic() - pane.begun:.2f} s")
