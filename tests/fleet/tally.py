"""Figures of many trials, and the bars they are held against."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tests.fleet.catalogue import prior, unit
from tests.fleet.trials import Trial, run, tolerance

NEVER = 10_000


@dataclass(frozen=True, slots=True)
class Mode:
    """How a hand turns and what is known beforehand, with the bars that belong to it."""

    name: str
    followed: bool
    known: bool
    median: float
    """Turns until reached, median at most."""
    late: float
    """95th percentile at most."""
    done: float
    """Turns until done, median at most."""


MODES = (
    Mode("no memory, blind", followed=False, known=False, median=5, late=9, done=6),
    Mode("no memory, followed", followed=True, known=False, median=4, late=7, done=5),
    Mode("known kind, blind", followed=False, known=True, median=3, late=6, done=4),
    Mode("known kind, followed", followed=True, known=True, median=2, late=4, done=3),
)
COVERAGE = 0.93
HALF_WIDTH = 0.10


@dataclass(frozen=True, slots=True)
class Tally:
    """Figures of a set of trials."""

    trials: int
    median: float
    late: float
    done: float
    never: int
    """Trials in which THD never came within the tolerance of the best."""
    missed: int
    """Trials that ended outside the tolerance."""
    over: float
    """Final THD over the best, median."""
    runs_held: float
    """Share of runs whose last stated floor's 95 % interval holds the true one."""
    held: float
    """The same over all floors stated from the fourth turn on."""
    half_width: float
    """Median half-width of those over the floor."""

    def line(self) -> str:
        """One line of a table."""
        return (
            f"{self.median:6.1f} {self.late:6.1f} {self.done:6.1f} {self.never:6d} {self.missed:6d} "
            f"{self.over:8.3f} {100 * self.runs_held:8.1f} {100 * self.held:8.1f} "
            f"{100 * self.half_width:8.1f}"
        )


HEADING = "median    95%   done  never missed    over  runs %   held %   half %"


def tally(trials: Sequence[Trial]) -> Tally:
    """Count up trials."""
    reached = [NEVER if t.reached is None else t.reached for t in trials]
    done = [NEVER if t.done is None else t.done for t in trials]
    stated = [(f, s, t.best) for t in trials for turn, f, s in t.floors if turn >= 4]
    last = [(*t.floors[-1][1:], t.best) for t in trials if t.floors]
    return Tally(
        trials=len(trials),
        median=float(np.median(reached)),
        late=float(np.percentile(reached, 95)),
        done=float(np.median(done)),
        never=sum(t.reached is None for t in trials),
        missed=sum(t.last > tolerance(t.best) for t in trials),
        over=float(np.median([t.last / t.best for t in trials])),
        runs_held=_held(last),
        held=_held(stated),
        half_width=float(np.median([1.96 * s / b for _, s, b in stated])) if stated else 0.0,
    )


def _held(floors: Sequence[tuple[float, float, float]]) -> float:
    return float(np.mean([abs(f - b) <= 1.96 * s for f, s, b in floors])) if floors else 1.0


def trials_of(
    kind: str, mode: Mode, numbers: Sequence[int], *, feels_stop: bool = True
) -> list[Trial]:
    """Run trials of a mode on units of a kind."""
    learned = prior(kind, followed=mode.followed) if mode.known else None
    return [
        run(
            unit(kind, n, wired=mode.known),
            n,
            followed=mode.followed,
            prior=learned,
            feels_stop=feels_stop,
        )
        for n in numbers
    ]
