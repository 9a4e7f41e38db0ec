"""What is refused and what is flagged: each with a code, a sentence and a remedy."""

from __future__ import annotations

import math
import warnings

import numpy as np
import pytest

from tests.measurement.waves import Wave, parts_of, rounded
from tests.measurement.wild import attempt, wild_call
from trimmer.measurement import Digitiser, MeasurementError, digest, measure

COUNT = 4000
MICRO = 1e-6
PLAIN = Wave(parts_of(k2=0.01, k3=0.02j), 2 * math.pi * 8.37 / COUNT, phase=0.3)


def noisy(sigma: float = 1e-3, wave: Wave = PLAIN, count: int = COUNT) -> np.ndarray:
    return wave.samples(count) + sigma * np.random.default_rng(4).standard_normal(count)


def sine(cycles: float, count: int = COUNT) -> np.ndarray:
    return np.sin(2 * math.pi * cycles * np.arange(count) / count + 0.2)


def hole(samples: np.ndarray, value: float) -> np.ndarray:
    samples = samples.copy()
    samples[17] = value
    return samples


@pytest.mark.parametrize(
    ("code", "samples", "interval_s", "more"),
    [
        ("no-signal", np.zeros(COUNT), MICRO, {}),
        ("no-signal", np.full(COUNT, 3.3), MICRO, {}),
        ("no-signal", np.random.default_rng(1).standard_normal(COUNT), MICRO, {}),
        ("no-signal", np.linspace(0, 1, COUNT), MICRO, {}),
        ("no-signal", np.sin(np.arange(COUNT)) * 5e-324, MICRO, {}),
        ("too-few-cycles", sine(2.4), MICRO, {}),
        ("too-few-cycles", np.empty(0), MICRO, {}),
        ("too-few-cycles", np.array([1.0, -1.0]), MICRO, {}),
        ("too-few-orders", sine(0.2 * COUNT), MICRO, {}),
        ("too-few-orders", sine(8.3), MICRO, {"orders": 2}),
        ("too-many-orders", sine(8.3), MICRO, {"orders": 1000}),
        ("clipped", np.clip(1.2 * sine(8.3), -1, 1), MICRO,
         {"digitiser": Digitiser(8, 2 / 255, -1.0, 1.0)}),
        ("clipped", sine(8.3), MICRO, {"digitiser": Digitiser(clipped=9)}),
        ("clipped", rounded(1.3 * noisy(0.02), 8, 1.0), MICRO, {}),
        ("not-a-number", hole(sine(8.3), math.nan), MICRO, {}),
        ("not-a-number", hole(sine(8.3), math.inf), MICRO, {}),
        ("not-a-number", 1e300 * sine(8.3), MICRO, {}),
        ("not-a-number", np.zeros((4, 4)), MICRO, {}),
        ("not-a-number", ["a", "b"], MICRO, {}),
        ("not-a-number", sine(8.3) + 1j, MICRO, {}),
        ("uneven-time", sine(8.3), 0.0, {}),
        ("uneven-time", sine(8.3), math.nan, {}),
        ("uneven-time", sine(8.3), -1.0, {}),
        ("uneven-time", sine(8.3), MICRO, {"times_s": np.cumsum(np.tile([1e-6, 1.5e-6], 2000))}),
        ("uneven-time", sine(8.3), MICRO, {"times_s": hole(MICRO * np.arange(COUNT), 1.0)}),
        ("uneven-time", sine(8.3), MICRO, {"times_s": MICRO * np.arange(COUNT - 1)}),
        ("uneven-time", sine(8.3), MICRO, {"times_s": 2 * MICRO * np.arange(COUNT)}),
        ("uneven-time", sine(8.3), MICRO, {"times_s": hole(MICRO * np.arange(COUNT), math.nan)}),
        ("uneven-time", sine(8.3), MICRO, {"times_s": np.zeros(COUNT)}),
    ],
)  # fmt: skip
def test_a_record_that_cannot_answer_is_refused_with_a_remedy(code, samples, interval_s, more):
    with pytest.raises(MeasurementError) as refused:
        measure(samples, interval_s, **more)
    assert refused.value.code == code
    assert len(str(refused.value)) > 20
    assert refused.value.remedy.endswith(".")


def codes(*args, **more) -> dict[str, str]:
    flags = measure(*args, **more).flags
    assert all(len(flag.message) > 20 and flag.remedy.endswith(".") for flag in flags)
    return {flag.code: flag.message for flag in flags}


def test_a_plain_record_is_not_flagged():
    assert codes(noisy(), MICRO) == {}


def test_few_codes_are_flagged_whether_stated_or_seen():
    coarse = rounded(noisy(0.004), 5, 1.5)
    assert "few-codes" in codes(coarse, MICRO)
    assert "few-codes" in codes(coarse, MICRO, digitiser=Digitiser(5, 3.0 / 32))
    assert "few-codes" not in codes(rounded(noisy(0.004), 8, 1.1), MICRO)


def test_hum_is_flagged_and_does_not_leak_into_the_parts():
    interval = 2e-5
    wave = Wave(PLAIN.parts, 2 * math.pi * 1003.7 * interval)
    n = np.arange(COUNT)
    clean = noisy(1e-4, wave)
    for mains in (50.0, 60.05):
        hum = 0.01 * np.cos(2 * math.pi * mains * interval * n + 1)
        reading = measure(clean + hum, interval)
        assert any(flag.code == "hum" for flag in reading.flags)
        assert reading.extra["hum_ratio"] == pytest.approx(0.01, rel=0.05)
        assert reading.extra["mains_hz"] == round(mains, 0)
        assert abs(reading.thd.value - wave.thd) < 1e-4
    beside = wave.samples(COUNT) * (1 + 0.004 * np.cos(2 * math.pi * 100 * interval * n))
    found = measure(beside + clean - wave.samples(COUNT), interval, mains_hz=50.0)
    assert any("beside the fundamental" in flag.message for flag in found.flags)
    assert found.extra["sideband_ratio"] == pytest.approx(0.004 / math.sqrt(2), rel=0.1)
    assert "hum" not in codes(clean, interval)


def test_half_a_period_of_hum_is_told_as_a_wandering_offset():
    n = np.arange(COUNT)
    hum = 0.02 * np.cos(2 * math.pi * 50 * 2.5e-6 * n)
    wave = Wave(PLAIN.parts, 2 * math.pi * 2003.7 * 2.5e-6)
    reading = measure(noisy(1e-4, wave) + hum, 2.5e-6)
    assert any(flag.code == "wandering" for flag in reading.flags)
    assert abs(reading.thd.value - wave.thd) < 1e-4


def test_a_drifting_frequency_is_flagged():
    n = np.arange(COUNT)
    theta = PLAIN.w * n + 0.06 * (n / COUNT - 0.5) ** 2 * 4
    drifting = np.cos(theta) + 1e-3 * np.random.default_rng(2).standard_normal(COUNT)
    assert "drifting" in codes(drifting, MICRO)
    assert "parts in a million" in codes(drifting, MICRO)["drifting"]


def test_a_stale_frame_is_flagged_by_its_samples_or_by_its_digest():
    samples = noisy()
    assert "stale" in codes(samples, MICRO, previous_samples=samples.copy())
    assert "stale" in codes(samples, MICRO, previous_samples=digest(samples))
    assert "stale" not in codes(samples, MICRO, previous_samples=samples[::-1])
    assert "stale" not in codes(samples, MICRO, previous_samples=samples[:-1])
    assert "stale" not in codes(samples, MICRO, previous_samples=digest(samples + 1e-9))


def test_thd_at_the_digitisers_own_floor_is_flagged():
    clean = noisy(0.005, Wave(np.zeros(28), PLAIN.w))
    bad = Digitiser(8, 2.2 / 256, nonlinearity_codes=0.5)
    assert "chain-floor" in codes(rounded(clean, 8, 1.1), MICRO, digitiser=bad)
    assert "chain-floor" not in codes(rounded(noisy(0.005), 8, 1.1), MICRO, digitiser=bad)


def test_ac_coupling_near_the_fundamental_is_flagged():
    wave = Wave(np.zeros(28), 2 * math.pi * 8.4 / COUNT)
    sound = Digitiser(16, ac_coupled=True)
    assert "ac-coupled" in codes(noisy(1e-3, wave), 1 / 8000, digitiser=sound)
    assert "ac-coupled" not in codes(noisy(1e-3, wave), 1 / 192_000, digitiser=sound)


def test_orders_cut_by_the_sample_rate_are_flagged_and_aliases_not_counted():
    wave = Wave(parts_of(k2=0.01, k3=0.02, k4=0.01, k9=0.05), 2 * math.pi * 0.0987)
    reading = measure(wave.samples(COUNT), MICRO)
    assert any(flag.code == "orders-cut" for flag in reading.flags)
    assert reading.orders == 4 == int(0.45 / 0.0987)
    assert reading.thd.value == pytest.approx(math.sqrt(0.01**2 + 0.02**2 + 0.01**2), rel=0.02)


def test_a_top_without_noise_is_told_from_one_with():
    clipped = np.minimum(noisy(0.01), 0.9)
    assert "at the top: cut off in the digitiser" in codes(clipped, MICRO)["flat-without-noise"]
    theta = PLAIN.w * np.arange(COUNT)
    in_unit = np.minimum(np.cos(theta), 0.9) + 0.01 * np.random.default_rng(3).standard_normal(
        COUNT
    )
    assert "flat-without-noise" not in codes(in_unit, MICRO)
    assert measure(in_unit, MICRO).extra["flat_upper"] > 2.0
    assert measure(in_unit, MICRO).extra["flat_lower"] < 1.3
    # a rounded sine without noise dwells in its outermost code, and is not cut
    assert "flat-without-noise" not in codes(rounded(np.cos(theta), 6, 1.02), MICRO)


def test_a_time_column_rounded_to_few_digits_passes():
    times = np.round(1e-6 * np.arange(COUNT) + 0.1, 7)
    assert measure(noisy(), MICRO, times_s=times).orders == 15
    coarse = np.round(1.37e-6 * np.arange(COUNT), 6)
    assert measure(noisy(), 1.37e-6, times_s=coarse).orders == 15


@pytest.mark.parametrize("hint", [None, 8.37, 8.4, 4.185, 2.79, 16.74, 25.1, 100.0, -1.0, 0.0, math.nan,
                                  math.inf, 1e300])  # fmt: skip
def test_a_hint_is_only_a_speed_up(hint):
    hint_hz = None if hint is None else hint / (COUNT * MICRO)
    reading = measure(noisy(), MICRO, hint_hz=hint_hz)
    assert reading.cycles == pytest.approx(8.37, abs=0.01)
    assert np.abs(reading.parts - measure(noisy(), MICRO).parts).max() < 1e-9


def test_whatever_comes_in_a_reading_or_a_typed_refusal_comes_out():
    rng = np.random.default_rng(77)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        outcomes = [attempt(wild_call(rng)) for _ in range(900)]
    assert outcomes.count("reading") > 30
    assert "refused without a word" not in outcomes
    assert len(set(outcomes)) >= 7


def test_a_mains_line_too_near_an_order_is_left_to_the_order():
    interval = 1e-5
    wave = Wave(parts_of(k2=0.01, k3=0.02j), 2 * math.pi * 100.4 * interval)
    reading = measure(noisy(1e-3, wave), interval, mains_hz=50.0)
    assert abs(reading.thd.value - wave.thd) < 3 * reading.thd.sigma + 1e-5
    assert "hum_ratio" not in reading.extra
    plain = measure(noisy(1e-3, wave), interval, mains_hz=1e6)
    assert np.allclose(np.diag(reading.covariance), np.diag(plain.covariance), rtol=1e-3)


def test_a_wave_buried_in_noise_is_refused():
    wave = PLAIN.samples(COUNT)
    noise = np.random.default_rng(3).standard_normal(COUNT)
    assert measure(wave + 0.3 * noise, MICRO).orders == 15
    with pytest.raises(MeasurementError, match="does not repeat"):
        measure(wave + 0.9 * noise, MICRO)
