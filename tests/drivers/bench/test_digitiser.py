"""The digitiser: ideal where it should be, and wrong by as much as it says where it should not."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from drivers.bench.digitiser import CODES, Converter, Frame, Settings
from drivers.bench.plant import Wave

PHASE = 2.0 * np.pi * np.arange(4096) / 4096
SETTINGS = Settings(full_scale_v=256.0, offset_v=0.5, interval_s=1e-6, points=10_000)
"""One code is a volt, and zero volts lie half way between two codes."""


def wave(
    amplitude: float, frequency_hz: float, *, noise_v: float = 0.0, hum_v: float = 0.0
) -> Wave:
    return Wave(amplitude * np.sin(PHASE), frequency_hz, 50.0, hum_v, noise_v)


def sinad_db(frame: Frame, cycles: int) -> float:
    """Over a whole number of cycles, from the spectrum."""
    volts = frame.volts()
    spectrum = np.fft.rfft(volts - volts.mean()) / volts.size
    signal = 2.0 * abs(spectrum[cycles]) ** 2
    return float(10.0 * np.log10(signal / (np.var(volts) - signal)))


def test_without_faults_it_is_an_ideal_quantiser_of_eight_bits() -> None:
    # 65536 points, 2731 cycles, amplitude 127.5 codes, mid-rise: 49.98698 dB (closed form and
    # computed apart); IEEE Std 1241 gives 6.02 N + 1.76 = 49.92 dB (from memory).
    settings = replace(SETTINGS, points=65536)
    perfect = Converter(1, noise_codes=0.0, nonlinearity_codes=0.0)
    frame = perfect.acquire(wave(127.5, 2731 / 65536 * 1e6), settings)
    assert sinad_db(frame, 2731) == pytest.approx(49.98698, abs=0.03)
    codes = frame.words >> 8
    assert (codes.min(), codes.max()) == (0, 255)


def test_volts_are_unbiased() -> None:
    perfect = Converter(2, noise_codes=0.6, nonlinearity_codes=0.0)
    flat = Wave(np.full(4096, 0.3), 1e3, 50.0, 0.0, 0.0)
    frame = perfect.acquire(flat, replace(SETTINGS, points=200_000))
    assert frame.volts().mean() == pytest.approx(0.3, abs=4 * 0.67 / np.sqrt(200_000))


def test_the_noise_is_what_was_asked() -> None:
    noisy = Converter(3, noise_codes=3.0, nonlinearity_codes=0.0)
    frame = noisy.acquire(wave(0.0, 1e3, noise_v=4.0), replace(SETTINGS, points=100_000))
    # two sources in quadrature, and rounding's own 1/12
    assert np.var(frame.volts()) == pytest.approx(25.0 + 1.0 / 12.0, rel=0.02)


def test_the_noise_is_white() -> None:
    noisy = Converter(4, noise_codes=2.0)
    volts = noisy.acquire(wave(0.0, 1e3), replace(SETTINGS, points=50_000)).volts()
    volts = volts - volts.mean()
    for lag in (1, 2, 5):
        rho = volts[lag:] @ volts[:-lag] / (volts @ volts)
        assert abs(rho) < 4.0 / np.sqrt(volts.size)


@pytest.mark.parametrize(("average", "bits"), [(1, 8), (4, 9), (16, 10), (64, 11), (256, 12)])
def test_averaging_yields_bits_that_are_true(average: int, bits: int) -> None:
    settings = replace(SETTINGS, average=average, points=4000)
    assert settings.bits == bits
    frame = Converter(5, nonlinearity_codes=0.0).acquire(wave(100.0, 997.0), settings)
    step = 1 << (16 - bits)
    assert np.all(frame.words % step == 0)
    assert np.any(frame.words % (2 * step) != 0)
    # fitted sine: what is left is noise / sqrt(average), rounding of the frames and of the average
    t = np.arange(4000) * 1e-6
    basis = np.array([np.ones(4000), np.cos(2 * np.pi * 997 * t), np.sin(2 * np.pi * 997 * t)]).T
    left = frame.volts() - basis @ np.linalg.lstsq(basis, frame.volts(), rcond=None)[0]
    wanted = (0.55**2 + 1 / 12) / average + (CODES / 2**bits) ** 2 / 12 * (average > 1)
    assert np.var(left) == pytest.approx(wanted, rel=0.15)


def test_more_than_twelve_bits_are_never_claimed() -> None:
    assert replace(SETTINGS, average=1024).bits == 12


def test_the_nonlinearity_has_the_peak_asked_for_and_no_gain_or_offset() -> None:
    bent = Converter(6, noise_codes=0.0, nonlinearity_codes=0.3)
    ramp = np.linspace(0.0, 255.0, 4096)
    table = bent._in_codes(Wave(ramp - 127.5, 1e3, 50.0, 0.0, 0.0), SETTINGS, 1.0)[:-1]
    error = table - ramp
    assert np.max(np.abs(error)) == pytest.approx(0.3, abs=1e-3)
    assert np.polyfit(ramp, error, 1) == pytest.approx([0.0, 0.0], abs=2e-3)
    assert np.max(np.abs(np.diff(error))) < 0.01  # smooth


def test_the_nonlinearity_distorts_by_some_parts_in_ten_thousand_of_its_code() -> None:
    def distortion(codes: float) -> float:
        bent = Converter(7, noise_codes=0.0, nonlinearity_codes=codes)
        table = bent._in_codes(wave(100.0, 1e3), SETTINGS, 1.0)[:-1]
        spectrum = np.abs(np.fft.rfft(table))
        return float(np.sqrt((spectrum[2:16] ** 2).sum()) / spectrum[1])

    assert distortion(0.0) < 1e-6
    assert distortion(0.3) == pytest.approx(6.0 * distortion(0.05), rel=0.02)
    assert 0.3e-3 < distortion(0.3) < 3e-3


@pytest.mark.parametrize(("amplitude", "low", "high"), [(100.0, False, False), (140.0, True, True)])
def test_it_clips_at_its_rails_and_knows(amplitude: float, low: bool, high: bool) -> None:
    frame = Converter(8).acquire(wave(amplitude, 1e3), SETTINGS)
    assert (frame.clipped_low, frame.clipped_high) == (low, high)
    assert frame.volts().min() >= -127.5
    assert frame.volts().max() <= 127.5


def test_noise_depends_on_seed_and_count_and_on_nothing_else() -> None:
    one, same, other = Converter(9), Converter(9), Converter(10)
    signal = wave(100.0, 1e3)
    first, second = one.acquire(signal, SETTINGS), one.acquire(signal, SETTINGS)
    assert np.array_equal(first.words, same.acquire(signal, SETTINGS).words)
    assert np.array_equal(second.words, same.acquire(signal, SETTINGS).words)
    assert not np.array_equal(first.words, second.words)
    assert not np.array_equal(first.words, other.acquire(signal, SETTINGS).words)
    assert (first.number, second.number) == (1, 2)


def test_it_samples_at_any_phase() -> None:
    free = Converter(11, noise_codes=0.0)
    signal = wave(100.0, 1e3)
    starts = [free.acquire(signal, replace(SETTINGS, points=100)).volts()[0] for _ in range(200)]
    assert min(starts) < -90.0
    assert max(starts) > 90.0


def test_sampling_follows_the_wave_between_its_points() -> None:
    settings = replace(SETTINGS, points=5000, average=64)
    frame = Converter(12, noise_codes=0.6, nonlinearity_codes=0.0).acquire(
        wave(100.0, 7919.3), settings
    )
    t = np.arange(5000) * 1e-6
    basis = np.array([np.cos(2 * np.pi * 7919.3 * t), np.sin(2 * np.pi * 7919.3 * t)]).T
    amplitude = np.linalg.norm(np.linalg.lstsq(basis, frame.volts(), rcond=None)[0])
    assert amplitude == pytest.approx(100.0, abs=0.02)


def test_hum_stands_at_the_mains_frequency() -> None:
    settings = replace(SETTINGS, points=20_000, interval_s=1e-4, average=16)
    frame = Converter(13).acquire(wave(0.0, 1e3, hum_v=5.0), settings)
    spectrum = np.abs(np.fft.rfft(frame.volts())) / 10_000
    assert np.argmax(spectrum[1:]) + 1 == 100  # 50 Hz over 2 s
    one = Converter(13).acquire(wave(0.0, 1e3, hum_v=5.0), replace(settings, average=1))
    assert np.abs(np.fft.rfft(one.volts()))[100] / 10_000 == pytest.approx(5.0, rel=0.01)


def test_an_ac_coupled_input_loses_the_offset_and_keeps_the_rest() -> None:
    shifted = Wave(50.0 + 60.0 * np.sin(PHASE), 1e3, 50.0, 0.0, 0.0)
    settings = replace(SETTINGS, ac=True, points=100_000)
    volts = Converter(14).acquire(shifted, settings).volts()
    assert volts.mean() == pytest.approx(0.0, abs=0.05)
    assert np.sqrt(2.0) * volts.std() == pytest.approx(60.0, rel=0.001)


def test_peak_detection_gives_the_least_and_the_largest_by_turns() -> None:
    frame = Converter(15).acquire(wave(100.0, 1e3), replace(SETTINGS, peak=True))
    assert frame.words.size == SETTINGS.points
    least, largest = frame.words[0::2].astype(int), frame.words[1::2].astype(int)
    assert np.all(largest >= least)
    assert np.mean(largest - least) > 256


def test_figures_that_make_no_sense_are_refused() -> None:
    with pytest.raises(ValueError, match="in codes"):
        Converter(1, noise_codes=-1.0)
