"""Reads files written in thousands of random combinations: `python -m tests.campaigns.files_at_random`.

Every one must be read right or refused with need. Prints what went wrong, by kind.
"""

from __future__ import annotations

import argparse
from collections import Counter

import numpy as np

from tests.drivers.files.combinations import at_random, is_doubtful, judge, written


def main() -> int:
    """Judge the files; 1 if any was read wrong or refused without need."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--files", type=int, default=20_000)
    parser.add_argument("--seed", type=int, default=1)
    options = parser.parse_args()
    rng = np.random.default_rng(options.seed)
    wrong: Counter[str] = Counter()
    doubtful = 0
    for _ in range(options.files):
        plan = at_random(rng)
        doubtful += is_doubtful(plan)
        if words := judge(plan):
            kind = " ".join(words.split()[:3])
            if not wrong[kind]:
                print(f"{words}\n  {plan}\n  {written(plan)[:200]!r}")
            wrong[kind] += 1
    print(f"{options.files} files, {doubtful} of them doubtful; wrong: {dict(wrong) or 'none'}")
    return 1 if wrong else 0


if __name__ == "__main__":
    raise SystemExit(main())
