"""What a first reading shows that is not the trims' to mend."""

from dataclasses import replace

import numpy as np
import pytest

from tests.fleet.catalogue import OWN, SIMULATED, from_bench, unit
from tests.fleet.readings import Scope, reading_of
from trimmer.guidance.firsts import look_first, slewing_in
from trimmer.guidance.remainder import remainder
from trimmer.measurement.templates import bandwidth, slewing, time_symmetry


def read(parts, seed=0):
    rng = np.random.default_rng(seed)
    return reading_of(parts + 9e-5 * rng.standard_normal(28), 9e-5, np.zeros((28, 28)))


@pytest.mark.parametrize("ratio", [0.95, 0.9, 0.8, 0.7])
@pytest.mark.parametrize("slow", [0.0, 0.005])
def test_slewing_is_told_from_bandwidth_in_one_reading(ratio, slow):
    parts = slewing(ratio, 15) + slow * bandwidth(15)
    parts[2] -= 0.01  # trims that are off hide in the crest parts, not in the skew parts
    found = slewing_in(read(parts))
    assert found is not None
    assert found == pytest.approx(slewing(ratio, 15), abs=0.003)


@pytest.mark.parametrize("slow", [0.001, 0.005, 0.03])
def test_bandwidth_alone_is_not_called_slewing(slow):
    assert slewing_in(read(slow * bandwidth(15))) is None


def test_no_unit_at_rest_is_said_to_slew():
    for kind in (*OWN, *SIMULATED):
        for number in range(12):
            rng = np.random.default_rng(number)
            at = rng.uniform(0.02, 0.98, 2)
            assert slewing_in(Scope(rng).read(unit(kind, number).respond(*at))) is None


def test_a_crest_part_that_no_skew_part_vouches_for_is_not_slewing():
    parts = np.zeros(28)
    parts[2::8] = (
        0.12 / np.arange(1, 8)[: parts[2::8].size] ** 2
    )  # as a triangle's, which leans by nothing
    parts[3] = -0.0003
    assert slewing_in(read(parts)) is None


@pytest.mark.parametrize("hertz", [1000.0, 10_000.0])
def test_the_benchs_units_do_not_slew_below_the_top_of_their_range(hertz):
    for seed in (1, 2, 3):
        rng = np.random.default_rng(seed)
        source = from_bench(seed, rng, (1, 1), hertz)
        assert slewing_in(Scope(rng).read(source.respond(0.5, 0.5))) is None


def test_a_leaning_triangle_is_greeted_with_its_symmetry_and_its_share():
    first = look_first(read(0.02 * time_symmetry(15)))
    assert first.foreign is None
    assert "time symmetry first" in first.greeting
    assert "2.3 %" in first.greeting


def test_a_little_leaning_beside_much_else_is_not_the_first_thing():
    parts = 0.002 * time_symmetry(15)
    parts[2] = 0.02
    assert look_first(read(parts)).greeting == ""


def test_the_remainder_names_slewing_and_bandwidth_each_with_its_share():
    parts = slewing(0.85, 15) + 0.005 * bandwidth(15)
    causes = {c.cause: c for c in remainder(read(parts), None)}
    size = np.linalg.norm(slewing(0.85, 15))
    assert causes["slewing"].thd == pytest.approx(size, rel=0.1)
    assert causes["bandwidth"].thd == pytest.approx(0.005 * np.linalg.norm(bandwidth(15)), rel=0.5)
    assert causes["slewing"].remedy


def test_without_a_reading_there_is_no_remainder():
    assert remainder(None, None) == ()


def test_few_orders_are_enough_to_look_at():
    parts = slewing(0.8, 7)
    reading = reading_of(parts, 5e-5, np.zeros((12, 12)))
    assert slewing_in(replace(reading, orders=7)) is not None
