"""What the circuits show, from their maps: ``python -m tests.circuits.facts``.

Prints, for each circuit, the range over its stored units.
"""

# ruff: noqa: E741 - the wipers of the two trims are u and l throughout

from __future__ import annotations

from dataclasses import astuple, dataclass, fields

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from tests.circuits.maps import Map, load_maps
from tests.circuits.netlist import CIRCUITS


@dataclass(frozen=True, slots=True)
class Facts:
    """Figures of one unit."""

    best: float
    """Least THD inside the travel, ratio."""
    half: float
    """THD with both trims at half travel, ratio."""
    worst: float
    """THD in the worst corner, ratio."""
    angle_degrees: float
    """Angle between the two trims' columns at the best setting."""
    condition: float
    """Condition number of the two columns together."""
    skew_share: float
    """Skew part of the columns over their length, the larger of the two."""
    c2_per_percent: float
    """Size of the second crest part's change per 1 % of travel, the larger trim's, ratio."""
    c3_per_percent: float
    """The third's."""
    curvature_10: float
    """Error of a straight line after 10 % of travel, relative to the change, the larger trim's."""
    minima: int
    """Local minima of THD over the travel."""


def columns(unit: Map, u: float, l: float, step: float = 1e-3) -> NDArray[np.float64]:
    """Give the change of the parts per whole travel of each trim, shape (28, 2), inside the travel."""
    u, l = (min(1.0 - step, max(step, x)) for x in (u, l))
    first = unit.parts(u + step, l) - unit.parts(u - step, l)
    second = unit.parts(u, l + step) - unit.parts(u, l - step)
    return np.column_stack([first, second]) / (2.0 * step)


def angle_degrees(j: NDArray[np.float64]) -> float:
    """Give the angle between two columns."""
    sizes = np.linalg.norm(j, axis=0)
    return float(np.degrees(np.arccos(j[:, 0] @ j[:, 1] / np.prod(sizes))))


def local_minima(unit: Map, nodes: int = 61) -> int:
    """Count the local minima of THD over the travel.

    A narrow valley that runs aslant shows false ones between the nodes of any grid, so each node
    below its eight neighbours is followed downhill, in steps no longer than the grid's, to where
    it ends.
    """
    along = np.linspace(0.0, 1.0, nodes)
    length = np.linalg.norm(unit.grid(along, along), axis=2)
    ringed = np.pad(length, 1, constant_values=np.inf)
    shifts = [(i, j) for i in range(3) for j in range(3) if (i, j) != (1, 1)]
    lower = [length < ringed[i : i + nodes, j : j + nodes] for i, j in shifts]
    starts = along[np.argwhere(np.all(lower, axis=0))]
    ends: list[NDArray[np.float64]] = []
    for start in starts:
        end = _downhill(unit, start, 1.0 / (nodes - 1))
        if all(np.max(np.abs(end - other)) > 1e-3 for other in ends):
            ends.append(end)
    return len(ends)


def _downhill(unit: Map, start: NDArray[np.float64], step: float) -> NDArray[np.float64]:
    inwards = np.diag(np.where(start > 0.5, -step, step))
    simplex = np.vstack([start, start + inwards])
    found = minimize(  # type: ignore[no-untyped-call]
        lambda x: unit.thd(x[0], x[1]),
        start,
        method="Nelder-Mead",
        bounds=[(0.0, 1.0), (0.0, 1.0)],
        options={"initial_simplex": simplex, "xatol": 1e-6, "fatol": 1e-12, "maxiter": 1000},
    )
    return np.asarray(found.x, dtype=np.float64)


def facts(unit: Map) -> Facts:
    """Take one unit's figures."""
    best = unit.best()
    j = columns(unit, best.u, best.l)
    sizes = np.linalg.norm(j, axis=0)
    strengths = np.linalg.svd(j, compute_uv=False)
    return Facts(
        best=best.thd,
        half=unit.thd(0.5, 0.5),
        worst=max(unit.thd(u, l) for u in (0.0, 1.0) for l in (0.0, 1.0)),
        angle_degrees=angle_degrees(j),
        condition=float(strengths[0] / strengths[1]),
        skew_share=float(np.max(np.linalg.norm(j[1::2], axis=0) / sizes)),
        c2_per_percent=float(np.max(np.abs(j[0]))) / 100.0,
        c3_per_percent=float(np.max(np.abs(j[2]))) / 100.0,
        curvature_10=max(_bend(unit, best.u, best.l, j, trim, 0.1) for trim in (0, 1)),
        minima=local_minima(unit),
    )


def _bend(unit: Map, u: float, l: float, j: NDArray[np.float64], trim: int, way: float) -> float:
    """Error of the straight line after `way` of travel towards the middle, relative."""
    start = np.array([u, l])
    moved = start.copy()
    moved[trim] += way if start[trim] < 0.5 else -way
    change = unit.parts(*moved) - unit.parts(*start)
    straight = j @ (moved - start)
    return float(np.linalg.norm(change - straight) / np.linalg.norm(change))


def main() -> None:
    """Print least to greatest of each figure for each circuit."""
    names = [field.name for field in fields(Facts)]
    for circuit in CIRCUITS:
        table = np.array([astuple(facts(unit)) for unit in load_maps((circuit,))])
        print(circuit)
        for name, least, greatest in zip(names, table.min(axis=0), table.max(axis=0), strict=True):
            print(f"  {name:16} {least:10.4g} to {greatest:10.4g}")


if __name__ == "__main__":
    main()
