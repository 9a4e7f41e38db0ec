"""The parts of the text reader, one by one."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.files.axis import Print, from_times, printed
from drivers.files.cells import (
    Convention,
    last_place,
    looks_numeric,
    parse_cell,
    parse_clock,
)
from drivers.files.conventions import find_convention
from drivers.files.steps import common_step
from drivers.files.text import decode
from drivers.files.units import Unit, parse_unit, unit_in_name

POINT, COMMA = Convention(), Convention(",")


@pytest.mark.parametrize(
    ("cell", "convention", "value"),
    [
        ("1.5", POINT, 1.5),
        ("+.5", POINT, 0.5),
        ("-5.", POINT, -5.0),
        ("1E-03", POINT, 1e-3),
        ("1.0D-03", POINT, 1e-3),
        ("1.0 E-03", POINT, 1e-3),
        ("\N{MINUS SIGN}2", POINT, -2.0),
        ("1,23E-03", COMMA, 1.23e-3),
        ("1 234,5", COMMA, 1234.5),
        ("1\N{NO-BREAK SPACE}234\N{NO-BREAK SPACE}567", POINT, 1234567.0),
        ("1'234.5", POINT, 1234.5),
        ("1.234,5", Convention(",", "."), 1234.5),
        ("1,234.5", Convention(".", ","), 1234.5),
        ("12 mV", POINT, 0.012),
        ("12.5us", POINT, 12.5e-6),
        ("12.5 µs", POINT, 12.5e-6),
        ("1.5k", POINT, 1500.0),
        ("2 M", POINT, 2e6),
        ("3 m", POINT, 3e-3),
        ("1 kSa/s", POINT, 1e3),
    ],
)
def test_numbers(cell, convention, value):
    number = parse_cell(cell, convention)
    assert number is not None
    assert number.value == pytest.approx(value, rel=1e-15)


@pytest.mark.parametrize(
    "cell",
    ["1,5", "1.2.3", "1 23", "12 34.5", "0 123", "1_000", "0x10", "abc", "1.5 apples", "--1", "e5",
     "1e", "1-2", "+", "1,234,56", "10:20:30", "01.02.2024"],
)  # fmt: skip
def test_what_is_no_number_in_a_convention_with_points(cell):
    number = parse_cell(cell, POINT)
    assert number is None or math.isnan(number.value)


@pytest.mark.parametrize(
    "cell", ["", "nan", "-inf", "****", "---", "OVL", "#N/A", "1.#QNAN", "O.L"]
)
def test_overrange_is_not_a_number_and_never_zero(cell):
    number = parse_cell(cell, POINT)
    assert number is not None
    assert math.isnan(number.value)


@pytest.mark.parametrize(
    ("cells", "convention"),
    [
        (["1.5", "2.5"], POINT),
        (["1", "2"], POINT),
        (["1,5", "2,5"], COMMA),
        (["0,001", "0,002"], COMMA),
        (["1,234", "2,345"], Convention(",", doubtful=True)),
        (["1,234", "0,345"], COMMA),
        (["1.234", "345"], Convention(".", doubtful=True)),
        (["1.234", "2.345"], POINT),
        (["1.25", "345"], POINT),
        (["1,234", "2,34"], COMMA),
        (["1,234", "999"], Convention(".", ",")),
        (["1.234,5"], Convention(",", ".")),
        (["1,234.5"], Convention(".", ",")),
        (["1.234.567"], Convention(",", ".")),
        (["0.5", "1,234"], Convention(".", ",")),
        (["1.234,5", "1,234.5"], None),
        (["0,5", "0.5"], None),
        (["01.02.2024", "1,5"], COMMA),
    ],
)
def test_the_decimal_mark_is_found_from_the_numbers(cells, convention):
    assert find_convention([cells]) == convention


def test_a_column_that_counts_makes_no_thousands_of_the_next_one_s_decimals():
    assert find_convention([["0", "1", "2"], ["1,234", "0,345", "7,890"]]) == COMMA
    assert find_convention([["0", "1", "2"], ["1,234", "999", "7,890"]]) == Convention(".", ",")


@given(st.floats(-1e300, 1e300), st.sampled_from(["r", ".3e", ".6f", "g"]))
def test_every_printed_number_is_read_back_in_both_conventions(value, form):
    text = repr(value) if form == "r" else format(value, form)
    for convention, cell in ((POINT, text), (COMMA, text.replace(".", ","))):
        number = parse_cell(cell, convention)
        assert number is not None
        assert number.value == float(text)
        assert looks_numeric(cell)


@given(st.text(max_size=30))
def test_any_text_is_a_number_or_is_none(cell):
    for convention in (POINT, COMMA, Convention(",", "."), Convention(".", ",")):
        parse_cell(cell, convention)
        last_place(cell, convention)
    parse_clock(cell)
    parse_unit(cell)
    unit_in_name(cell)


@pytest.mark.parametrize(
    ("cell", "seconds"),
    [
        ("01:02:03", 3723.0),
        ("1:02:03.5", 3723.5),
        ("2024-05-01T00:00:01,25", 1.25),
        ("01.05.2024 00:00:01.000001", 1.000001),
        ("2024-05-01T00:00:01Z", 1.0),
        ("12:30", None),
        ("1.5", None),
    ],
)
def test_times_of_day(cell, seconds):
    assert parse_clock(cell) == seconds


@pytest.mark.parametrize(
    ("cell", "place", "digits"),
    [
        ("0.000001", -6, 1),
        ("1.23E-03", -5, 3),
        ("100", 0, 3),
        ("-1.50e2", 0, 3),
        ("1.25 us", -8, 3),
        ("12:00:00.25", -2, 7),
    ],
)
def test_how_finely_a_number_is_printed(cell, place, digits):
    assert last_place(cell, POINT) == (place, digits)


@pytest.mark.parametrize(
    ("word", "base", "factor"),
    [
        ("V", "V", 1.0),
        ("mV", "V", 1e-3),
        ("Volts", "V", 1.0),
        ("MILLIVOLTS", "V", 1e-3),
        ("(us)", "s", 1e-6),
        ("[\N{GREEK SMALL LETTER MU}s]", "s", 1e-6),
        ("S", "s", 1.0),
        ("MS", "s", 1e-3),
        ("seconds", "s", 1.0),
        ("msec", "s", 1e-3),
        ("min", "s", 60.0),
        ("kHz", "Hz", 1e3),
        ("MHZ", "Hz", 1e6),
        ("MSa/s", "Hz", 1e6),
        ("dBV", "dB", 1.0),
        ("counts", "code", 1.0),
    ],
)
def test_units(word, base, factor):
    unit = parse_unit(word)
    assert unit is not None
    assert unit.base == base
    assert unit.factor == pytest.approx(factor)


@pytest.mark.parametrize(
    ("name", "unit"),
    [
        ("Time (s)", Unit("s")),
        ("CH1 [mV]", Unit("V", 1e-3)),
        ("U/V", Unit("V")),
        ("t in us", Unit("s", 1e-6)),
        ("time_us", Unit("s", 1e-6)),
        ("CH1 Volts", Unit("V")),
        ("V(out) (mV)", Unit("V", 1e-3)),
        ("Channel A", None),
        ("CH1 Min", None),
        ("probe (x10)", None),
        ("", None),
    ],
)
def test_units_in_names(name, unit):
    assert unit_in_name(name) == unit


def test_an_interval_printed_coarsely_is_known_to_a_step_over_the_count():
    rng = np.random.default_rng(5)
    for _ in range(200):
        count = int(rng.integers(50, 3000))
        interval = float(10 ** rng.uniform(-7, -3))
        decimals = math.ceil(-math.log10(interval)) + int(rng.integers(-1, 3))
        start = float(rng.uniform(-1, 1) * count * interval)
        true = start + interval * np.arange(count)
        text = [f"{time:.{decimals}f}" for time in true]
        times = np.array([float(cell) for cell in text])
        if times[-1] <= times[0]:
            continue
        axis = from_times(times, printed(text, POINT), 1.0, None)
        assert abs(axis.interval_s - interval) <= 2.0 * 10.0**-decimals / (count - 1)
        if axis.times_s is not None:
            off = axis.times_s - axis.interval_s * np.arange(count)
            assert np.abs(off).max() <= 3e-3 * interval


def test_an_uneven_axis_is_handed_on_for_measurement_to_refuse():
    times = np.array([0.0, 1.0, 2.0, 3.5, 4.0, 5.0])
    axis = from_times(times, Print(-6, 7), 1.0, None)
    assert axis.times_s is not None
    np.testing.assert_array_equal(axis.times_s, times)


def test_the_stated_interval_is_taken_where_the_times_agree_with_it():
    times = np.round(1.23456789e-6 * np.arange(1000), 6)
    text = [f"{time:.6f}" for time in times]
    assert from_times(times, printed(text, POINT), 1.0, 1.23456789e-6).interval_s == 1.23456789e-6


@pytest.mark.parametrize("bits", [6, 8, 10, 12])
@pytest.mark.parametrize("decimals", [4, 5, 6])
def test_codes_are_found_in_rounded_print(bits, decimals):
    rng = np.random.default_rng(bits * 10 + decimals)
    step = 8.0 / 2**bits * rng.uniform(0.9, 1.0)
    codes = np.round(1.7 / step * np.sin(0.01 * np.arange(8000)) + rng.normal(0, 0.6, 8000))
    values = np.round(0.123 + step * codes, decimals)
    found = common_step(values)
    if step < 10 * 10.0**-decimals:
        assert found is None or found == pytest.approx(step, rel=1e-2) or found < step
    else:
        assert found == pytest.approx(step, rel=1e-3)


def test_values_that_are_no_codes_give_no_step():
    rng = np.random.default_rng(7)
    assert common_step(rng.normal(size=5000)) is None
    assert common_step(np.repeat(rng.normal(size=400), 20)) is None
    assert common_step(np.zeros(100)) is None
    assert common_step(np.full(100, np.nan)) is None
    assert common_step(np.array([])) is None


@pytest.mark.parametrize(
    ("raw", "lines"),
    [
        (b"", []),
        (b"\n\n", []),
        (b"a\r\nb\rc\nd", ["a", "b", "c", "d"]),
        (b"a\n\x1a", ["a"]),
        ("\ufeffa\n".encode(), ["a"]),
        ("a\nb".encode("utf-16"), ["a", "b"]),
        ("a\nb".encode("utf-32"), ["a", "b"]),
        (b"\xb5s\n", ["\xb5s"]),
    ],
)
def test_lines_of_text(raw, lines):
    assert decode(raw).lines == lines
