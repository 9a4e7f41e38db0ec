"""The bench's units do what such shapers do."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray

from drivers.bench.parts import NOMINAL, draw
from drivers.bench.unit import period, thd
from tests.drivers.bench.facts import FACTS, HZ, SIMULATED, Fact, fleet

SEEDS = range(500, 508)


@cache
def measured() -> dict[str, NDArray[np.float64]]:
    """The fleet, measured once."""
    return fleet(SEEDS)


@pytest.mark.parametrize("fact", FACTS, ids=lambda fact: fact.name)
def test_a_unit_does_what_such_shapers_do(fact: Fact) -> None:
    values = measured()[fact.name]
    low, high = fact.allowed
    median = float(np.median(values))
    assert low <= median <= high, f"median {median:.4g}, wanted {fact.aim} ({SIMULATED})"
    least, most = fact.extremes
    assert least <= values.min(), f"least {values.min():.4g}"
    assert values.max() <= most, f"most {values.max():.4g}"


@pytest.mark.parametrize("parts", [NOMINAL, draw(11), draw(12)], ids=["nominal", "11", "12"])
def test_thd_has_one_minimum_over_the_travel(parts: object) -> None:
    # Source: none of the networks simulated showed a second one.
    grid = np.linspace(0.0, 1.0, 21)
    map_of_thd = np.array([[thd(period(parts, (u, w), HZ)) for w in grid] for u in grid])  # type: ignore[arg-type]
    padded = np.pad(map_of_thd, 1, constant_values=np.inf)
    neighbours = [
        padded[1 + du : 22 + du, 1 + dw : 22 + dw]
        for du in (-1, 0, 1)
        for dw in (-1, 0, 1)
        if (du, dw) != (0, 0)
    ]
    lowest = np.all([map_of_thd < other for other in neighbours], axis=0)
    assert lowest.sum() == 1


def test_the_columns_hardly_differ_between_units_of_one_design() -> None:
    angles = measured()["angle between the columns, degrees"]
    assert np.ptp(angles) < 2.0
