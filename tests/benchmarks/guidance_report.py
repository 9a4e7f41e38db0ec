"""Turns to the floor beside other ways, and the time of one step of thought.

    OMP_NUM_THREADS=1 python -m tests.benchmarks.guidance_report [--trials 50] [--fleet simulator]

Same units, same hands, same noise for all. A report: it asserts nothing.
"""

from __future__ import annotations

import argparse

import numpy as np

from tests.fleet.catalogue import FLEETS, prior, unit
from tests.fleet.other_ways import WAYS, try_way
from tests.fleet.tally import MODES, NEVER, tally, trials_of
from tests.fleet.trials import Trial
from tests.guidance.play import Play
from trimmer.guidance import Guide
from trimmer.guidance.advice import Done


def line(name: str, trials: list[Trial]) -> str:
    """One line of the table; a number that is never come to is shown as such."""
    counted = tally(trials)
    figures = [
        "never" if value >= NEVER / 2 else f"{value:.1f}"
        for value in (counted.median, counted.late, counted.done)
    ]
    return (
        f"{name:40}" + "".join(f"{figure:>8}" for figure in figures)
        + f"{counted.never:8d}{counted.missed:8d}{counted.over:10.3f}"
    )  # fmt: skip


def others(kinds: tuple[str, ...], numbers: range, followed: bool) -> None:
    """Print the other ways' lines."""
    for name, way in WAYS.items():
        trials = [try_way(way, unit(k, n), n, followed=followed) for k in kinds for n in numbers]
        print(line(name, trials), flush=True)


def thought(kinds: tuple[str, ...], known: bool) -> None:
    """Print the time from a reading to its answer, and of one live reading."""
    steps: list[float] = []
    for kind in kinds:
        for number in range(5):
            guide = Guide(prior=prior(kind) if known else None)
            play = Play(unit(kind, number, wired=known), guide, seed=number, scatter=0.15)
            play.begin()
            while not isinstance(play.answer, Done):
                steps.append(play.timed_step())
    took = 1e3 * np.array(steps)
    print(
        f"  {'known kind' if known else 'no memory'}: median {np.median(took):.2f} ms, "
        f"95 % {np.percentile(took, 95):.2f} ms, longest {took.max():.2f} ms "
        f"({took.size} steps)"
    )


def main() -> None:
    """Print the report."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--trials", type=int, default=50, help="trials on each circuit")
    parser.add_argument("--fleet", choices=sorted(FLEETS), default="simulator")
    options = parser.parse_args()
    kinds, numbers = FLEETS[options.fleet], range(options.trials)
    heading = (
        f"{'':40}{'median':>8}{'95 %':>8}{'done':>8}{'never':>8}{'missed':>8}{'over best':>10}"
    )
    for followed in (False, True):
        print(f"\n{'followed' if followed else 'blind'}, turns until reached\n{heading}")
        for mode in (m for m in MODES if m.followed == followed):
            trials = [t for k in kinds for t in trials_of(k, mode, numbers)]
            print(line(f"guide, {mode.name.split(',')[0]}", trials), flush=True)
        others(kinds, numbers, followed)
    print("\nfrom reading to advice")
    for known in (False, True):
        thought(kinds, known)


if __name__ == "__main__":
    main()
