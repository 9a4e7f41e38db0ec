"""The waveform dialects that the simulated digitiser speaks, each recognised by its answers."""

from drivers.bench.instrument import Instrument
from drivers.bench.speakers.data_header import DataHeader
from drivers.bench.speakers.descriptor import Descriptor
from drivers.bench.speakers.format_trace import FormatTrace
from drivers.bench.speakers.keyword_curve import KeywordCurve
from drivers.bench.speakers.memory_header import MemoryHeader
from drivers.bench.speakers.ten_field_forms import CodeOrigin, Signed, VoltsOrigin
from drivers.bench.speakers.vdiv_text import VdivText

SPEAKERS: dict[str, type[Instrument]] = {
    speaker.dialect: speaker
    for speaker in (
        FormatTrace,
        VoltsOrigin,
        CodeOrigin,
        Signed,
        KeywordCurve,
        Descriptor,
        VdivText,
        DataHeader,
        MemoryHeader,
    )
}
"""Every speaker by its dialect's name."""

__all__ = ["SPEAKERS"]
