"""The sound input as a source: a stream that runs on, and captures cut from its newest end."""

from __future__ import annotations

import math
import time
from dataclasses import dataclass
from datetime import datetime, timedelta
from pathlib import Path
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from drivers.contract import (
    CaptureRequest,
    SourceError,
    SourceInfo,
    SourceLost,
    SourceNotFound,
    SourceTimeout,
    Waveform,
    clean,
)
from drivers.soundcard.calibration import store_calibration, stored_calibration
from drivers.soundcard.portaudio import LIST, SoundDevice, find_device, load, refresh, translated
from drivers.soundcard.ring import LATE_S, Frames, Piece, Ring

RATE_HZ = 48000.0
KEPT_S = 12.0
"""Sound kept."""
LEAST_SAMPLES = 4800
UNKNOWN_S = 0.5
"""Length of a capture while the fundamental is not known: three cycles of 6 Hz."""
CYCLES = 10
"""Least cycles of a known fundamental in a capture."""
SETTLE_S = 0.2
"""Sound after the start that is thrown away: old buffers, and the input's own settling."""
DEAD_S = 1.0
"""A stream that brings nothing for so long is taken as dead."""
STUCK_S = 0.5
"""A stream late for so long is started anew; its backlog is thrown away."""
SILENT = 1e-3
"""Part of full scale below which an input is called silent (-60 dB)."""
LOW = 1e-2
"""Part of full scale below which a level is called low (-40 dB)."""
ASKED = CaptureRequest()


@dataclass(frozen=True, slots=True)
class Input:
    """What was chosen."""

    device: SoundDevice
    """The device."""
    channel: int
    """1-based channel used."""
    rate_hz: float
    """Samples a second."""
    full_scale_v: float | None
    """Peak volts at full scale, where calibrated."""


class SoundSource:
    """A sound card's input.

    The stream runs on between captures; each capture is its newest end, never overlapping the one
    before, never older than `CaptureRequest.fresh_after`, never across a gap.
    """

    def __init__(self, word: str, chosen: Input) -> None:
        self._chosen = chosen
        taken = min(2, chosen.device.channels)
        # Two channels are taken even where one is used: a system asked for one mixes the two.
        self._channels = max(taken, chosen.channel)
        self._ring = Ring(int(KEPT_S * chosen.rate_hz), self._channels, chosen.rate_hz)
        self._stream: Any = None
        self._started = -math.inf
        self._bits = 0
        self._closed = False
        self._info = _info(word, chosen)
        self._start()

    @property
    def info(self) -> SourceInfo:
        """What this source is."""
        return self._info

    @property
    def level(self) -> float:
        """Peak of the last 50 ms on the channel used, part of full scale (1 is overload)."""
        return float(self._ring.peak(int(0.05 * self._chosen.rate_hz))[self._chosen.channel - 1])

    def capture(self, request: CaptureRequest = ASKED) -> Waveform:
        """Cut the newest sound from the stream.

        Raises
        ------
        SourceTimeout
            Not enough sound came within the time.
        SourceLost
            The device is gone; the next capture tries to open it again.
        """
        deadline = time.monotonic() + request.timeout_s
        if self._closed:
            raise SourceLost("the sound input is closed", "Open it again.")
        if self._stream is None:
            self._reopen()
        count = self._count(request)
        while True:
            since = max(request.fresh_after or -math.inf, self._started + SETTLE_S)
            left = deadline - time.monotonic()
            piece = self._ring.newest(count, since, max(0.0, min(left, STUCK_S)))
            if piece is not None:
                return self._waveform(piece)
            self._check_alive()
            if time.monotonic() >= deadline:
                raise self._too_slow(count, request.timeout_s)
            if self._ring.late_s > LATE_S:
                self._stop()
                self._start()

    def close(self) -> None:
        """Give the device back. Safe to call twice."""
        self._closed = True
        self._stop()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()

    def _count(self, request: CaptureRequest) -> int:
        rate = self._chosen.rate_hz
        if request.samples is not None:
            wanted = float(request.samples)
        elif request.fundamental_hz and request.fundamental_hz > 0.0:
            wanted = max(LEAST_SAMPLES, CYCLES * rate / request.fundamental_hz)
        else:
            wanted = UNKNOWN_S * rate
        most = min(0.8 * KEPT_S, max(0.05, request.timeout_s - SETTLE_S)) * rate
        return max(16, int(min(wanted, most)))

    def _start(self) -> None:
        sounddevice = load()
        chosen = self._chosen
        self._ring.restart()
        with translated(f"sound input {clean(chosen.device.name, 60)}"):
            stream = sounddevice.InputStream(
                device=chosen.device.index,
                channels=self._channels,
                samplerate=chosen.rate_hz,
                dtype="int32",
                callback=self._arrived,
            )
            self._stream = stream
            self._ring.latency_s = float(stream.latency)
            self._started = time.monotonic()
            stream.start()

    def _arrived(self, block: Frames, _count: int, _times: object, status: Any) -> None:
        """Run by PortAudio's own thread."""
        self._ring.push(block, time.monotonic(), gap=bool(status.input_overflow))

    def _stop(self) -> None:
        stream, self._stream = self._stream, None
        if stream is not None:
            try:
                with translated("sound input"):
                    stream.close(ignore_errors=True)
            except SourceError:
                pass  # it is gone already

    def _reopen(self) -> None:
        """Open the device again by its name: its number may have changed."""
        refresh()
        device = find_device(self._chosen.device.name)
        old = self._chosen
        self._chosen = Input(device, old.channel, old.rate_hz, old.full_scale_v)
        self._start()

    def _check_alive(self) -> None:
        silent_s = time.monotonic() - max(self._ring.last_arrival, self._started)
        if silent_s < DEAD_S and self._is_active():
            return
        self._stop()
        raise SourceLost(
            f"the sound input {clean(self._chosen.device.name, 60)} brings no sound any more",
            "Check that the sound card is plugged in; the session goes on by itself.",
        )

    def _is_active(self) -> bool:
        try:
            with translated("sound input"):
                return self._stream is not None and bool(self._stream.active)
        except SourceError:
            return False

    def _too_slow(self, count: int, timeout_s: float) -> SourceTimeout:
        length_s = count / self._chosen.rate_hz
        return SourceTimeout(
            f"no {length_s:.2g} s of sound without gaps within {timeout_s:.3g} s",
            "Close programs that load the machine or use the sound card, then try again.",
        )

    def _waveform(self, piece: Piece) -> Waveform:
        place = self._chosen.channel - 1
        whole = piece.frames[:, place]
        bits = self._true_bits(whole)
        full = self._chosen.full_scale_v
        scale = full if full is not None else 1.0
        code = 2.0 ** (1 - bits) if bits else None
        top = 1.0 - (code or 2.0**-23)
        values = whole / 2.0**31
        clipped = int(np.count_nonzero((values >= top) | (values <= -1.0)))
        age_s = max(0.0, time.monotonic() - piece.taken)
        return Waveform(
            samples=values * scale,
            interval_s=1.0 / self._chosen.rate_hz,
            taken_at=datetime.now().astimezone() - timedelta(seconds=age_s),
            source=self._info.identity,
            has_volts=full is not None,
            bits=bits,
            code=code * scale if code else None,
            low_rail=-scale,
            high_rail=top * scale,
            clipped=clipped,
            coupling="AC",
            age_s=age_s,
            notes=self._notes(piece, clipped),
        )

    def _true_bits(self, whole: NDArray[np.int32]) -> int | None:
        """Find the bits that the device really gives: the lower ones stay zero.

        None above 24: a float or a mixed signal, whose steps are nobody's codes.
        """
        used = int(np.bitwise_or.reduce(whole)) & 0xFFFFFFFF
        if used:
            self._bits = max(self._bits, 32 - ((used & -used).bit_length() - 1))
        return self._bits if 8 <= self._bits <= 24 else None

    def _notes(self, piece: Piece, clipped: int) -> tuple[str, ...]:
        chosen = self._chosen
        peaks = np.abs(piece.frames.astype(np.float64)).max(axis=0) / 2.0**31
        peak = float(peaks[chosen.channel - 1])
        level = f"{20 * math.log10(peak):.1f} dB of full scale" if peak > 0 else "nothing at all"
        notes = [f"level {level}, channel {chosen.channel} of {self._channels}"]
        if clipped:
            notes.append(f"overload: {clipped} samples at full scale")
        elif peak < LOW:
            notes.append("the level is low: raise the input gain or lower the division before it")
        louder = int(np.argmax(peaks))
        if peak < SILENT <= peaks[louder]:
            notes.append(f"channel {louder + 1} has a signal and this one has none: `--channel`")
        if piece.breaks:
            notes.append(f"{piece.breaks} gaps in the sound since the last capture, none inside it")
        if chosen.rate_hz != chosen.device.rate_hz:
            notes.append(
                f"the system prefers {chosen.device.rate_hz:.0f} samples a second: "
                f"{chosen.rate_hz:.0f} may be resampled, and the bandwidth less than it seems"
            )
        return tuple(notes)


def _info(word: str, chosen: Input) -> SourceInfo:
    volts = "not calibrated" if chosen.full_scale_v is None else f"{chosen.full_scale_v:.4g} V"
    settings = {
        "rate": f"{chosen.rate_hz:.0f} Sa/s",
        "channel": str(chosen.channel),
        "coupling": "AC",
        "full scale": volts,
    }
    return SourceInfo(word, clean(chosen.device.name), settings=settings)


def open_sound(
    device: str | None = None,
    *,
    channel: int = 1,
    calibration: float | None = None,
    settings_dir: Path | None = None,
) -> SoundSource:
    """Open a sound input.

    Parameters
    ----------
    device
        Its name, a part of it, or its number; None takes the system's choice.
    channel
        1-based channel used.
    calibration
        Peak volts that give full scale. It is kept for this device and channel and used from then
        on; None uses what was kept, and without that the samples are fractions of full scale.
    settings_dir
        Folder of the settings; None keeps and knows no calibration.

    Raises
    ------
    SourceNotFound
        No such device or channel, or the sound extra is not installed.
    SourceBusy
        Another program holds the device.
    SourceRefused
        The device does not open as asked.
    """
    found = find_device(device)
    if not 1 <= channel <= found.channels:
        raise SourceNotFound(
            f"{clean(found.name, 60)} has {found.channels} input channel(s), no number {channel}",
            LIST,
        )
    if settings_dir is not None and calibration is not None:
        store_calibration(settings_dir, found.name, channel, calibration)
    elif settings_dir is not None:
        calibration = stored_calibration(settings_dir, found.name, channel)
    word = "sound" if device is None else f"sound:{clean(device)}"
    return SoundSource(word, Input(found, channel, _rate(found, channel), calibration))


def _rate(device: SoundDevice, channel: int) -> float:
    """Take 48 kHz where the device has it, else what it prefers."""
    sounddevice = load()
    try:
        sounddevice.check_input_settings(
            device=device.index,
            channels=max(channel, min(2, device.channels)),
            dtype="int32",
            samplerate=RATE_HZ,
        )
    except (sounddevice.PortAudioError, ValueError):
        return device.rate_hz
    return RATE_HZ
