"""Units are drawn from a netlist's nominal values, the same each time."""

from __future__ import annotations

import numpy as np
import pytest

from tests.circuits.netlist import (
    CIRCUITS,
    Unit,
    circuit,
    nominal_unit,
    number,
    render,
    toleranced_unit,
    with_values,
)


def test_a_seed_names_one_unit() -> None:
    assert toleranced_unit("few_sections", 3) == toleranced_unit("few_sections", 3)
    assert toleranced_unit("few_sections", 3) != toleranced_unit("few_sections", 4)


def test_resistors_stray_by_one_and_a_half_percent_and_are_cut_at_two_and_a_half_times_that() -> (
    None
):
    marked = circuit("ladder_junctions").nominal["r_src"]
    drawn = [toleranced_unit("ladder_junctions", seed).values["r_src"] for seed in range(600)]
    strays = np.log(np.array(drawn) / marked)
    assert 0.0125 < np.std(strays) < 0.0155  # a normal cut at 2.5 sigma has 0.955 of its spread
    assert np.max(np.abs(strays)) <= 2.5 * 0.015


def test_parts_without_a_tolerance_stay_as_marked() -> None:
    unit = toleranced_unit("pair_coupled", 5)
    assert unit.hz == 1000.0
    assert unit.values["u"] == 0.5


@pytest.mark.parametrize("name", CIRCUITS)
def test_a_rendered_unit_reads_back_as_itself(name: str) -> None:
    unit = toleranced_unit(name, 1)
    words = [
        w
        for line in render(unit).splitlines()
        if line.startswith(".param")
        for w in line.split()[1:]
    ]
    read = {key: float(value) for key, _, value in (word.partition("=") for word in words)}
    assert read == pytest.approx(dict(unit.values), rel=1e-14)


@pytest.mark.parametrize("name", CIRCUITS)
def test_every_parameter_is_used_by_the_netlist(name: str) -> None:
    made = circuit(name)
    rest = "\n".join(
        line for line in made.text.splitlines() if not line.startswith((".param", "*"))
    )
    for key in made.nominal:
        assert key in rest or key == "hz", f"{key} changes nothing"


def test_the_uneven_circuit_is_the_even_one_but_for_its_triangle() -> None:
    even, uneven = circuit("few_sections").nominal, circuit("few_sections_uneven").nominal
    assert {key for key in even if even[key] != uneven[key]} == {"tri_rise"}
    assert uneven["tri_rise"] == 0.48


def test_values_are_read_with_the_simulators_suffixes() -> None:
    assert number("2.2k") == pytest.approx(2200.0)
    assert number("10p") == pytest.approx(1e-11)
    assert number("-1.5e-3") == pytest.approx(-0.0015)
    with pytest.raises(ValueError, match="not a plain value"):
        number("12volts")


def test_an_unknown_value_cannot_be_replaced() -> None:
    unit: Unit = nominal_unit("few_sections")
    assert with_values(unit, hz=47.0).hz == 47.0
    with pytest.raises(ValueError, match="has no"):
        with_values(unit, herz=47.0)
