"""The whole job by the real command, over many simulated units: `python -m tests.campaigns.demo`.

For each seed it runs `trimmer demo --hands auto --json --seed N` in a process of its own and compares
the last reading with the unit's true best, found by an optimiser that sees no noise.
"""

from __future__ import annotations

import argparse
import json
import statistics
import sys
import tempfile

from drivers.bench import Bench
from tests.command import trimmer


def one(seed: int, home: str, *more: str) -> tuple[bool, float, float, int, str]:
    """Run one unit: whether it passed, THD at the end, true best, turns, verdict."""
    done = trimmer(
        "demo", "--hands", "auto", "--json", "--seed", str(seed), *more, TRIMMER_HOME=home
    )
    if done.returncode != 0:
        return False, float("nan"), float("nan"), 0, f"exit {done.returncode}: {done.stderr[-300:]}"
    last = json.loads(done.stdout.splitlines()[-1])
    with Bench(seed) as bench:
        best = bench.best()[0]
    passed = last["thd"] <= best + max(0.05 * best, 2e-4)
    return passed, last["thd"], best, last["turns_made"], last["verdict"]


def main() -> int:
    """Run the units and print a line each, then the summary."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--units", type=int, default=100)
    parser.add_argument("--first", type=int, default=1000)
    parser.add_argument("--follow", action="store_true")
    options = parser.parse_args()
    turns, failed = [], []
    with tempfile.TemporaryDirectory() as home:
        for seed in range(options.first, options.first + options.units):
            passed, thd, best, made, verdict = one(
                seed, home, *(["--follow"] if options.follow else [])
            )
            turns.append(made)
            if not passed:
                failed.append(seed)
            print(
                f"seed {seed}: THD {100 * thd:.4f} %, best {100 * best:.4f} %, {made} turns, "
                f"{verdict}{'' if passed else '  MISSED'}",
                flush=True,
            )
    print(
        f"{len(turns)} units: median {statistics.median(turns)} turns at done, "
        f"most {max(turns)}, missed {failed or 'none'}"
    )
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
