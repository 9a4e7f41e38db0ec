"""The fast fit against the slow, obvious one: full matrix, least squares, iterated to the end."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tests.measurement.waves import Wave, basis, parts_of, series, slow_fit
from trimmer.measurement import measure
from trimmer.measurement.fit import approach, fit, slow_line
from trimmer.measurement.kernels import dirichlet, multiples
from trimmer.measurement.model import Lines, cross_products, normal_equations
from trimmer.measurement.projection import Record, block_length, project
from trimmer.measurement.screening import record_of
from trimmer.measurement.search import coarse_fundamental

SHAPED = parts_of(k2=0.01 - 0.004j, k3=-0.02 + 0.01j, k5=0.004, k9=0.002j)


def fitted(samples: np.ndarray, orders: int):
    record = record_of(samples, 1.0)
    w, unsure = coarse_fundamental(record)
    near = approach(record, orders, w, unsure)
    return fit(record, Lines(orders, np.empty(0)), near.w), record


@pytest.mark.parametrize(
    ("count", "cycles", "orders", "parts", "sigma"),
    [
        (2000, 8.3, 64, SHAPED, 0.01),
        (500, 5.41, 30, SHAPED, 0.003),
        (3001, 40.17, 20, SHAPED, 0.02),
        (777, 3.31, 40, SHAPED, 0.001),
        (1600, 5.4, 64, series("triangle", 40), 1e-4),
        (1600, 7.7, 64, series("square", 39), 1e-3),
        (64, 3.2, 8, SHAPED, 0.002),
    ],
)
def test_block_projections_give_the_least_squares_answer_to_1e_9(
    count, cycles, orders, parts, sigma
):
    rng = np.random.default_rng(count)
    wave = Wave(parts, 2 * math.pi * cycles / count, phase=1.1, amplitude=2.5, offset=0.3)
    samples = wave.samples(count) + 2.5 * sigma * rng.standard_normal(count)
    found, record = fitted(samples, orders)
    w, parts, residual = slow_fit(samples, wave.w, orders)
    z = found.phasors[1 : orders + 1]
    k = np.arange(1, orders + 1)
    z = z * np.exp(-1j * k * np.angle(z[0])) / abs(z[0])
    assert found.converged
    assert abs(found.w - w) * count < 1e-9
    assert np.abs(z.real[1:] - parts[0::2]).max() < 1e-9
    assert np.abs(-z.imag[1:] - parts[1::2]).max() < 1e-9
    assert found.residual_power * record.scale**2 == pytest.approx(residual, rel=1e-7)


def test_a_million_samples_give_the_same_answer_as_the_matrix_of_a_few_orders():
    rng = np.random.default_rng(5)
    count = 1_000_000
    wave = Wave(parts_of(k2=0.01, k3=0.02j), 2 * math.pi * 100_000.3 / count, phase=0.4)
    samples = wave.samples(count) + 0.01 * rng.standard_normal(count)
    reading = measure(samples, 1.0, orders=3)
    w = 2 * math.pi * reading.fundamental_hz
    matrix = basis(w, count, 4)
    theta = np.linalg.solve(matrix.T @ matrix, matrix.T @ samples)
    z = theta[1::2] - 1j * theta[2::2]
    z = z * np.exp(-1j * np.arange(1, 5) * np.angle(z[0])) / abs(z[0])
    assert np.abs(z.real[1:3] - reading.crest_parts).max() < 1e-9
    assert np.abs(-z.imag[1:3] - reading.skew_parts).max() < 1e-9
    # the frequency is the one where the residual is orthogonal to the slope of the model
    n = np.arange(count) - 0.5 * (count - 1)
    k = np.arange(1, 5)
    slope = n * (matrix[:, 2::2] @ (k * -theta[1::2]) * 0)
    slope = n * (-(matrix[:, 2::2] * k) @ theta[1::2] + (matrix[:, 1::2] * k) @ theta[2::2])
    residual = samples - matrix @ theta
    step = float(slope @ residual) / float(slope @ slope)
    assert abs(step) < 1e-6 * 2 * math.pi * reading.fundamental_sigma_hz


def test_sums_over_the_record_in_closed_form_are_the_sums_over_the_record():
    count, w = 777, 0.0413
    t = np.arange(count) - 0.5 * (count - 1)
    for at in (0.0, 1e-9, 1e-7, 3e-6, 0.0413, 1.3, 3.1, 5.0):
        kernel, slope, curve = (float(v[0]) for v in dirichlet(count, np.array([at])))
        assert kernel == pytest.approx(np.cos(at * t).sum(), abs=1e-8 * count)
        assert slope == pytest.approx(-(t * np.sin(at * t)).sum(), abs=1e-8 * count**2)
        assert curve == pytest.approx(-(t * t * np.cos(at * t)).sum(), abs=1e-8 * count**3)
    table = multiples(count, w, 9)
    direct = dirichlet(count, w * np.arange(10.0))
    for a, b in zip(table, direct, strict=True):
        assert np.allclose(a, b, rtol=1e-12, atol=1e-6)


@pytest.mark.parametrize("fixed", [[], [0.003, 0.0201, 0.9]])
def test_normal_equations_are_those_of_the_full_matrix(fixed):
    count, w = 640, 0.0713
    lines = Lines(6, np.array(fixed))
    t = np.arange(count) - 0.5 * (count - 1)
    w_i = lines.frequencies(w)
    cosine, sine = np.cos(np.outer(t, w_i)), np.sin(np.outer(t, w_i))
    normal = normal_equations(count, lines, w)
    sines = sine.T @ sine
    sines[0, 0] = 1.0
    for ours, theirs in ((normal.gram[0], cosine.T @ cosine), (normal.gram[1], sines)):
        assert np.abs(ours - theirs).max() < 1e-11 * count
    k_cos, k_sin = np.random.default_rng(1).standard_normal((2, lines.count))
    derivative = t * (cosine @ k_sin - sine @ k_cos)
    products, itself = normal.with_derivative(k_cos, k_sin)
    assert np.abs(products[0] - cosine.T @ derivative).max() < 1e-11 * count**2
    assert np.abs(products[1] - sine.T @ derivative).max() < 1e-11 * count**2
    assert itself == pytest.approx(float(derivative @ derivative), rel=1e-10)
    cross = cross_products(count, np.array([0.5, 0.01]), w_i)
    assert np.allclose(cross[0], np.cos(np.outer([0.5, 0.01], t)) @ cosine, atol=1e-8)
    assert np.allclose(cross[1], np.sin(np.outer([0.5, 0.01], t)) @ sine, atol=1e-8)


@pytest.mark.parametrize("count", [17, 640, 5001, 70_001])
def test_block_sums_add_up_to_sums_over_the_record_also_a_little_beside(count):
    rng = np.random.default_rng(count)
    samples = rng.standard_normal(count)
    w = 0.0713
    lines = Lines(5, np.array([0.31]))
    record = Record(samples, 0.0, 0.0, mean=0.0, scale=1.0)
    found = project(record, lines, w)
    t = np.arange(count) - 0.5 * (count - 1)
    assert found.power == pytest.approx(float(samples @ samples))
    for near in (w, w + 1e-6 / block_length(count)):
        waves = np.exp(-1j * np.outer(t, lines.frequencies(near)))
        first, second = found.totals(near)
        assert np.abs(first - samples @ waves).max() < 1e-9 * math.sqrt(count)
        assert np.abs(second - (t * samples) @ waves).max() < 1e-5 * count**1.5
    some, _ = found.totals(w, Lines(2, lines.fixed))
    every, _ = found.totals(w)
    assert np.allclose(some, every[[0, 1, 2, 6]], rtol=1e-12)


def test_a_slow_line_is_nearly_a_parabola_so_that_a_ramp_leaves_the_parts_alone():
    count = 3000
    wave = Wave(SHAPED, 2 * math.pi * 4.4 / count, phase=2.0)
    ramp = np.linspace(-1.0, 1.0, count)
    reading = measure(wave.samples(count) + ramp, 1.0)
    assert slow_line(count) * count == pytest.approx(math.pi / 10)
    truth = np.zeros(28)
    truth[: SHAPED.size] = SHAPED
    assert np.abs(reading.parts - truth).max() < 2e-4
    assert any(flag.code == "wandering" for flag in reading.flags)
