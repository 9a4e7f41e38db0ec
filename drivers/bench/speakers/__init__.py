"""The waveform dialects that the simulated digitiser speaks, each recognised by its answers."""

from drivers.bench.instrument import Instrument
from drivers.bench.speakers.ten_field import CodeOrigin, Signed, VoltsOrigin

SPEAKERS: dict[str, type[Instrument]] = {
    speaker.dialect: speaker for speaker in (VoltsOrigin, CodeOrigin, Signed)
}
"""Every speaker by its dialect's name."""

__all__ = ["SPEAKERS"]
