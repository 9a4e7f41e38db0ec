"""An instrument as a source of waveforms."""

from __future__ import annotations

import threading
import time
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Self

import numpy as np

from drivers.contract import (
    CaptureRequest,
    Coupling,
    SourceError,
    SourceInfo,
    SourceLost,
    SourceRefused,
    SourceTimeout,
    Waveform,
    clean,
)
from drivers.visa.conversation import Conversation
from drivers.visa.frame import Converted
from drivers.visa.identity import identify, same_instrument
from drivers.visa.kept import KeptSettings
from drivers.visa.link import Link, open_link
from drivers.visa.memory import remember
from drivers.visa.probing import Found, find_dialect
from drivers.visa.ranging import fit_range
from drivers.visa.settling import agree, settle
from drivers.visa.speaker import Frame, Speaker

_MOST_TRIES = 4
"""Frames taken in one capture before the instrument is said to send nothing new."""

_LEAVING_S = 1.0

_GRACE_S = 0.5
"""Seconds past the deadline to ask why nothing came."""

_NOT_CERTAIN = (
    "the form of the preamble was told by plausible values: an offset in volts may be wrong, "
    "ratios are not affected"
)


class InstrumentSource:
    """An oscilloscope or digitiser behind a VISA resource.

    Parameters
    ----------
    resource
        The VISA resource.
    name
        The SOURCE word to show.
    channel
        Channel read, counted from 1.
    dialect
        Name of the dialect; None finds out.
    settings_dir
        Where what was found out is kept, and the person's own dialects lie; None keeps nothing.
    set_range
        Set range and offset so that the codes are used well, and put them back at the end.
    timeout_s
        Longest wait while opening.

    Raises
    ------
    SourceError
        One of its leaves.

    Notes
    -----
    One thread at a time owns the session below; a second caller waits its turn.
    """

    def __init__(
        self,
        resource: str,
        *,
        name: str,
        channel: int,
        dialect: str | None,
        settings_dir: Path | None,
        set_range: bool,
        timeout_s: float,
    ) -> None:
        if channel < 1:
            raise SourceRefused(f"there is no channel {channel}", "Count channels from 1.")
        self._resource = resource
        self._name = clean(name)
        self._channel = channel
        self._settings_dir = settings_dir
        self._set_range = set_range
        self._turn = threading.Lock()
        self._closed = False
        self._last: bytes | None = None
        self._kept = KeptSettings()
        self._speaker: Speaker | None = None
        deadline = time.monotonic() + timeout_s
        self._link: Link = open_link(resource, timeout_s)
        try:
            talk = Conversation(self._link, {"channel": channel})
            self._identity = identify(talk, deadline)
            # Finding a dialect takes as long as the silences in it; each has its own bound.
            self._found: Found = find_dialect(
                talk, self._identity, dialect, channel, settings_dir, self._kept
            )
            self._speaker = self._found.speaker
        except BaseException:
            self._link.close()
            raise

    @property
    def info(self) -> SourceInfo:
        """What this source is."""
        settings = {"channel": str(self._channel)}
        if self._found.how:
            settings["dialect found"] = self._found.how
        return SourceInfo(
            name=self._name,
            identity=clean(self._identity),
            dialect=self._found.dialect.name,
            settings=settings,
        )

    def capture(self, request: CaptureRequest = CaptureRequest()) -> Waveform:  # noqa: B008
        """Take the next capture.

        Raises
        ------
        SourceError
            One of its leaves, within `request.timeout_s` plus one second.
        """
        deadline = time.monotonic() + request.timeout_s
        if not self._turn.acquire(timeout=request.timeout_s):
            raise SourceTimeout("another capture from this instrument is still under way")
        try:
            if self._closed:
                raise SourceLost(f"{self._name} is closed")
            return self._capture(request, deadline)
        finally:
            self._turn.release()

    def close(self) -> None:
        """Give the device back. Safe to call twice."""
        if self._closed:
            return
        self._closed = True
        owned = self._turn.acquire(timeout=_LEAVING_S)
        try:
            if owned and self._speaker is not None and not self._link.broken:
                self._speaker.leave(time.monotonic() + _LEAVING_S)
        finally:
            self._link.close()
            if owned:
                self._turn.release()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()

    # Inside --------------------------------------------------------------------------------

    def _capture(self, request: CaptureRequest, deadline: float) -> Waveform:
        _wait_until(request.fresh_after, deadline)
        speaker = self._ready(deadline)
        speaker.ask_average(max(1, request.average), deadline)
        if request.samples is not None:
            speaker.ask_points(request.samples, deadline)
        if self._set_range:
            self._set_range = False
            fit_range(speaker, deadline)
        frame, converted = self._fresh(speaker, deadline)
        return self._waveform(frame, converted)

    def _fresh(self, speaker: Speaker, deadline: float) -> tuple[Frame, Converted]:
        """Take frames until one is new and the instrument has no fault to tell of."""
        why: SourceError | None = None
        for _ in range(_MOST_TRIES):
            try:
                frame = speaker.take(deadline)
            except SourceTimeout as silence:
                raise self._explained(speaker, silence) from silence
            faults = speaker.faults(deadline)
            if faults:
                why = _reported(faults)
                continue
            self._settle(speaker, frame, deadline)
            converted = speaker.convert(frame)
            if frame.payload != self._last or np.ptp(converted.volts) == 0.0:
                self._last = frame.payload
                return frame, converted
            why = SourceTimeout("the instrument keeps sending the frame of before")
        assert why is not None
        raise why

    def _explained(self, speaker: Speaker, silence: SourceTimeout) -> SourceError:
        """After a silence, ask in the little time left whether the instrument refused."""
        try:
            grace = time.monotonic() + _GRACE_S
            speaker.talk.step_in(grace)
            faults = speaker.faults(grace)
        except SourceError:
            return silence
        finally:
            # Half of a waveform may still be on its way: this link is not used again.
            self._link.broken = True
        return _reported(faults) if faults else silence

    def _settle(self, speaker: Speaker, frame: Frame, deadline: float) -> None:
        """Tell rivals apart, once a frame comes that they read differently."""
        rivals = self._found.rivals
        if not rivals or agree(rivals, frame.fields, frame.payload):
            return
        text = speaker.text_values(deadline)
        settled = settle(rivals, frame.fields, frame.payload, text) if text else None
        if settled is not None:
            speaker.dialect = self._found.dialect = settled.dialect
            speaker.known = speaker.known.changed(
                dialect=settled.dialect.name,
                signed=settled.reading.signed,
                big_endian=settled.reading.big_endian,
                settled="a frame read as codes and as text",
            )
        else:
            speaker.known = speaker.known.changed(settled="plausible reference values")
            self._found.notes = (_NOT_CERTAIN,)
        self._found.rivals = ()

    def _ready(self, deadline: float) -> Speaker:
        """Give a speaker over a link in step, mending or replacing the link if need be."""
        if self._speaker is None or self._link.broken:
            self._speaker = None
            self._reconnect(deadline)
        assert self._speaker is not None
        return self._speaker

    def _reconnect(self, deadline: float) -> None:
        self._link.close()
        left = deadline - time.monotonic()
        if left <= 0.0:
            raise SourceTimeout(f"{self._name} did not come back in time")
        self._link = open_link(self._resource, left, again=True)
        try:
            talk = Conversation(self._link, {"channel": self._channel})
            self._link.freshen(deadline)
            identity = identify(talk, deadline)
            if not same_instrument(identity, self._identity):
                raise SourceRefused(
                    f"another instrument answers: {clean(identity)}",
                    "End this session and start it again with the instrument that is there now.",
                )
            known = self._found.speaker.known
            speaker = Speaker(talk, self._found.dialect, known, self._channel, self._kept)
            speaker.set_up(deadline)
        except BaseException:
            self._link.broken = True
            raise
        self._speaker = self._found.speaker = speaker

    def _waveform(self, frame: Frame, converted: Converted) -> Waveform:
        known = self._found.speaker.known
        if known != self._found.kept:
            remember(self._settings_dir, self._identity, known)
            self._found.kept = known
        return Waveform(
            samples=converted.volts,
            interval_s=converted.interval_s,
            taken_at=datetime.now(UTC),
            source=self._name,
            bits=converted.bits,
            code=converted.code,
            low_rail=converted.low_rail,
            high_rail=converted.high_rail,
            clipped=converted.clipped,
            coupling=_coupling(frame.fields.get(self._found.dialect.coupling or "")),
            averaged=converted.averaged,
            age_s=time.monotonic() - frame.complete_at,
            notes=self._found.notes,
        )


def _coupling(word: Any) -> Coupling:
    """Read a coupling: `AC`, `A1M`, `ACLIMIT` are AC; `DC`, `D50` and the like DC."""
    first = str(word or "").strip().upper()[:1]
    return "AC" if first == "A" else "DC" if first == "D" else "unknown"


def _reported(faults: list[str]) -> SourceRefused:
    return SourceRefused(
        f"the instrument reports {faults[0]}",
        "Look at the instrument's screen, clear what it complains of, and try again.",
    )


def _wait_until(moment: float | None, deadline: float) -> None:
    if moment is None:
        return
    if moment > deadline:
        raise SourceTimeout("a capture was asked for that begins after its own time-out")
    pause = moment - time.monotonic()
    if pause > 0.0:
        time.sleep(pause)
