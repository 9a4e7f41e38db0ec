"""Whether the settled THD foretold from the first third of a warm-up holds.

Run ``nice python -m tests.campaigns.upkeep_settling [units of each sort]`` (100 by default). A warm-up
lasts until a hundredth of the drift of the parts is left; what is read in its first third is fitted. The
tests run the same code with fewer units.
"""

from __future__ import annotations

import sys
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from tests.upkeep.warmups import SORTS, Sort, WarmUnit
from trimmer.upkeep.settling import GOOD_POINTS, GOOD_SHARE, SESSION_S, Settling, settle

HALF_WIDTH_SHARE = 0.15
HALF_WIDTH_LEAST = 1e-4


@dataclass(frozen=True, slots=True)
class Foretold:
    """What one unit's first third said, and what was true."""

    sort: Sort
    """How it warms."""
    said: Settling
    """What was said."""
    true_thd: float
    """THD once settled, as this input shows it without noise."""
    to_come: float
    """THD when it was said less THD once settled, without noise."""
    minutes_left: float
    """True minutes until the parts were within what counts as settled."""

    @property
    def held(self) -> bool:
        """Whether the 95 % interval holds the truth."""
        thd = self.said.settled_thd
        return thd is not None and thd.low <= self.true_thd <= thd.high

    @property
    def half_width(self) -> float:
        """Half of the interval, ratio."""
        thd = self.said.settled_thd
        return float("inf") if thd is None else 0.5 * (thd.high - thd.low)

    @property
    def width_in_bars(self) -> float:
        """Half width over the larger of 15 % of the drift still to come and 0.01 points."""
        bar = max(HALF_WIDTH_LEAST, HALF_WIDTH_SHARE * abs(self.to_come))
        return self.half_width / bar


def foretell(unit: WarmUnit, sort: Sort, share: float = 1.0 / 3.0) -> Foretold:
    """Read a unit for the first share of its warm-up."""
    until = share * unit.warm_s()
    times, readings = unit.readings(until)
    said = settle(times, readings)
    warm = unit.true_parts(1e9)
    then = unit.true_parts(times[-1])
    true_thd = unit.settled_thd()
    good = max(GOOD_POINTS, GOOD_SHARE * true_thd)
    ahead = times[-1] + np.linspace(0.0, 7.0, 120) * unit.slow_s
    near = [
        np.linalg.norm(unit.true_parts(float(t)) - unit.true_parts(float(t) + SESSION_S)) <= good
        for t in ahead
    ]
    left = float(ahead[int(np.argmax(near))] - times[-1]) / 60.0
    return Foretold(sort, said, true_thd, float(np.linalg.norm(then) - np.linalg.norm(warm)), left)


def fleet(units: int, sorts: Iterable[Sort] = SORTS) -> list[Foretold]:
    """Foretell for so many units of each sort."""
    return [foretell(WarmUnit.drawn(seed, sort), sort) for sort in sorts for seed in range(units)]


def main() -> int:
    """Print a line for each sort and one for all."""
    units = int(sys.argv[1]) if len(sys.argv) > 1 else 100
    found = fleet(units)
    for sort in (*SORTS, "all"):
        some = [each for each in found if sort in (each.sort, "all")]
        held = 100.0 * np.mean([each.held for each in some])
        width = np.median([each.half_width for each in some])
        bars = np.median([each.width_in_bars for each in some])
        to_come = np.median([abs(each.to_come) for each in some])
        ratio = [
            (each.said.minutes_left or np.nan) / each.minutes_left
            for each in some
            if each.minutes_left > 0.0
        ]
        low, middle, high = np.nanquantile(ratio, [0.1, 0.5, 0.9])
        wrong = sum(each.said.verdict == "unsettled" for each in some)
        print(
            f"{sort:6} {len(some)} units: held {held:.1f} %, half width median "
            f"{100 * width:.4f} points ({bars:.2f} of the bar), to come {100 * to_come:.4f} points, "
            f"time left said over true {low:.2f} {middle:.2f} {high:.2f}, called unsettled {wrong}"
        )
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
