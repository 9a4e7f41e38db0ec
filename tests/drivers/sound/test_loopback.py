"""Sound through a real ALSA device and PortAudio."""

from __future__ import annotations

import time

import numpy as np
import pytest

from drivers import CaptureRequest, SourceNotFound, WaveformSource
from drivers.soundcard import list_sound_devices, open_sound
from tests.drivers.sound.loopback import PEAK, TONE_HZ, Loop
from trimmer.measurement import measure
from trimmer.measurement.reading import Digitiser


def read(source, **wanted):
    wave = source.capture(CaptureRequest(fundamental_hz=TONE_HZ, **wanted))
    digitiser = Digitiser(
        bits=wave.bits, code=wave.code, low_rail=wave.low_rail, high_rail=wave.high_rail,
        clipped=wave.clipped, ac_coupled=wave.coupling == "AC", has_volts=wave.has_volts,
    )  # fmt: skip
    return wave, measure(wave.samples, wave.interval_s, digitiser=digitiser)


def by_least_squares(samples, interval_s, orders=8):
    """THD by plain least squares at the tone's own frequency: the slow way, as referee."""
    angle = 2 * np.pi * TONE_HZ * interval_s * np.arange(samples.size)
    basis = np.column_stack(
        [np.ones_like(angle)]
        + [part(k * angle) for k in range(1, orders + 1) for part in (np.cos, np.sin)]
    )
    fit = np.linalg.lstsq(basis, samples, rcond=None)[0][1:].reshape(-1, 2)
    size = np.hypot(fit[:, 0], fit[:, 1])
    return size[0], float(np.sqrt(np.sum(size[1:] ** 2)) / size[0])


def test_a_one_percent_second_harmonic_is_read_within_a_thousandth_of_a_point(loop: Loop):
    with open_sound(loop.name) as source:
        assert isinstance(source, WaveformSource)
        for _ in range(3):
            wave, reading = read(source)
            peak, thd = by_least_squares(wave.samples, wave.interval_s)
            assert abs(100 * thd - 1.0) < 0.001
            assert abs(100 * reading.thd.value - 1.0) < 0.001
            assert peak == pytest.approx(PEAK, rel=1e-6)
            assert reading.fundamental_hz == pytest.approx(TONE_HZ, rel=1e-6)
    assert wave.interval_s == pytest.approx(1 / 48000)
    assert wave.bits == 24
    assert wave.coupling == "AC"
    assert not wave.has_volts


def test_captures_do_not_overlap_and_come_at_the_pace_of_sound(loop: Loop):
    with open_sound(loop.name) as source:
        source.capture(CaptureRequest(samples=4800))
        began = time.monotonic()
        waves = [source.capture(CaptureRequest(samples=4800)) for _ in range(10)]
        took_s = time.monotonic() - began
    assert took_s == pytest.approx(1.0, abs=0.6)
    assert all(wave.age_s < 0.5 for wave in waves)
    turn = 2 * np.pi * TONE_HZ / 48000
    starts = [np.angle(np.sum(w.samples * np.exp(-1j * turn * np.arange(4800)))) for w in waves]
    steps = np.diff(np.unwrap(starts))
    assert not np.any(np.abs(np.mod(steps + np.pi, 2 * np.pi) - np.pi) < 1e-9)


def test_nothing_sampled_before_the_turn_is_given_after_it(loop: Loop):
    with open_sound(loop.name) as source:
        read(source)
        for ratio in (0.03, 0.002, 0.02):
            time.sleep(0.06)  # sound of before the turn lies ready
            turned = loop.say(f"second {ratio}")
            wave, reading = read(source, fresh_after=turned + 0.05)
            assert reading.thd.value == pytest.approx(ratio, abs=1e-5)
            assert wave.age_s < 0.5


def test_a_backlog_handed_over_late_is_not_taken_for_new_sound(loop: Loop):
    with open_sound(loop.name) as source:
        read(source)
        loop.say("hold")
        time.sleep(0.6)
        turned = loop.say("second 0.04")
        time.sleep(0.2)
        loop.say("release")
        _, reading = read(source, fresh_after=turned + 0.05)
    assert reading.thd.value == pytest.approx(0.04, abs=1e-5)


def test_a_calibration_is_kept_and_gives_volts_the_next_time(loop: Loop, tmp_path):
    with open_sound(loop.name, calibration=1.75, settings_dir=tmp_path) as source:
        assert source.capture().has_volts
    with open_sound(loop.name, settings_dir=tmp_path) as source:
        wave, reading = read(source)
    assert wave.has_volts
    assert reading.amplitude == pytest.approx(1.75 * PEAK, rel=1e-6)
    assert wave.high_rail == pytest.approx(1.75, rel=1e-6)


def test_the_other_channel_is_pointed_out_where_this_one_is_silent(loop: Loop):
    with open_sound(loop.name, channel=2) as source:
        wave = source.capture(CaptureRequest(samples=4800))
    assert any("channel 1 has a signal" in note for note in wave.notes)
    assert not np.any(wave.samples)


def test_waiting_for_sound_leaves_the_machine_alone(loop: Loop):
    with open_sound(loop.name) as source:
        source.capture()
        began, worked = time.monotonic(), time.process_time()
        for _ in range(10):
            source.capture(CaptureRequest(samples=4800))
        share = (time.process_time() - worked) / (time.monotonic() - began)
    assert share < 0.3


def test_devices_are_listed_and_found_by_a_part_of_their_name(loop: Loop):
    assert "trimloop" in [device.name for device in list_sound_devices()]
    with open_sound("TRIML") as source:
        assert source.info.identity == "trimloop"
    with pytest.raises(SourceNotFound, match="there is no sound input"):
        open_sound("no such input")
    with pytest.raises(SourceNotFound, match="no number 400"):
        open_sound(loop.name, channel=400)


def test_closing_twice_does_no_harm_and_ends_captures(loop: Loop):
    source = open_sound(loop.name)
    source.close()
    source.close()
    with pytest.raises(Exception, match="closed"):
        source.capture()
