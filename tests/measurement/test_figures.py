"""Figures of known waves against closed forms from outside the code."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.optimize import brentq, minimize_scalar

from tests.measurement.waves import Wave, parts_of, rounded, series
from trimmer.measurement import Reading, effective_bits, measure, sinad_db, thd_of_total
from trimmer.measurement.figures import crests_of, rise_share_of, shape_at
from trimmer.measurement.thd import Disturbance, thd_of

PERIOD = 4096
"""Samples of a period where a wave is sampled, so that its aliases are far and small."""


def whole_thd(kind: str, orders: int) -> float:
    return float(np.linalg.norm(series(kind, orders)))


@pytest.mark.parametrize(
    ("kind", "all_orders", "to_ten", "to_fifteen"),
    [
        # Fourier series, any handbook: sqrt(pi^4/96 - 1), sqrt(pi^2/8 - 1), sqrt(pi^2/6 - 1)
        ("triangle", math.sqrt(math.pi**4 / 96 - 1), 0.120476503645, 0.120986),
        ("square", math.sqrt(math.pi**2 / 8 - 1), 0.428794768378, 0.449990),
        ("ramp", math.sqrt(math.pi**2 / 6 - 1), 0.741463236558, 0.761866),
    ],
)
def test_thd_of_ideal_waves(kind, all_orders, to_ten, to_fifteen):
    assert whole_thd(kind, 200_000) == pytest.approx(all_orders, abs=1e-5)
    wave = Wave(series(kind, 64), 2 * math.pi * 5.3 / 4000, phase=0.4, amplitude=3.0, offset=-1.0)
    samples = wave.samples(4000)
    assert measure(samples, 1.0, orders=10).thd.value == pytest.approx(to_ten, abs=1e-9)
    assert measure(samples, 1.0).thd.value == pytest.approx(to_fifteen, abs=6e-7)


def test_an_ideal_triangle_has_equally_pointed_crests():
    # q = pi^2/16 - (1 - 1/sqrt 2), from the triangle's values at its crest and 45 degrees beside
    exact = math.pi**2 / 16 - (1 - 1 / math.sqrt(2))
    parts = series("triangle", 4000)
    crests = crests_of(parts, np.zeros((parts.size, parts.size)))
    assert crests.upper == pytest.approx(exact, abs=2e-4)
    assert crests.lower == pytest.approx(exact, abs=2e-4)
    fifteen = crests_of(series("triangle", 15), np.zeros((28, 28)))
    assert fifteen.upper == pytest.approx(0.293067, abs=5e-7)
    assert fifteen.asymmetry == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize(
    ("share", "thd", "second"),
    [
        # Fourier series of a triangle that rises over the share d: |X_k| ~ |sin(k pi d)| / k^2
        (0.49, 0.121933409588, 0.0157053795),
        (0.48, 0.124246417165, 0.0313952598),
        (0.45, 0.139403177895, 0.0782172325),
    ],
)
def test_a_leaning_triangle_leans_in_time_only(share, thd, second):
    parts = series("triangle", 50_000, rise_share=share)
    assert np.linalg.norm(parts) == pytest.approx(thd, abs=1e-8)
    wave = Wave(parts[:126], 2 * math.pi * 6.4 / 5000, phase=2.2)
    reading = measure(wave.samples(5000), 1.0)
    assert math.hypot(*reading.parts[:2]) == pytest.approx(second, abs=1e-8)
    assert np.abs(reading.crest_parts[0::2]).max() < 1e-3 * second
    assert reading.skew_parts[0] < 0.0  # rises faster than it falls
    assert reading.rise_share < 0.5


def sampled(shape, cycles: int = 7) -> np.ndarray:
    """A shape of the phase, sampled so densely that its aliases do not matter."""
    theta = 2 * math.pi * (np.arange(cycles * PERIOD) + 0.25) / PERIOD
    return shape(theta)


@pytest.mark.parametrize(
    ("both", "top"),
    [(0.99, None), (0.95, None), (0.9, None), (None, 0.99), (None, 0.95), (None, 0.9)],
)
def test_thd_of_clipped_sines(both, top):
    # closed forms of the Fourier integrals of a clipped sine, computed independently
    known = {
        (0.99, None): 0.00286177224405,
        (0.95, None): 0.0192401387534,
        (0.9, None): 0.0421993255739,
        (None, 0.99): 0.00206616559917,
        (None, 0.95): 0.014305116828,
        (None, 0.9): 0.0321045290312,
    }[both, top]
    low, high = (-both, both) if both else (-1.0, top)
    reading = measure(sampled(lambda t: np.clip(np.sin(t), low, high)), 1.0, orders=200)
    assert reading.thd.value == pytest.approx(known, abs=3e-6)
    if top:
        second = {0.99: 0.000596072159, 0.95: 0.0065038103697, 0.9: 0.0179095382603}[top]
        assert abs(reading.parts[0]) == pytest.approx(second, abs=1e-6)
        assert reading.crests.upper < reading.crests.lower  # the upper crest is the flat one
        assert reading.crests.asymmetry < 0.0


@pytest.mark.parametrize(
    ("degrees", "thd"), [(60.0, 0.0463804088504), (62.0098768597, 0.0447055524405)]
)
def test_thd_of_trapezoids(degrees, thd):
    # Fourier series of a trapezoid that ramps from zero to its flat top within `degrees`
    ramp = math.radians(degrees)

    def shape(theta):
        quarter = np.abs(np.mod(theta + math.pi / 2, math.pi) - math.pi / 2)
        return np.sign(np.sin(theta)) * np.minimum(quarter / ramp, 1.0)

    assert measure(sampled(shape), 1.0, orders=200).thd.value == pytest.approx(thd, abs=2e-6)


def test_a_power_series_gives_the_harmonics_of_its_binomials():
    # y = s + .01 s^2 - .02 s^3 of a unit sine s: H1 = 1 - 3/4 * .02, H2 = .01 / 2, H3 = .02 / 4
    reading = measure(
        sampled(lambda t: np.sin(t) + 0.01 * np.sin(t) ** 2 - 0.02 * np.sin(t) ** 3), 1.0
    )
    assert reading.amplitude == pytest.approx(0.985, abs=1e-10)
    assert math.hypot(*reading.parts[:2]) == pytest.approx(0.005 / 0.985, abs=1e-10)
    assert math.hypot(*reading.parts[2:4]) == pytest.approx(0.005 / 0.985, abs=1e-10)
    assert reading.offset == pytest.approx(0.005, abs=1e-10)


def test_a_second_harmonic_in_step_makes_one_crest_more_pointed():
    reading = measure(sampled(lambda t: np.sin(t) + 0.01 * np.cos(2 * t)), 1.0)
    # cos 2t is -1 at both crests of sin t: it flattens the upper, points the lower
    assert reading.parts[0] == pytest.approx(-0.01, abs=1e-9)
    assert reading.crests.upper == pytest.approx(-0.01, abs=1e-9)
    assert reading.crests.lower == pytest.approx(0.01, abs=1e-9)


def test_distortion_relative_to_the_whole_wave():
    # IEC 60268-3 takes it relative to the total, IEC 61000-4-7 and IEEE 519 to the fundamental
    # (clauses from memory)
    assert thd_of_total(0.01) == pytest.approx(0.0099995000375, abs=1e-13)
    assert thd_of_total(0.1) == pytest.approx(0.099503719021, abs=1e-12)


@pytest.mark.parametrize(("bits", "sinad"), [(8, 49.98698), (10, 62.00465), (12, 74.02797)])
def test_sinad_of_an_ideal_converter(bits, sinad):
    # 65536 points, 2731 periods, phase 0.1, half a code from either end, mid-rise; computed directly.
    # IEEE Std 1241 (from memory) has 6.02059991328 N + 1.76091259056 dB for a busy signal.
    amplitude = 2.0 ** (bits - 1) - 0.5
    theta = 2 * math.pi * 2731 * np.arange(65536) / 65536 + 0.1
    reading = measure(rounded(amplitude * np.sin(theta), bits, 2.0 ** (bits - 1)), 1.0)
    assert sinad_db(reading.thd_plus_noise) == pytest.approx(sinad, abs=2e-3)
    assert effective_bits(reading.thd_plus_noise) == pytest.approx(
        (sinad - 1.76091259056) / 6.02059991328, abs=1e-3
    )


def test_thd_plus_noise_is_the_residual_of_the_one_tone_fit():
    rng = np.random.default_rng(3)
    count = 3000
    wave = Wave(parts_of(k2=0.03, k3=0.02 - 0.05j, k7=0.01), 2 * math.pi * 5.37 / count, phase=1.0)
    samples = 2.0 * wave.samples(count) + 0.02 * rng.standard_normal(count) + 0.4
    n = np.arange(count)

    def one_tone(w: float) -> float:
        matrix = np.column_stack((np.cos(w * n), np.sin(w * n), np.ones(count)))
        return float(np.linalg.lstsq(matrix, samples, rcond=None)[1][0])

    best = minimize_scalar(
        one_tone, bounds=(0.98 * wave.w, 1.02 * wave.w), method="bounded", options={"xatol": 1e-12}
    )
    reading = measure(samples, 1.0)
    expected = math.sqrt(best.fun / count) / (reading.amplitude / math.sqrt(2.0))
    assert reading.thd_plus_noise == pytest.approx(expected, rel=2e-4)


def test_rise_share_is_the_time_between_the_extremes_of_the_shape():
    parts = parts_of(k2=0.03 - 0.02j, k3=0.01j, k4=-0.01)
    share, sigma = rise_share_of(parts, np.zeros((parts.size, parts.size)))

    def slope(theta: float) -> float:
        return float(shape_at(parts, np.array([theta]), 1)[0])

    top, bottom = brentq(slope, -0.5, 0.5), brentq(slope, math.pi - 0.5, math.pi + 0.5)
    assert share == pytest.approx((top - bottom) / (2 * math.pi) % 1.0, abs=1e-9)
    assert sigma == 0.0
    eye = 1e-10 * np.eye(parts.size)
    _, sigma = rise_share_of(parts, eye)
    rng = np.random.default_rng(0)
    shares = [
        rise_share_of(parts + 1e-5 * rng.standard_normal(parts.size), eye)[0] for _ in range(2000)
    ]
    assert sigma == pytest.approx(float(np.std(shares)), rel=0.08)


def test_the_shape_is_its_series():
    parts = parts_of(k2=0.1 - 0.2j, k5=0.3j)
    theta = np.linspace(0, 7, 11)
    direct = (
        np.cos(theta) + 0.1 * np.cos(2 * theta) + 0.2 * np.sin(2 * theta) - 0.3 * np.sin(5 * theta)
    )
    assert np.allclose(shape_at(parts, theta), direct)
    step = 1e-6
    numeric = (shape_at(parts, theta + step) - shape_at(parts, theta - step)) / (2 * step)
    assert np.allclose(shape_at(parts, theta, 1), numeric, atol=1e-8)


def test_noise_alone_makes_a_thd_of_4_k_less_1_s2_over_n_a2_which_is_taken_off():
    rng = np.random.default_rng(8)
    wave = Wave(np.zeros(28), 2 * math.pi * 20.3 / 4000, amplitude=2.0)
    squares, powers = [], []
    readings: list[Reading] = []
    for _ in range(250):
        reading = measure(wave.samples(4000) + 0.05 * rng.standard_normal(4000), 1.0)
        squares.append(float(reading.parts @ reading.parts))
        powers.append(reading.noise_power)
        readings.append(reading)
    expected = 4 * 14 * 0.05**2 / (4000 * 2.0**2)
    assert np.mean(powers) == pytest.approx(expected, rel=0.01)
    assert np.mean(squares) == pytest.approx(expected, rel=0.06)
    # a null harmonic must not be reported as found (JCGM 101:2008, 9.4, from memory: the like case)
    assert np.mean([reading.thd.low == 0.0 for reading in readings]) > 0.93
    assert np.mean([reading.thd.high > 0.0 for reading in readings]) == 1.0


def test_the_mean_square_of_two_null_parts_is_twice_their_variance():
    # JCGM 101:2008, 9.4 (from memory): y = x1^2 + x2^2, both 0, u = 0.005: mean 50e-6
    u = 0.005
    rng = np.random.default_rng(1)
    parts = u * rng.standard_normal((20_000, 2))
    disturbance = Disturbance(2 * u**2)
    assert disturbance.noise_power == pytest.approx(50e-6)
    squares = (parts**2).sum(axis=1)
    assert squares.mean() == pytest.approx(disturbance.noise_power, rel=0.03)
    assert np.quantile(squares, 0.95) == pytest.approx(150e-6, rel=0.03)
    covariance = u**2 * np.eye(2)
    held = np.mean([thd_of(p, covariance, disturbance).low == 0.0 for p in parts[:2000]])
    assert held == pytest.approx(0.95, abs=0.02)
