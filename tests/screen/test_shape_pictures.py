"""The shape, its parts and its course, drawn from known values."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.screen.scripted import REACH, REST, UPPER, parts_at
from trimmer.measurement.figures import shape_at
from trimmer.screen.pictures.course import Floor, Step, course
from trimmer.screen.pictures.parts import parts_table, scale_of, signed, split
from trimmer.screen.pictures.raster import Dots
from trimmer.screen.pictures.runs import plain
from trimmer.screen.pictures.wave import Trace, drawn, magnification, period_of, wave

PARTS = parts_at(0.1, 0.03)
SIGMA = np.eye(PARTS.size) * 4e-5**2
NOTHING = np.zeros(0)


def sampled(
    parts: np.ndarray, period: float, count: int, phase: float, noise: float = 0.0
) -> np.ndarray:
    """Samples of a wave of these parts, amplitude 1.7, offset 0.3."""
    theta = 2 * np.pi * np.arange(count) / period + phase
    noisy = noise * np.random.default_rng(5).normal(size=count)
    return 1.7 * shape_at(parts, theta) + 0.3 + noisy


@pytest.mark.parametrize("phase", [0.0, 1.0, 2.5, -2.0])
def test_folding_samples_gives_back_the_shape_they_were_made_of(phase: float) -> None:
    period = period_of(Trace(PARTS, sampled(PARTS, 437.3, 4000, phase), 437.3), 64)
    assert period.folded is not None
    # A bin's mean is not the value at its middle: for order k it is smaller by sinc(k/64), and
    # the fundamental of nine periods takes up a little of what is not a whole period.
    apart = np.max(np.abs(period.folded - period.difference))
    assert apart < 0.03 * np.max(np.abs(period.difference))


def test_folding_shows_what_the_fitted_orders_cannot() -> None:
    spike = sampled(PARTS, 400.0, 4000, 0.0)
    spike[100::400] += 0.4
    period = period_of(Trace(PARTS, spike, 400.0), 64)
    assert period.folded is not None
    assert np.max(period.folded - period.difference) > 0.02


@pytest.mark.parametrize("count", [0, 100, 190])
def test_too_few_samples_are_not_folded(count: int) -> None:
    assert period_of(Trace(PARTS, sampled(PARTS, 40.0, count, 0.0), 40.0), 64).folded is None


@pytest.mark.parametrize("samples", [np.zeros(4000), np.full(4000, 2.5)])
def test_a_flat_line_is_drawn_and_divides_by_nothing(samples: np.ndarray) -> None:
    assert len(wave(Trace(PARTS, samples, 400.0), 40, 8)) == 8


def test_a_pointed_upper_crest_stands_above_the_ideal_sine() -> None:
    parts = np.zeros(28)
    parts[2] = 0.02  # c_3 > 0: both crests too pointed
    period = period_of(Trace(parts, NOTHING, 0.0), 80)
    upper, lower = np.argmax(period.ideal), np.argmin(period.ideal)
    assert period.difference[upper] > 0 > period.difference[lower]


@given(st.floats(1e-5, 0.5))
def test_the_magnified_difference_stays_in_its_room(peak: float) -> None:
    difference = peak * np.sin(np.linspace(0, 9, 50))
    assert magnification(difference) * np.max(np.abs(difference)) <= 0.55 or peak > 0.55


@pytest.mark.parametrize("dots", list(Dots))
@pytest.mark.parametrize("size", [(12, 3), (31, 6), (46, 11), (76, 18), (10, 2)])
def test_the_shape_fills_its_space(size: tuple[int, int], dots: Dots) -> None:
    width, rows = size
    lines = plain(wave(Trace(PARTS, NOTHING, 0.0), width, rows, dots))
    assert len(lines) == rows
    assert {len(line) for line in lines} == {width}


def test_a_drawn_curve_has_no_gaps() -> None:
    curve = np.sin(np.linspace(0, 6.28, 60))
    mask = drawn(curve, -1.0, 1.0, 10, Dots.BRAILLE)
    assert mask.any(axis=0).all()
    for before, after in zip(mask.T[:-1], mask.T[1:], strict=True):
        a, b = np.flatnonzero(before), np.flatnonzero(after)
        assert a.min() - 1 <= b.max()
        assert b.min() - 1 <= a.max()


def test_the_difference_has_a_scale_in_percent_where_there_is_room() -> None:
    lines = plain(wave(Trace(PARTS, NOTHING, 0.0), 46, 12))
    assert any(line.startswith("   +2 %") for line in lines)
    assert any(line.startswith("   -2 %") for line in lines)


def test_what_the_trims_reach_and_what_they_do_not_make_up_the_whole() -> None:
    value = split(PARTS, SIGMA, REACH)
    assert value.within is not None
    assert value.beyond is not None
    assert value.within**2 + value.beyond**2 == pytest.approx(float(PARTS @ PARTS))
    assert value.beyond == pytest.approx(split(REST, SIGMA, REACH).beyond, rel=1e-9)


def test_skew_parts_are_not_reached_by_trims_that_move_crest_parts_only() -> None:
    value = split(PARTS, SIGMA, REACH)
    assert value.reached is not None
    assert np.allclose(value.reached[1::2], 0.0, atol=1e-12)


def test_a_basis_of_fewer_orders_counts_for_the_common_ones() -> None:
    short = np.linalg.qr(REACH[:, :12].T)[0].T
    value = split(PARTS, SIGMA, short)
    assert value.reached is not None
    assert not value.reached[12:].any()
    assert split(UPPER[:12], SIGMA[:12, :12], short).beyond == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize("reach", [None, REACH], ids=["unknown", "known"])
@pytest.mark.parametrize("size", [(18, 3), (26, 6), (36, 9), (60, 12), (110, 18)])
def test_the_table_fills_its_space(reach: np.ndarray | None, size: tuple[int, int]) -> None:
    width, rows = size
    lines = plain(parts_table(split(PARTS, SIGMA, reach), width, rows))
    assert len(lines) == rows
    assert {len(line) for line in lines} == {width}


def test_the_table_tells_reached_from_not_reached_by_glyph() -> None:
    first = plain(parts_table(split(PARTS, SIGMA, REACH), 60, 12))[1]
    crest, skew = first[:30], first[30:]
    assert "█" in crest
    assert "▒" in skew
    assert "█" not in skew


def test_the_table_gives_the_figures_with_their_uncertainty() -> None:
    table = plain(parts_table(split(PARTS, SIGMA, REACH), 60, 12))
    assert f"{100 * PARTS[0]:+.3f}±0.004" in table[1]


def test_a_part_lost_in_its_uncertainty_is_not_shown_as_found() -> None:
    runs = signed(1.9e-4, 1e-4, 1.9e-4, 21, 0.005)
    assert "".join(run.text for run in runs).strip() == "·"


@given(st.floats(-0.005, 0.005), st.floats(-0.005, 0.005), st.integers(5, 40))
def test_a_signed_bar_keeps_to_its_width_and_its_side(
    part: float, reached: float, width: int
) -> None:
    text = "".join(run.text for run in signed(part, 1e-9, reached, width, 0.005))
    assert len(text) == width
    middle = (width - 1) // 2
    if part > 0.001 and reached > 0.001 and part > reached:
        assert text[:middle].strip() == ""
        assert text[middle + 1 :].strip() != ""


def test_the_scale_holds_the_largest_part() -> None:
    for size in (1e-4, 3e-3, 0.04, 0.9, 3.0):
        assert scale_of(split(np.array([size, 0.0]), np.zeros((2, 2)), None)) >= min(size, 1.0)


STEPS = tuple(Step(turn, thd, 1e-4) for turn, thd in enumerate((0.021, 0.016, 0.009, 0.0045)))


@pytest.mark.parametrize("size", [(14, 4), (22, 6), (40, 12), (10, 3)])
@pytest.mark.parametrize("floor", [None, Floor(0.0042, 0.0003)])
def test_the_course_fills_its_space(size: tuple[int, int], floor: Floor | None) -> None:
    width, rows = size
    lines = plain(course(STEPS, floor, width, rows))
    assert len(lines) == rows
    assert {len(line) for line in lines} == {width}


def test_the_course_runs_down_and_meets_the_floor() -> None:
    lines = plain(course(STEPS, Floor(0.0042, 0.0003), 30, 14))[1:-1]
    tops = [
        next(y for y, line in enumerate(lines) if line[6 + 4 * turn] in "█▄") for turn in range(4)
    ]
    assert tops == sorted(tops)
    assert tops[0] < tops[-1]
    band = [y for y, line in enumerate(lines) if "▒" in line]
    assert band
    assert abs(tops[-1] - band[0]) <= 1


def test_the_course_shows_the_newest_turns_when_there_is_no_room_for_all() -> None:
    many = tuple(Step(turn, 0.01, 1e-4) for turn in range(40))
    last = plain(course(many, None, 30, 8))[-1]
    assert "39" in last
    assert " 0 " not in last


def test_a_thd_of_zero_is_drawn() -> None:
    steps = (Step(0, 0.01, 1e-4), Step(1, 0.0, 1e-4))
    assert len(course(steps, Floor(0.0, 1e-4), 30, 8)) == 8
