"""The breakpoints' currents, the transfer curve and the capacitance, each by another route."""

from __future__ import annotations

from dataclasses import replace

import mpmath
import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import brentq, least_squares

from drivers.bench.parts import NOMINAL, draw
from drivers.bench.shaper import Breakpoints, transfer
from drivers.bench.unit import breakpoints, crest_frame, period

ONE = Breakpoints(
    source_ohm=10e3,
    senses=np.array([1.0]),
    taps_v=np.array([1.0]),
    branches_ohm=np.array([1e3]),
    knees_v=np.array([0.15]),
    thermal_v=0.026,
)


def test_a_branch_is_a_junction_behind_a_resistor() -> None:
    # J exp((y - V - I R) / V_T) = I, with J from V_on = V_T ln(V_T / (J R)), solved by bisection.
    saturation = ONE.thermal_v / ONE.branches_ohm[0] * np.exp(-ONE.knees_v[0] / ONE.thermal_v)
    for y in (0.5, 1.0, 1.1, 1.3, 2.0):

        def surplus(current: float, y: float = y) -> float:
            return float(saturation * np.exp((y - 1.0 - 1e3 * current) / ONE.thermal_v) - current)

        current = brentq(surplus, 0.0, 0.01, xtol=1e-18)
        x, _ = ONE.input_v(np.array([y]))
        assert x[0] == pytest.approx(y + 10e3 * current, abs=1e-9)


def test_a_branch_agrees_with_the_lambert_function_of_another_library() -> None:
    # w(z) = W(exp z), by mpmath.
    for y in (0.9, 1.1, 1.2, 1.6):
        z = (y - 1.0 - 0.15) / 0.026
        omega = float(mpmath.lambertw(mpmath.exp(z)).real)
        x, _ = ONE.input_v(np.array([y]))
        assert x[0] == pytest.approx(y + 10.0 * 0.026 * omega, rel=1e-12)


def test_the_slope_is_the_curves_own() -> None:
    shaper = breakpoints(draw(1), (0.4, 0.6), 42.0)
    y = np.linspace(-2.6, 2.6, 97)
    ahead, _ = shaper.input_v(y + 1e-5)
    behind, _ = shaper.input_v(y - 1e-5)
    _, slope = shaper.input_v(y)
    np.testing.assert_allclose(slope, (ahead - behind) / 2e-5, rtol=1e-6)
    assert np.all(slope >= 1.0)


def test_the_table_spans_the_triangle_and_is_fine_enough() -> None:
    shaper = breakpoints(draw(2), (0.0, 1.0), 42.0)
    x, y, _ = transfer(shaper, -3.95, 3.95)
    assert x[0] <= -3.95 < 3.95 <= x[-1]
    assert np.all(np.diff(x) > 0.0)
    middle_x, _ = shaper.input_v(0.5 * (y[1:] + y[:-1]))
    drawn = np.interp(middle_x, x, y)
    assert np.max(np.abs(drawn - 0.5 * (y[1:] + y[:-1]))) < 1e-5


def test_the_capacitance_is_the_first_order_of_the_circuits_own_equation() -> None:
    # x = y + Rs (sum of branch currents + C dy/dt), integrated as it stands.
    hertz, amplitude, node_f = 10e3, 3.9, 25e-12
    parts = replace(NOMINAL, node_f=node_f, output=replace(NOMINAL.output, gain=1.0, unity_hz=1e12))
    shaper = breakpoints(parts, (0.55, 0.55), 42.0)
    lag = parts.source_ohm * node_f

    def triangle(t: float) -> float:
        phase = (t * hertz) % 1.0
        return amplitude * (4.0 * phase - 1.0 if phase < 0.5 else 3.0 - 4.0 * phase)

    def rate(t: float, y: np.ndarray) -> np.ndarray:
        x, _ = shaper.input_v(y)
        return (triangle(t) - x) / lag

    points = 512
    times = (1.0 + np.arange(points) / points) / hertz
    solved = solve_ivp(
        rate, (0.0, 2.0 / hertz), [-2.5], method="LSODA", t_eval=times, rtol=1e-9, atol=1e-10,
        max_step=0.002 / hertz,
    )  # fmt: skip
    exact = crest_frame(solved.y[0])
    quick = crest_frame(period(replace(parts, output=replace(parts.output, slew_v_s=1e12)),
                               (0.55, 0.55), hertz))  # fmt: skip
    assert exact[1].imag == pytest.approx(quick[1].imag, rel=0.05)
    assert exact[1].imag == pytest.approx(27e-4, rel=0.1)
    # What is left out is of second order in the lag over the period: (2 pi 0.25e-6 10e3)^2 = 2.5e-4.
    np.testing.assert_allclose(exact[:4], quick[:4], atol=2.5e-4)


SHARP_BOUND = 0.003221732
"""Least THD of an ideal triangle through four breakpoints a quarter wave, last segment free.

Closed by least-squares splines with optimised knots, two routes (computed while the list of
outside checks was made; from there)."""


def _sharp_thd(values: np.ndarray) -> tuple[float, np.ndarray]:
    """THD of all orders of the bench's shaper with sharp breakpoints, symmetric halves."""
    taps, resistors = np.cumsum(np.exp(values[:4])), np.exp(values[4:])
    shaper = Breakpoints(
        source_ohm=10e3,
        senses=np.repeat([1.0, -1.0], 4),
        taps_v=np.concatenate([taps, -taps]),
        branches_ohm=np.concatenate([resistors, resistors]),
        knees_v=np.zeros(8),
        thermal_v=1e-4,
    )
    phase = (np.arange(4096) + 0.5) / 4096
    triangle = 3.9 * np.where(phase < 0.5, 4.0 * phase - 1.0, 3.0 - 4.0 * phase)
    near = (shaper.taps_v[:, None] + np.linspace(-4e-3, 4e-3, 61)).ravel()
    y = np.sort(np.concatenate([near, [-4.0, 4.0]]))  # straight lines in between
    x, _ = shaper.input_v(y)
    wave = np.interp(triangle, x, y)
    spectrum = np.fft.rfft(wave) / wave.size
    rest = wave - 2.0 * np.real(spectrum[1] * np.exp(2j * np.pi * np.arange(wave.size) / wave.size))
    fundamental = 2.0 * abs(spectrum[1])
    return float(np.sqrt(2.0 * np.mean(rest**2)) / fundamental), rest / fundamental


def test_sharp_breakpoints_reach_the_bound_of_four_and_do_not_beat_it() -> None:
    start = np.log([0.9, 0.65, 0.5, 0.3, 60e3, 25e3, 10e3, 3e3])
    found = least_squares(lambda v: _sharp_thd(v)[1], start, jac="3-point", xtol=1e-12, ftol=1e-12)
    least, _ = _sharp_thd(found.x)
    assert least > SHARP_BOUND * (1.0 - 2e-4)  # 0.1 mV of softness, 4096 samples
    assert least < SHARP_BOUND * (1.0 + 2e-4)


def test_the_units_own_taps_made_sharp_stay_above_the_bound() -> None:
    for seed in (3, 4, 5):
        parts = replace(draw(seed), rise_share=0.5)
        for wipers in ((0.55, 0.55), (0.5, 0.6), (0.45, 0.45)):
            shaper = replace(breakpoints(parts, wipers, 42.0), thermal_v=1e-4)
            low, high = parts.offset_v - parts.triangle_v, parts.offset_v + parts.triangle_v
            y = np.linspace(-3.5, 3.5, 40001)
            x, _ = shaper.input_v(y)
            phase = (np.arange(4096) + 0.5) / 4096
            ramp = np.where(phase < 0.5, 2.0 * phase, 2.0 - 2.0 * phase)
            wave = np.interp(low + (high - low) * ramp, x, y)
            orders = np.linalg.norm(crest_frame(wave, 500))
            assert orders > SHARP_BOUND
