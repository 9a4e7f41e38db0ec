"""Turns to the floor on whole fleets, held against the bars.

    OMP_NUM_THREADS=1 python -m tests.campaigns.guidance_trials [--trials 170] [--fleet simulator]

170 trials on each of six circuits are 1020 of each mode. Prints a table for each mode, then whether
the bars are met; the exit status says it too.
"""

from __future__ import annotations

import argparse
import sys

from tests.fleet.catalogue import FLEETS
from tests.fleet.tally import COVERAGE, HALF_WIDTH, HEADING, MODES, Mode, Tally, tally, trials_of
from tests.fleet.trials import Trial


def missed_bars(mode: Mode, whole: Tally) -> list[str]:
    """Name the bars that a tally does not meet."""
    bars = {
        "median": whole.median <= mode.median,
        "95th percentile": whole.late <= mode.late,
        "done": whole.done <= mode.done,
        "never reached": whole.never == 0,
        "floor's interval": whole.runs_held >= COVERAGE and whole.held >= COVERAGE,
        "its half-width": whole.half_width <= HALF_WIDTH,
    }
    return [name for name, met in bars.items() if not met]


def main() -> int:
    """Run the campaign."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--trials", type=int, default=170, help="trials on each circuit")
    parser.add_argument("--fleet", choices=sorted(FLEETS), default="simulator")
    parser.add_argument("--numb", action="store_true", help="the hand does not feel end stops")
    options = parser.parse_args()
    failed = False
    for mode in MODES:
        print(f"\n{mode.name}: {options.trials} trials on each circuit\n{'':24}{HEADING}")
        everything: list[Trial] = []
        for kind in FLEETS[options.fleet]:
            trials = trials_of(kind, mode, range(options.trials), feels_stop=not options.numb)
            everything += trials
            print(f"{kind:24}{tally(trials).line()}", flush=True)
        whole = tally(everything)
        missed = missed_bars(mode, whole)
        failed = failed or bool(missed)
        print(f"{'all':24}{whole.line()}")
        print(f"{'bars':24}{mode.median:6.1f} {mode.late:6.1f} {mode.done:6.1f} {0:6d}")
        print("all bars met" if not missed else f"NOT MET: {', '.join(missed)}", flush=True)
    return int(failed)


if __name__ == "__main__":
    sys.exit(main())
