"""Makes the stored maps anew: ``python -m tests.circuits.make_maps [CIRCUIT ...]``.

About a minute on one core.
"""

# ruff: noqa: E741 - the wipers of the two trims are u and l throughout

from __future__ import annotations

import sys

import numpy as np
from numpy.typing import NDArray

from tests.circuits.frame import crest_parts, harmonics
from tests.circuits.maps import MAPS, PARTS, points
from tests.circuits.netlist import CIRCUITS, Unit, toleranced_unit
from tests.circuits.runner import Trace, simulate

POINTS = 11
"""Chebyshev points along each trim."""
SEEDS = tuple(range(10))
"""Units of each circuit."""
SAMPLES = 8192
"""Samples of the period: the kinks at the triangle's corners alias by less than 1e-7."""


def values_of(trace: Trace) -> NDArray[np.float64]:
    """Give parts and peak of a period, shape (PARTS + 1,)."""
    peak = abs(harmonics(trace.volts)[1])
    return np.append(crest_parts(trace.volts), peak)


def sample(unit: Unit) -> NDArray[np.float64]:
    """Give a unit's parts and peak at the map's points, shape (POINTS, POINTS, PARTS + 1)."""
    along = points(POINTS)
    traces = simulate(unit, [(u, l) for u in along for l in along], samples=SAMPLES)
    return np.array([values_of(trace) for trace in traces]).reshape(POINTS, POINTS, PARTS + 1)


def main(names: list[str]) -> None:
    """Write the maps of the named circuits, or of all."""
    MAPS.mkdir(exist_ok=True)
    for name in names or CIRCUITS:
        values = np.array([sample(toleranced_unit(name, seed)) for seed in SEEDS])
        np.savez_compressed(MAPS / f"{name}.npz", seeds=np.array(SEEDS), values=values)
        print(f"{name}: {len(SEEDS)} units")


if __name__ == "__main__":
    main(sys.argv[1:])
