"""Where waveforms come in: the contract of a source, and nothing that drags an instrument along."""

from drivers.contract import (
    CaptureRequest,
    SourceBusy,
    SourceError,
    SourceInfo,
    SourceLost,
    SourceNotFound,
    SourceRefused,
    SourceTimeout,
    UnusableCapture,
    Waveform,
    WaveformSource,
    clean,
)

__all__ = [
    "CaptureRequest",
    "SourceBusy",
    "SourceError",
    "SourceInfo",
    "SourceLost",
    "SourceNotFound",
    "SourceRefused",
    "SourceTimeout",
    "UnusableCapture",
    "Waveform",
    "WaveformSource",
    "clean",
]
