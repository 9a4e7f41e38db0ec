"""The least distortion a circuit can reach, found on the simulator itself.

A coarse grid over the travel of both trims, then the simplex method of Nelder and Mead from its
best node, begun afresh from where it ended for as long as that gains: a simplex pressed flat
against an end stop no longer moves along it. No derivative, no model of the circuit, no noise.
What the guidance is judged by.
"""

# ruff: noqa: E741 - the wipers of the two trims are u and l throughout

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from tests.circuits.frame import crest_parts, thd
from tests.circuits.maps import Best
from tests.circuits.netlist import Unit
from tests.circuits.runner import simulate

GRID = 7
"""Positions of each trim on the coarse grid."""
WORTH = 1e-5
"""A fresh start that gains less THD than this was the last."""


def thd_at(unit: Unit, u: float, l: float) -> float:
    """Simulate one setting and give its THD, orders 2 to 15, free of noise."""
    return thd(crest_parts(simulate(unit, [(u, l)])[0].volts))


def optimum(unit: Unit) -> Best:
    """Find the least THD inside the travel of both trims."""
    along = np.linspace(0.0, 1.0, GRID)
    nodes = [(u, l) for u in along for l in along]
    coarse = [thd(crest_parts(trace.volts)) for trace in simulate(unit, nodes)]
    found = Best(*nodes[int(np.argmin(coarse))], min(coarse))
    for size in (0.5 / GRID, 0.02, 0.04, 0.02, 0.04, 0.02, 0.04):
        better = _simplex(unit, found, size)
        gained = found.thd - better.thd
        found = better if gained > 0.0 else found
        if gained < WORTH and size != 0.5 / GRID:
            break
    return found


def _simplex(unit: Unit, begin: Best, size: float) -> Best:
    start = np.array([begin.u, begin.l])

    def length(x: NDArray[np.float64]) -> float:
        return thd_at(unit, float(x[0]), float(x[1]))

    found = minimize(  # type: ignore[no-untyped-call]
        length,
        start,
        method="Nelder-Mead",
        bounds=[(0.0, 1.0), (0.0, 1.0)],
        options={
            "initial_simplex": start + size * _towards_centre(start),
            "xatol": 1e-4,
            "fatol": 1e-6,
            "maxfev": 200,
        },
    )
    if not found.success:
        raise RuntimeError(f"{unit.name}: {found.message}")
    return Best(float(found.x[0]), float(found.x[1]), float(found.fun))


def _towards_centre(start: NDArray[np.float64]) -> NDArray[np.float64]:
    """Directions of a first simplex that stays inside the travel, shape (3, 2)."""
    return np.vstack([np.zeros(2), np.diag(np.where(start > 0.5, -1.0, 1.0))])
