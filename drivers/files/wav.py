"""A waveform from a WAV file: whole numbers of 8 to 32 bits and floats, any count of channels."""

from __future__ import annotations

import math
import struct
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import datetime

import numpy as np
from numpy.typing import NDArray

from drivers.contract import UnusableCapture, Waveform
from drivers.files.csvfile import FileCapture, Wanted

PLAIN = "Save the recording as WAV with 16, 24 or 32 bits, or as float."
WHOLE, FLOAT, EXTENSIBLE = 1, 3, 0xFFFE
UNKNOWN_SIZE = 0xFFFFFFFF
"""Size written by a recorder that has not finished, or that cannot go back."""


@dataclass(frozen=True, slots=True)
class Format:
    """The `fmt` chunk."""

    tag: int
    """1 for whole numbers, 3 for floats."""
    channels: int
    """Channels interleaved."""
    rate_hz: int
    """Frames a second."""
    frame_bytes: int
    """Bytes of one frame over all channels."""
    width: int
    """Bytes of one value of one channel."""
    bits: int
    """Bits that count; at the top of the value where fewer than 8 times `width`."""


def is_wav(raw: bytes) -> bool:
    """Say whether the bytes begin as a WAV file does."""
    return raw[:4] in (b"RIFF", b"RIFX", b"RF64") and raw[8:12] == b"WAVE"


def read_wav(raw: bytes, wanted: Wanted, taken_at: datetime, source: str) -> FileCapture:
    """Read a WAV file.

    Raises
    ------
    UnusableCapture
        The file is damaged, compressed, or has no such channel.
    """
    order = ">" if raw[:4] == b"RIFX" else "<"
    form: Format | None = None
    large: int | None = None
    for name, start, size in _chunks(raw, order):
        if name == b"ds64" and size >= 24:
            large = struct.unpack_from("<Q", raw, start + 8)[0]
        elif name == b"fmt ":
            form = _format(raw[start : start + size], order)
        elif name == b"data":
            if form is None:
                raise UnusableCapture("the WAV file has data before its format", PLAIN)
            declared = large if size == UNKNOWN_SIZE and large is not None else size
            return _capture(raw, start, declared, form, order, wanted, taken_at, source)
    raise UnusableCapture("the WAV file has no data", PLAIN)


def _chunks(raw: bytes, order: str) -> Iterator[tuple[bytes, int, int]]:
    """Give name, start and declared size of each chunk; odd ones are padded to even."""
    place = 12
    while place + 8 <= len(raw):
        name, size = struct.unpack_from(order + "4sI", raw, place)
        yield name, place + 8, size
        place += 8 + size + (size & 1)


def _format(chunk: bytes, order: str) -> Format:
    if len(chunk) < 16:
        raise UnusableCapture("the WAV file's format is cut short", PLAIN)
    tag, channels, rate, _, frame, bits = struct.unpack_from(order + "HHIIHH", chunk)
    valid = bits
    if tag == EXTENSIBLE:
        if len(chunk) < 26:
            raise UnusableCapture("the WAV file's format is cut short", PLAIN)
        valid, _, tag = struct.unpack_from(order + "HIH", chunk, 18)
    width = frame // channels if channels else 0
    sizes = {WHOLE: (1, 2, 3, 4), FLOAT: (4, 8)}.get(tag, ())
    if width not in sizes or frame != width * channels or not 0 < bits <= 8 * width:
        raise UnusableCapture(
            f"the WAV file holds {bits} bits in {channels} channels of kind {tag}, which is not "
            "read here",
            PLAIN,
        )
    if rate == 0:
        raise UnusableCapture("the WAV file states a rate of 0", PLAIN)
    return Format(tag, channels, rate, frame, width, valid if 0 < valid <= bits else bits)


def _capture(
    raw: bytes,
    start: int,
    declared: int,
    form: Format,
    order: str,
    wanted: Wanted,
    taken_at: datetime,
    source: str,
) -> FileCapture:
    there = len(raw) - start
    open_ended = declared in (0, UNKNOWN_SIZE) and there > 0
    size = there if open_ended else min(declared, there)
    frames = size // form.frame_bytes
    if frames < 2:
        raise UnusableCapture("the WAV file holds no samples", "Record again, for longer.")
    channel = 1 if wanted.channel is None else wanted.channel
    if not 1 <= channel <= form.channels:
        raise UnusableCapture(
            f"the WAV file has {form.channels} channel(s), no number {channel}",
            "Choose the channel with `--channel N`.",
        )
    values = _values(raw, start, frames, channel - 1, form, order)
    cut = open_ended or declared > there
    whole = form.tag == WHOLE
    code = 2.0 ** (1 - form.bits) if whole else None
    waveform = Waveform(
        samples=values,
        interval_s=1.0 / form.rate_hz if wanted.interval_s is None else wanted.interval_s,
        taken_at=taken_at,
        source=source,
        has_volts=False,
        bits=form.bits if whole else None,
        code=code,
        low_rail=-1.0 if whole else None,
        high_rail=1.0 - code if code is not None else None,
        clipped=int(np.count_nonzero(~np.isfinite(values))),
        notes=_notes(form, channel, cut, wanted.interval_s),
    )
    return FileCapture(waveform, cut)


def _values(
    raw: bytes, start: int, frames: int, column: int, form: Format, order: str
) -> NDArray[np.float64]:
    """Give one channel as fractions of full scale."""
    if form.width == 3:
        flat = np.frombuffer(raw, np.uint8, frames * form.frame_bytes, start)
        wide = np.zeros((frames, 4), np.uint8)
        part = flat.reshape(frames, form.channels, 3)[:, column]
        # The three bytes become the upper three of a 32-bit number, so that its sign is right.
        wide[:, 1:] = part if order == "<" else part[:, ::-1]
        return wide.view("<i4")[:, 0] / 2.0**31
    kind = "f" if form.tag == FLOAT else "u" if form.width == 1 else "i"
    dtype = np.dtype(f"{order}{kind}{form.width}")
    flat = np.frombuffer(raw, dtype, frames * form.channels, start)
    values = flat[column :: form.channels].astype(np.float64)
    if form.tag == FLOAT:
        return np.where(np.isfinite(values), values, math.nan)
    return (values - 128.0) / 128.0 if form.width == 1 else values / 2.0 ** (8 * form.width - 1)


def _notes(form: Format, channel: int, cut: bool, interval_s: float | None) -> tuple[str, ...]:
    kind = f"{form.bits} bits" if form.tag == WHOLE else f"float of {8 * form.width} bits"
    notes = [f"WAV, {kind}, {form.rate_hz} samples a second, channel {channel} of {form.channels}"]
    if cut:
        notes.append("the recording ends before the length it states: what is there was taken")
    if interval_s is not None:
        notes.append(f"interval of {interval_s:.6g} s as stated by you, not the file's rate")
    return tuple(notes)
