"""Causes that the trims do not reach, told apart, with their shares."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tests.measurement.waves import Wave, series
from trimmer.measurement import Reading, Remainder, diagnose, measure
from trimmer.measurement.templates import SLOWEST, bandwidth, slewing, time_symmetry

KNOWN = 40
REACH = np.zeros((28, 2))
REACH[0, 0] = REACH[2, 1] = 1.0
"""Trims that move c_2 and c_3 and nothing else, invented."""


def seen(
    f: float = 1003.0,
    *,
    slew: float | None = None,
    lean: float = 0.0,
    slow: float = 0.0,
    crest: dict[int, float] | None = None,
    hum: float = 0.0,
    noise: float = 0.002,
    clip: tuple[float, float] | None = None,
    cut_noise: bool = False,
    amplitude: float = 2.5,
    interval: float = 1e-6,
) -> Reading:
    """A reading of a wave with chosen faults; `slow` is ``-s_3`` at 1 kHz."""
    parts = lean * time_symmetry(KNOWN) + slow * f / 1000.0 * bandwidth(KNOWN)
    if slew is not None:
        parts = parts + slewing(slew, KNOWN)
    for k, value in (crest or {}).items():
        parts[2 * k - 4] += value
    count = 20_000
    n = np.arange(count)
    x = Wave(parts, 2 * math.pi * f * interval, phase=1.0).samples(count)
    dither = noise * np.random.default_rng(5).standard_normal(count)
    if clip and not cut_noise:
        x = np.clip(x, *clip)
    x = x + dither
    if clip and cut_noise:
        x = np.clip(x, *clip)
    x = x + hum * np.cos(2 * math.pi * 50 * interval * n)
    return measure(amplitude * x, interval)


def told(*readings: Reading, **more) -> dict[str, Remainder]:
    found = diagnose(readings, **more)
    assert list(found) == sorted(found, key=lambda item: -item.thd)
    assert all(item.remedy.endswith(".") and item.thd > 0 for item in found)
    return {item.cause: item for item in found}


def test_a_clean_wave_has_no_cause_but_noise():
    assert set(told(seen())) <= {"noise"}
    assert told(seen(noise=0.05))["noise"].thd == pytest.approx(
        math.sqrt(4 * 14 * 0.05**2 / 20_000), rel=0.05
    )
    with pytest.raises(ValueError, match="at least one"):
        diagnose([])


def test_unequal_rise_and_fall_are_time_symmetry():
    # s_2 = 1.132 delta; 49/51 sets a floor of some 1.13 % for any near-sine
    item = told(seen(lean=-0.01))["time-symmetry"]
    assert item.thd == pytest.approx(0.01 * np.linalg.norm(time_symmetry(15)), rel=0.02)
    assert item.thd_sigma < 0.1 * item.thd
    assert set(told(seen(lean=-0.01))) == {"time-symmetry"}


def test_a_leaning_triangle_through_an_ideal_shaper_has_the_closed_form():
    """The bent time axis itself: a sine shaper fed by a triangle that rises over the share d."""
    delta = 0.004
    theta = 2 * math.pi * (np.arange(8192) + 0.5) / 8192
    u = theta / (2 * math.pi)
    d = 0.5 + delta
    triangle = np.where(u < d, 2 * u / d - 1, 1 - 2 * (u - d) / (1 - d))
    wave = np.sin(0.5 * math.pi * triangle)
    reading = measure(np.tile(wave, 5), 1.0, orders=8)
    expected = delta * time_symmetry(8)
    assert np.abs(np.abs(reading.parts) - np.abs(expected)).max() < 4 * delta**2
    assert np.sign(reading.parts[1]) == np.sign(expected[1])
    assert reading.rise_share == pytest.approx(d, abs=5e-4)
    assert expected[1] == pytest.approx(1.132 * delta, rel=1e-3)


def test_a_slow_node_is_bandwidth():
    item = told(seen(slow=0.003))["bandwidth"]
    assert item.thd == pytest.approx(0.003 * np.linalg.norm(bandwidth(15)), rel=0.03)


def test_a_slow_node_by_its_own_equation_has_the_closed_form():
    """``-R C (dy/dx)^2 dx/dt`` with ``y = sin x`` and a triangular ``x``: cos |cos|."""
    theta = 2 * math.pi * np.arange(1 << 14) / (1 << 14)
    lag = 1e-3
    wave = np.sin(theta) - lag * np.cos(theta) * np.abs(np.cos(theta))
    reading = measure(np.tile(wave, 3), 1.0, orders=9)
    expected = lag * 8 / (15 * math.pi) * bandwidth(9)
    assert np.abs(reading.parts - expected).max() < 2e-6
    assert reading.parts[3] < 0.0


@pytest.mark.parametrize(("ratio", "c_3", "s_3"), [(0.9, 0.018, -0.011), (0.8, 0.059, -0.012)])
def test_an_ideal_slew_limiter(ratio, c_3, s_3):
    parts = slewing(ratio, 15)
    assert parts[2] == pytest.approx(c_3, abs=6e-4)
    assert parts[3] == pytest.approx(s_3, abs=6e-4)
    # and by letting a limiter follow the sine step by step
    steps = 40_000
    theta = 2 * math.pi * np.arange(3 * steps) / steps
    target = np.cos(theta)
    most = ratio * 2 * math.pi / steps
    y, out = 1.0, np.empty(theta.size)
    for i, wanted in enumerate(target):
        y += min(most, max(-most, wanted - y))
        out[i] = y
    followed = measure(np.tile(out[-steps:], 3)[::4], 1.0)
    assert np.abs(followed.parts - parts).max() < 5e-4


def test_no_limit_no_slewing_and_below_the_least_rate_a_triangle():
    assert not slewing(1.0, 9).any()
    assert np.abs(slewing(0.3, 9) - series("triangle", 9)).max() < 1e-4
    assert pytest.approx(0.5370, abs=1e-4) == SLOWEST


@pytest.mark.parametrize("ratio", [0.92, 0.85, 0.75])
def test_slewing_is_told_from_bandwidth_by_its_shape_alone(ratio):
    item = told(seen(18_003.0, slew=ratio))["slewing"]
    assert item.thd == pytest.approx(float(np.linalg.norm(slewing(ratio, 15))), rel=0.1)


def test_slewing_is_told_from_bandwidth_by_its_growth_even_where_the_trims_mask_it():
    mask = {3: -0.03}
    slow = [seen(f, slow=2e-4, crest=mask) for f in (1003.0, 6011.0)]
    fast = seen(18_003.0, slew=0.87, slow=2e-4, crest=mask)
    found = told(*slow, fast, reach=REACH)
    assert found["slewing"].thd == pytest.approx(float(np.linalg.norm(slewing(0.87, 15))), rel=0.15)
    assert found["bandwidth"].thd == pytest.approx(18 * 2e-4, rel=0.4)


def test_bandwidth_grows_with_frequency_and_stays_bandwidth():
    readings = [seen(f, slow=3e-4, crest={3: 0.01}) for f in (1003.0, 6011.0, 18_003.0)]
    found = told(*readings, reach=REACH)
    assert found["bandwidth"].thd == pytest.approx(18 * 3e-4, rel=0.05)
    assert "slewing" not in found
    again = told(*readings[::-1], reach=REACH)  # now the slow one is the last
    assert again["bandwidth"].thd == pytest.approx(3e-4, rel=0.2)


def test_what_the_trims_reach_is_left_to_them_and_the_rest_of_the_crest_is_the_shapers():
    reading = seen(crest={2: 0.01, 3: -0.02, 5: 0.004, 7: 0.003})
    assert told(reading, reach=REACH)["shaper"].thd == pytest.approx(0.005, rel=0.03)
    assert "shaper" not in told(reading)
    short = told(reading, reach=REACH[:6])
    assert short["shaper"].thd == pytest.approx(0.005, rel=0.03)
    assert "shaper" not in told(reading, reach=np.zeros((28, 0)))


def test_a_reach_that_is_not_orthonormal_is_made_so():
    reading = seen(crest={2: 0.01, 3: -0.02, 5: 0.004})
    skewed = REACH @ np.array([[3.0, 1.0], [0.0, 0.2]])
    assert told(reading, reach=skewed)["shaper"].thd == pytest.approx(
        told(reading, reach=REACH)["shaper"].thd, rel=1e-6
    )


def test_shares_add_up_to_what_is_left():
    reading = seen(lean=0.004, slow=0.002, crest={2: 0.02, 5: 0.003})
    found = told(reading, reach=REACH)
    left = reading.parts - REACH @ (REACH.T @ reading.parts)
    total = math.sqrt(sum(found[c].thd ** 2 for c in ("time-symmetry", "bandwidth", "shaper")))
    assert total == pytest.approx(float(np.linalg.norm(left)), rel=0.03)


def test_hum_is_named_with_its_size():
    assert told(seen(interval=5e-6, hum=0.01))["hum"].thd == pytest.approx(0.01, rel=0.05)


def test_crests_cut_in_the_unit_and_in_the_digitiser_are_told_apart():
    unit = told(seen(clip=(-1.1, 0.9)))
    assert "clipping-in-unit" in unit
    assert "clipping-in-digitiser" not in unit
    digitiser = told(seen(clip=(-0.95, 0.9), cut_noise=True))
    assert "clipping-in-digitiser" in digitiser
    assert "clipping-in-unit" not in digitiser


def test_both_crests_flat_and_a_lower_amplitude_mean_the_supply():
    flat = seen(clip=(-0.93, 0.93))
    assert "supply" in told(flat, usual_amplitude=2.8)
    assert "supply" in told(seen(amplitude=3.0), flat)
    assert "clipping-in-unit" in told(flat, usual_amplitude=2.4)
    assert "supply" not in told(seen(clip=(-1.1, 0.9)), usual_amplitude=2.8)


def test_flat_crests_within_what_a_trim_does_are_left_to_the_trims():
    for crest in ({3: 0.03, 2: 0.01}, {3: -0.04}, {2: -0.03, 3: -0.02, 4: 0.01}):
        reading = seen(crest=crest)
        assert not {"clipping-in-unit", "supply"} & set(told(reading))
    assert max(reading.extra["flat_upper"], reading.extra["flat_lower"]) > 1.05
