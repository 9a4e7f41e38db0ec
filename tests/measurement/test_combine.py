"""Several frames combined: weights, scatter, and what averaging cannot do."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from tests.measurement.waves import Wave, parts_of, rounded
from trimmer.measurement import Digitiser, Reading, combine, cut_to, frames_needed, measure

PARTS = parts_of(k2=0.004 - 0.002j, k3=-0.006 + 0.001j, k5=0.003)
TRUTH = np.concatenate((PARTS, np.zeros(28 - PARTS.size)))


def frame(rng: np.random.Generator, count: int = 2000, sigma: float = 0.005, **more) -> Reading:
    wave = Wave(PARTS, 2 * math.pi * 0.00437, phase=float(rng.uniform(0, 7)), amplitude=2.0)
    return measure(wave.samples(count) + 2.0 * sigma * rng.standard_normal(count), 1.0, **more)


def test_one_reading_is_itself_and_none_is_an_error():
    reading = frame(np.random.default_rng(0))
    assert combine([reading]) is reading
    with pytest.raises(ValueError, match="at least one"):
        combine([])


def test_sixteen_frames_are_four_times_as_good_and_their_intervals_hold():
    rng = np.random.default_rng(1)
    held, ratios, thd_held = [], [], []
    for _ in range(25):
        frames = [frame(rng) for _ in range(16)]
        whole = combine(frames)
        sigma = np.sqrt(np.diag(whole.covariance))
        held.append(np.abs(whole.parts - TRUTH) <= 1.96 * sigma)
        ratios.append(float(np.median(np.sqrt(np.diag(frames[0].covariance)) / sigma)))
        thd_held.append(whole.thd.low <= np.linalg.norm(TRUTH) <= whole.thd.high)
    assert whole.frames == 16
    assert whole.samples == 32_000
    assert whole.cycles == pytest.approx(16 * 2000 * 0.00437, rel=1e-3)
    assert np.median(ratios) == pytest.approx(4.0, rel=0.05)
    assert 0.93 < np.mean(held) < 0.97
    assert np.mean(thd_held) > 0.85


def test_frames_weigh_by_what_they_know():
    rng = np.random.default_rng(2)
    good, bad = frame(rng, sigma=0.001), frame(rng, sigma=0.1)
    whole = combine([good, bad])
    assert np.abs(whole.parts - good.parts).max() < 0.05 * np.abs(bad.parts - good.parts).max()
    assert whole.thd.sigma == pytest.approx(good.thd.sigma, rel=0.35)
    assert abs(whole.amplitude - good.amplitude) < 0.1 * abs(bad.amplitude - good.amplitude) + 1e-9


def test_scatter_beyond_what_the_frames_say_counts():
    rng = np.random.default_rng(3)
    frames = []
    for _ in range(12):
        reading = frame(rng)
        moved = reading.parts.copy()
        moved[2] += 0.002 * rng.standard_normal()  # c_3 wanders from frame to frame
        frames.append(replace(reading, parts=moved))
    sigma = np.sqrt(np.diag(combine(frames).covariance))
    assert sigma[2] == pytest.approx(0.002 / math.sqrt(12), rel=0.6)
    assert sigma[2] > 3.0 * sigma[4]


def test_what_is_common_to_all_frames_is_not_averaged_away():
    rng = np.random.default_rng(4)
    code = 4.4 / 256
    digitiser = Digitiser(8, code, nonlinearity_codes=0.3)
    frames = []
    for _ in range(20):
        wave = Wave(PARTS, 2 * math.pi * 0.00437, phase=float(rng.uniform(0, 7)), amplitude=2.0)
        noisy = wave.samples(2000) + 0.5 * code * rng.standard_normal(2000)
        frames.append(measure(rounded(noisy, 8, 2.2), 1.0, digitiser=digitiser))
    whole = combine(frames)
    assert np.allclose(whole.systematic, frames[0].systematic, rtol=0.01)
    assert whole.thd.sigma > 0.7 * math.sqrt(float(np.diag(whole.systematic)[2]))
    assert whole.random_thd_sigma < 0.4 * frames[0].random_thd_sigma


def test_readings_of_different_orders_are_compared_over_their_common_ones():
    rng = np.random.default_rng(5)
    whole = combine([frame(rng), frame(rng, orders=9), frame(rng, orders=12)])
    assert whole.orders == 9
    assert whole.parts.size == 16
    cut = cut_to(frame(rng), 5)
    assert cut.thd.value < frame(rng).thd.value * 1.2
    assert cut.noise_power == pytest.approx(frame(rng).noise_power * 8 / 28, rel=0.2)
    assert cut_to(cut, 7) is cut
    with pytest.raises(ValueError, match="at least 2"):
        cut_to(cut, 1)


def test_the_number_of_frames_still_needed_is_the_number_needed():
    rng = np.random.default_rng(6)
    taken = [frame(rng) for _ in range(4)]
    now = combine(taken)
    goal = now.thd.sigma / 2.5
    more = frames_needed(now, goal)
    assert more is not None
    assert 15 <= more <= 27  # 4 frames have to become 25
    taken += [frame(rng) for _ in range(more)]
    assert combine(taken).thd.sigma == pytest.approx(goal, rel=0.15)
    assert frames_needed(now, 1.0) == 0
    with pytest.raises(ValueError, match="positive"):
        frames_needed(now, 0.0)


def test_no_number_of_frames_beats_the_digitiser():
    rng = np.random.default_rng(7)
    reading = frame(rng, digitiser=Digitiser(8, 4.4 / 256, nonlinearity_codes=0.5))
    assert frames_needed(reading, 1e-6) is None


def test_flags_are_united_and_the_last_wins():
    rng = np.random.default_rng(8)
    samples = Wave(PARTS, 2 * math.pi * 0.00437).samples(2000) + 1e-3 * rng.standard_normal(2000)
    stale = measure(samples, 1.0, previous_samples=samples)
    whole = combine([stale, frame(rng, orders=15)])
    assert [flag.code for flag in whole.flags] == ["stale"]
