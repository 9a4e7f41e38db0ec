"""Whole sessions on the simulated unit in this process, so that its true THD can be asked at the end."""

from __future__ import annotations

import contextlib
from dataclasses import dataclass
from pathlib import Path

from drivers.bench import Bench
from trimmer.cli import build_parser
from trimmer.commands.holding import begin
from trimmer.reports import Finished


@dataclass(frozen=True, slots=True)
class Trimmed:
    """How a session ended."""

    thd: float
    """True THD at the end, ratio, no noise."""
    best: float
    """True best inside the travel, ratio."""
    turns: int
    """Turns made when it was done."""
    verdict: str
    """Verdict."""

    @property
    def reached(self) -> bool:
        """Within max(5 %, 0.02 percentage points) of the true best."""
        return self.thd <= self.best + max(0.05 * self.best, 2e-4)


def trimmed(seed: int, book: Path, *, follow: bool = False) -> Trimmed:
    """Hold the demonstration's session with its simulated hand, through its socket."""
    words = ["demo", "--hands", "auto", "--json", "--seed", str(seed), "--book", str(book)]
    options = build_parser().parse_args([*words, "--unit", f"unit {seed}"])
    with contextlib.ExitStack() as stack:
        begun = begin(options, "bench", stack, follow=follow, demo=True, hands_auto=True)
        assert isinstance(begun.hand, Bench)
        last = list(begun.session.run())[-1]
        assert isinstance(last, Finished), last
        return Trimmed(begun.hand.thd(), begun.hand.best()[0], last.done.turn, last.done.verdict)
