"""What goes wrong with sound devices, with a scripted stand-in for PortAudio."""

from __future__ import annotations

import builtins
import subprocess
import sys
import time

import numpy as np
import pytest

from drivers import (
    CaptureRequest,
    SourceBusy,
    SourceLost,
    SourceNotFound,
    SourceRefused,
    SourceTimeout,
)
from drivers.soundcard import list_sound_devices, open_sound, portaudio, source
from tests.drivers.sound.fake import FakeSound


def device(name, channels=2, rate=48000.0):
    return {"name": name, "max_input_channels": channels, "default_samplerate": rate}


def capture_until_it_fails(found):
    while True:
        found.capture(CaptureRequest(samples=480, timeout_s=2.0))


@pytest.fixture
def sound(monkeypatch):
    fake = FakeSound([device("Line in (hw:0,0)"), device("Line in, front"), device("Speaker", 0)])
    for module in (portaudio, source):
        monkeypatch.setattr(module, "load", lambda: fake)
    return fake


def test_a_missing_package_names_the_extra(monkeypatch):
    portaudio.load.cache_clear()
    real = builtins.__import__

    def missing(name, *rest, **more):
        if name == "sounddevice":
            raise ModuleNotFoundError("No module named 'sounddevice'")
        return real(name, *rest, **more)

    monkeypatch.setattr(builtins, "__import__", missing)
    with pytest.raises(SourceNotFound) as caught:
        open_sound()
    assert "trimmer[sound]" in caught.value.remedy


def test_a_missing_library_names_its_package(monkeypatch):
    portaudio.load.cache_clear()
    real = builtins.__import__

    def missing(name, *rest, **more):
        if name == "sounddevice":
            raise OSError("PortAudio library not found")
        return real(name, *rest, **more)

    monkeypatch.setattr(builtins, "__import__", missing)
    with pytest.raises(SourceNotFound, match="library not found") as caught:
        open_sound()
    assert "libportaudio2" in caught.value.remedy


def test_importing_the_driver_loads_no_sound_library():
    script = "import drivers.soundcard, sys; print('sounddevice' in sys.modules)"
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, check=True, timeout=60
    )
    assert done.stdout.strip() == "False"


def test_a_name_that_fits_several_inputs_is_refused_with_their_names(sound):
    with pytest.raises(SourceNotFound, match=r"fits several.*hw:0,0.*front"):
        open_sound("line in")
    with open_sound("line in, front") as found:
        assert found.info.identity == "Line in, front"
    with open_sound("1") as found:
        assert found.info.identity == "Line in, front"


def test_outputs_are_no_inputs(sound):
    assert [entry.name for entry in list_sound_devices()] == ["Line in (hw:0,0)", "Line in, front"]
    with pytest.raises(SourceNotFound):
        open_sound("speaker")


def test_a_machine_without_inputs_says_so(sound):
    sound.plugged = False
    with pytest.raises(SourceNotFound, match="no sound input"):
        open_sound()


@pytest.mark.parametrize(
    ("code", "kind"), [(-9985, SourceBusy), (-9996, SourceNotFound), (-9998, SourceRefused)]
)
def test_what_portaudio_refuses_becomes_a_source_s_own_error(sound, code, kind):
    sound.refusal = ("Error opening InputStream\x1b[31m", code)
    with pytest.raises(kind) as caught:
        open_sound()
    assert "\x1b" not in str(caught.value)
    assert caught.value.remedy


def test_an_unplugged_device_is_lost_and_found_again_under_its_name(sound):
    with open_sound("front") as found:
        found.capture(CaptureRequest(samples=480))
        sound.plugged = False
        began = time.monotonic()
        with pytest.raises(SourceLost, match="brings no sound"):
            capture_until_it_fails(found)
        assert time.monotonic() - began < 3.0
        with pytest.raises(SourceNotFound):
            found.capture(CaptureRequest(samples=480))
        sound.devices.reverse()
        sound.plugged = True
        wave = found.capture(CaptureRequest(samples=480))
        assert np.ptp(wave.samples) > 0.4
        assert len(sound.opened) == 2


def test_an_overrun_is_said_and_not_cut_through(sound):
    with open_sound() as found:
        found.capture(CaptureRequest(samples=480))
        sound.overflow_next = True
        time.sleep(0.05)
        wave = found.capture(CaptureRequest(samples=480))
    assert any("gaps in the sound" in note for note in wave.notes)


def test_too_little_time_is_a_timeout_within_it(sound):
    with open_sound() as found:
        began = time.monotonic()
        with pytest.raises(SourceTimeout):
            found.capture(CaptureRequest(timeout_s=0.1))
        assert time.monotonic() - began < 1.1


def test_overload_is_counted_and_said(sound):
    sound.peak = 1.2
    with open_sound() as found:
        wave = found.capture(CaptureRequest(samples=4800))
        assert found.level == pytest.approx(1.0, abs=1e-4)
    assert wave.clipped > 1000
    assert any(note.startswith("overload") for note in wave.notes)
    assert wave.high_rail == pytest.approx(1 - 2**-15)
    assert wave.samples.max() == wave.high_rail
    assert wave.samples.min() == wave.low_rail


def test_the_bits_that_a_device_really_gives_are_seen(sound):
    sound.bits = 12
    with open_sound() as found:
        wave = found.capture(CaptureRequest(samples=4800))
    assert wave.bits == 12
    assert wave.code == 2.0**-11
    assert np.all(wave.samples / wave.code == np.round(wave.samples / wave.code))


def test_a_low_level_is_said(sound):
    sound.peak = 0.003
    with open_sound() as found:
        wave = found.capture(CaptureRequest(samples=4800))
    assert any("level is low" in note for note in wave.notes)


def test_another_rate_than_the_system_s_own_is_said_to_be_doubtful(sound):
    sound.devices = [device("Line", rate=44100.0)]
    with open_sound() as found:
        wave = found.capture(CaptureRequest(samples=4800))
    assert any("may be resampled" in note for note in wave.notes)


def test_a_device_without_48_khz_runs_at_its_own_rate(sound):
    sound.devices = [device("Line", rate=44100.0)]
    sound.rates = (44100.0,)
    with open_sound() as found:
        wave = found.capture(CaptureRequest(samples=4410))
    assert wave.interval_s == pytest.approx(1 / 44100)
    assert not any("resampled" in note for note in wave.notes)


def test_capture_length_follows_the_fundamental(sound):
    with open_sound() as found:
        assert found.capture(CaptureRequest(fundamental_hz=1000.0)).samples.size == 4800
        assert found.capture(CaptureRequest(fundamental_hz=20.0)).samples.size == 24000
        assert found.capture().samples.size == 24000
