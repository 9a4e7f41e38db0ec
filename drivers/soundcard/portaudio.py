"""PortAudio through `sounddevice`: loading it, finding devices, turning its errors into ours."""

from __future__ import annotations

import ctypes
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from functools import cache
from types import ModuleType

from drivers.contract import (
    SourceBusy,
    SourceError,
    SourceLost,
    SourceNotFound,
    SourceRefused,
    clean,
)

INSTALL = (
    "Install the sound extra (`pip install 'trimmer[sound]'`) and the PortAudio library "
    "(Debian: libportaudio2), then try again."
)
LIST = "See `trimmer sources` for the inputs, and name one as `sound:DEVICE`."
_INVALID_DEVICE, _DEVICE_UNAVAILABLE, _UNANTICIPATED_HOST = -9996, -9985, -9999
_BAD_STREAM, _STOPPED, _TIMED_OUT, _INTERNAL = -9988, -9983, -9987, -9986


@dataclass(frozen=True, slots=True)
class SoundDevice:
    """A sound input of this machine."""

    index: int
    """PortAudio's number; changes when devices come and go."""
    name: str
    """Its name, as given by the system and not yet cleaned: it is what opens it."""
    channels: int
    """Input channels."""
    rate_hz: float
    """Rate the system prefers, samples a second."""
    is_default: bool
    """True for the system's own choice."""


@cache
def load() -> ModuleType:
    """Import `sounddevice`, once.

    Raises
    ------
    SourceNotFound
        The package or the PortAudio library is missing.
    """
    _hush_alsa()
    try:
        import sounddevice
    except ImportError as error:
        raise SourceNotFound("sound inputs need the package sounddevice", INSTALL) from error
    except OSError as error:
        raise SourceNotFound(f"PortAudio cannot be loaded: {clean(str(error))}", INSTALL) from error
    return sounddevice


@cache
def _hush_alsa() -> object:
    """Keep ALSA from writing its remarks onto the terminal, where they would spoil a screen."""
    if not sys.platform.startswith("linux"):
        return None
    kind = ctypes.CFUNCTYPE(
        None, ctypes.c_char_p, ctypes.c_int, ctypes.c_char_p, ctypes.c_int, ctypes.c_char_p
    )
    handler = kind(lambda *_: None)
    try:
        ctypes.CDLL("libasound.so.2").snd_lib_error_set_handler(handler)
    except (OSError, AttributeError):
        return None
    return handler  # cached, so that it outlives the library's use of it


def refresh() -> None:
    """Look for devices anew; no stream may be open."""
    sounddevice = load()
    with translated("the sound system"):
        sounddevice._terminate()
        sounddevice._initialize()


def list_sound_devices() -> tuple[SoundDevice, ...]:
    """List the inputs of this machine.

    Raises
    ------
    SourceError
        Sound cannot be had here at all.
    """
    sounddevice = load()
    with translated("the sound system"):
        default = sounddevice.default.device[0]
        return tuple(
            SoundDevice(
                index,
                str(entry["name"]),
                int(entry["max_input_channels"]),
                float(entry["default_samplerate"]),
                index == default,
            )
            for index, entry in enumerate(sounddevice.query_devices())
            if entry["max_input_channels"] > 0
        )


def find_device(wanted: str | None) -> SoundDevice:
    """Find an input by its name, a part of it, or its number.

    Raises
    ------
    SourceNotFound
        None, or more than one, fits.
    """
    devices = list_sound_devices()
    if not devices:
        raise SourceNotFound(
            "this machine has no sound input", "Connect a sound card with a line input."
        )
    if wanted is None:
        return next((device for device in devices if device.is_default), devices[0])
    folded = wanted.strip().casefold()
    for fits in (
        [device for device in devices if device.name.casefold() == folded],
        [device for device in devices if str(device.index) == folded],
        [device for device in devices if folded in device.name.casefold()],
    ):
        if len(fits) == 1:
            return fits[0]
        if fits:
            names = ", ".join(clean(device.name, 40) for device in fits)
            raise SourceNotFound(f"{clean(wanted, 40)!r} fits several sound inputs: {names}", LIST)
    raise SourceNotFound(f"there is no sound input {clean(wanted, 40)!r}", LIST)


@contextmanager
def translated(what: str) -> Iterator[None]:
    """Turn what PortAudio raises into the errors of a source."""
    sounddevice = load()
    try:
        yield
    except sounddevice.PortAudioError as error:
        raise _translation(error, what) from error
    except (OSError, ValueError, RuntimeError) as error:
        raise SourceRefused(f"{what}: {clean(str(error))}", LIST) from error


def _translation(error: Exception, what: str) -> SourceError:
    code = error.args[1] if len(error.args) > 1 else None
    message = f"{what}: {clean(str(error.args[0] if error.args else error))}"
    if code == _DEVICE_UNAVAILABLE:
        return SourceBusy(message)
    if code == _INVALID_DEVICE:
        return SourceNotFound(message, LIST)
    if code in (_BAD_STREAM, _STOPPED, _TIMED_OUT, _INTERNAL, _UNANTICIPATED_HOST):
        return SourceLost(message, "Check that the sound card is plugged in.")
    return SourceRefused(message, "Choose another input or rate in the system's sound settings.")
