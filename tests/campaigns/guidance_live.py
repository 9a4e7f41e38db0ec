"""Hands watched live: turns until reached, wrong trim and wrong way, false alarms, the lag.

    OMP_NUM_THREADS=1 python -m tests.campaigns.guidance_live [--trials 60] [--fleet simulator]

Here a turn is not made by decree: the simulated hand turns at its own speed, hears *slow* and *stop*
late, and is read ten times a second.
"""

from __future__ import annotations

import argparse
import sys

import numpy as np

from tests.fleet.catalogue import FLEETS
from tests.fleet.live import Session, err_once, watch_through
from tests.fleet.tally import MODES, NEVER

NOTICED = 0.98
FALSE = 0.01
WITHIN_S = 0.5
CLEAR = 0.03
"""Asked turns of at least this share of the travel (8 degrees of a single-turn screw)."""


def watched(kinds: tuple[str, ...], trials: int) -> bool:
    """Print how followed sessions go; True where the bars are met."""
    met = True
    for mode in (m for m in MODES if m.followed):
        sessions = [watch_through(k, n, known=mode.known) for k in kinds for n in range(trials)]
        reached = [NEVER if s.reached is None else s.reached for s in sessions]
        turns = sum(s.turns for s in sessions)
        alarms = sum(s.alarms for s in sessions)
        median, late = float(np.median(reached)), float(np.percentile(reached, 95))
        print(
            f"{mode.name}: {len(sessions)} sessions, reached after {median:.1f} ({late:.1f}) turns, "
            f"never {sum(r == NEVER for r in reached)}; done {np.median([s.turns for s in sessions]):.1f}; "
            f"false alarms {alarms} of {turns} turns; stuck {sum(s.stuck for s in sessions)}; "
            f"{_lags(sessions)}",
            flush=True,
        )
        met = met and median <= mode.median and late <= mode.late and NEVER not in reached
        met = met and alarms <= FALSE * turns
    return met


def _lags(sessions: list[Session]) -> str:
    true, learned = np.array([s.lags_s for s in sessions]).T
    return f"lag {1e3 * np.mean(true):.0f} ms true, {1e3 * np.mean(learned):.0f} ms learned"


def erring(kinds: tuple[str, ...], trials: int) -> bool:
    """Print how soon mistakes are noticed; True where the bar is met."""
    met = True
    for mistake in ("wrong-trim", "wrong-way"):
        found = [
            each
            for kind in kinds
            for known in (False, True)
            for number in range(trials)
            if (each := err_once(kind, number, mistake, known=known)) is not None
        ]
        soon = [e.noticed_s is not None and e.noticed_s <= WITHIN_S for e in found]
        clear = [s for s, e in zip(soon, found, strict=True) if e.asked >= CLEAR]
        print(
            f"{mistake}: {len(found)} trials, {100 * np.mean(soon):.1f} % within {WITHIN_S} s of the "
            f"wiper's movement; of {len(clear)} turns of {100 * CLEAR:.0f} % of the travel and more "
            f"{100 * np.mean(clear):.1f} %",
            flush=True,
        )
        met = met and float(np.mean(clear)) >= NOTICED
    return met


def main() -> int:
    """Run the campaign."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--trials", type=int, default=60, help="sessions on each circuit")
    parser.add_argument("--fleet", choices=sorted(FLEETS), default="simulator")
    options = parser.parse_args()
    kinds = FLEETS[options.fleet]
    met = [watched(kinds, options.trials), erring(kinds, options.trials)]
    print("all bars met" if all(met) else "NOT MET")
    return int(not all(met))


if __name__ == "__main__":
    sys.exit(main())
