"""The whole job on many simulated units: `python -m tests.campaigns.demo [--units 100] [--first 1000]`.

Each unit is trimmed by the demonstration's own session and hand, through its socket. Its true THD at the
end is held against its true best, found by an optimiser that sees no noise.
"""

from __future__ import annotations

import argparse
import os

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # as the command itself does

import statistics
import sys
import tempfile
from pathlib import Path

from tests.session.simulated import trimmed


def main() -> int:
    """Trim the units and print a line each, then the summary."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--units", type=int, default=100)
    parser.add_argument("--first", type=int, default=1000)
    parser.add_argument("--follow", action="store_true")
    options = parser.parse_args()
    turns, missed = [], []
    with tempfile.TemporaryDirectory() as folder:
        for seed in range(options.first, options.first + options.units):
            end = trimmed(seed, Path(folder) / "book.sqlite", follow=options.follow)
            turns.append(end.turns)
            if not end.reached:
                missed.append(seed)
            print(
                f"seed {seed}: THD {100 * end.thd:.4f} %, best {100 * end.best:.4f} %, "
                f"{end.turns} turns, {end.verdict}{'' if end.reached else '  MISSED'}",
                flush=True,
            )
    print(
        f"{len(turns)} units: median {statistics.median(turns)} turns at done, "
        f"most {max(turns)}, missed {missed or 'none'}"
    )
    return 1 if missed else 0


if __name__ == "__main__":
    sys.exit(main())
