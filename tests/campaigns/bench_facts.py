"""What the bench's units do, over a large fleet: `python -m tests.campaigns.bench_facts`.

Prints each figure of `tests/drivers/bench/facts.py` (median, 5th and 95th percentile, extremes)
beside what is wanted, and how many units have their best setting inside the travel.
"""

from __future__ import annotations

import argparse

import numpy as np

from tests.drivers.bench.facts import FACTS, fleet

INSIDE = (0.02, 0.98)


def main() -> int:
    """Measure the fleet and print the table; 1 if a median lies outside what is allowed."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--units", type=int, default=200)
    parser.add_argument("--first", type=int, default=0)
    options = parser.parse_args()
    figures = fleet(range(options.first, options.first + options.units))
    outside = []
    print(f"{'figure':52s} {'wanted':>14s} {'median':>9s} {'5 %':>9s} {'95 %':>9s}  extremes")
    for fact in FACTS:
        values = figures[fact.name]
        median, low, high = np.percentile(values, [50, 5, 95])
        if not fact.allowed[0] <= median <= fact.allowed[1]:
            outside.append(fact.name)
        print(
            f"{fact.name:52s} {fact.aim:>14s} {median:9.4g} {low:9.4g} {high:9.4g}  "
            f"{values.min():.4g} to {values.max():.4g}"
        )
    wipers = [figures[f"wiper at the best, {half}"] for half in ("upper", "lower")]
    inside = np.all([(INSIDE[0] < w) & (w < INSIDE[1]) for w in wipers], axis=0)
    print(f"{inside.sum()} of {options.units} units have their best inside the travel")
    print(f"medians outside what is allowed: {', '.join(outside) or 'none'}")
    return 1 if outside else 0


if __name__ == "__main__":
    raise SystemExit(main())
