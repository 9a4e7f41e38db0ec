"""Trials of the whole tool on simulated circuits: how a unit is found, and whether it was trimmed."""

from __future__ import annotations

import numpy as np

from tests.circuits.maps import Best
from tests.circuits.netlist import toleranced_unit, with_values
from tests.circuits.person import Bench, Outcome

FIRST_SEED = 100
"""Units from here on: the stored maps have those below."""
PAST_THE_STOP = {
    "ladder_junctions": ("rail_n", 0.8),
    "tapped_string_diodes": ("rail_p", 1.2),
    "pair_coupled": ("r_leg", 0.8),
    "few_sections": ("rail_p", 1.3),
}
"""A part so far off that the best setting lies past an end stop: its name, times its value."""


def bench_of(
    circuit: str, seed: int, *, bits: int = 8, clean: bool = False, past_the_stop: bool = False
) -> Bench:
    """Find a unit as it comes: trims anywhere in the middle 60 %, senses and labels as they are.

    Parameters
    ----------
    circuit
        Name of the netlist.
    seed
        Of unit, hand, noise and what the person calls upper.
    bits
        Of the captures.
    clean
        True for captures without noise and quantisation.
    past_the_stop
        True for a unit with a part so far off that a trim ends at its stop.
    """
    rng = np.random.default_rng([82, seed, *circuit.encode("ascii")])
    start = rng.uniform(0.2, 0.8, 2)
    senses = rng.choice([-1, 1], 2)
    unit = toleranced_unit(circuit, FIRST_SEED + seed)
    if past_the_stop:
        part, factor = PAST_THE_STOP[circuit]
        unit = with_values(unit, **{part: factor * unit.values[part]})
    return Bench(
        unit=unit,
        start=(float(start[0]), float(start[1])),
        senses=(int(senses[0]), int(senses[1])),
        swapped=bool(rng.integers(2)),
        seed=seed,
        bits=bits,
        clean=clean,
    )


def allowance(best: Best) -> float:
    """How far above the best a trimmed unit may end, ratio: 5 % of it, or 0.02 points."""
    return max(0.05 * best.thd, 0.0002)


def reached(outcome: Outcome, best: Best) -> bool:
    """Whether the unit was left as good as its trims can make it, as the simulator sees it."""
    return outcome.done is not None and outcome.thd <= best.thd + allowance(best)
