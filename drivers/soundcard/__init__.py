"""A sound card's line input as a source; PortAudio is loaded when a device is asked for, not before."""

from drivers.soundcard.calibration import store_calibration, stored_calibration
from drivers.soundcard.portaudio import SoundDevice, list_sound_devices
from drivers.soundcard.source import SoundSource, open_sound

__all__ = [
    "SoundDevice",
    "SoundSource",
    "list_sound_devices",
    "open_sound",
    "store_calibration",
    "stored_calibration",
]
