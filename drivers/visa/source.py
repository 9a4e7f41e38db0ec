"""An instrument as a source of waveforms."""

from __future__ import annotations

import contextlib
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
    UnusableCapture,
    Waveform,
    clean,
)
from drivers.visa.conversation import UNKNOWN, WRONG_STATE, Conversation
from drivers.visa.frame import Converted
from drivers.visa.identity import identify, identify_serial, same_instrument
from drivers.visa.kept import KeptSettings
from drivers.visa.link import Link, open_link
from drivers.visa.memory import Known, remember
from drivers.visa.probing import Found, find_dialect
from drivers.visa.ranging import fit_range
from drivers.visa.settling import agree, settle
from drivers.visa.speaker import Frame, Speaker

_MOST_TRIES = 4
"""Frames taken in one capture before the instrument is said to send nothing new."""

_LEAVING_S = 1.0

_GRACE_S = 0.35
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
        self._to_fit = set_range
        self._turn = threading.Lock()
        self._closed = False
        self._last: bytes | None = None
        self._seen: dict[str, str] = {}
        self._kept = KeptSettings()
        deadline = time.monotonic() + timeout_s
        self._link: Link = open_link(resource, timeout_s)
        try:
            talk = Conversation(self._link, {"channel": channel})
            self._speed: int | None = None
            if self._link.kind == "ASRL":
                self._identity, self._speed = identify_serial(talk, deadline)
            else:
                self._identity = identify(talk, deadline)
            # Finding a dialect takes as long as the silences in it; each has its own bound.
            self._found: Found = find_dialect(
                talk, self._identity, dialect, channel, settings_dir, self._kept
            )
        except BaseException:
            self._link.close()
            raise

    @property
    def info(self) -> SourceInfo:
        """What this source is."""
        settings = {"channel": str(self._channel), "dialect found": self._found.how, **self._seen}
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
        except UnusableCapture:
            raise  # what was said was understood
        except SourceError:
            # An answer too many or too few shifts all that follow: this link is not used again.
            self._link.broken = True
            raise
        finally:
            self._turn.release()

    def close(self) -> None:
        """Give the device back. Safe to call twice."""
        if self._closed:
            return
        self._closed = True
        owned = self._turn.acquire(timeout=_LEAVING_S)
        if not owned:  # a capture is under way in another thread: end it
            self._link.close()
            owned = self._turn.acquire(timeout=_LEAVING_S)
        try:
            if owned:
                self._leave(time.monotonic() + _LEAVING_S)
        finally:
            self._link.close()
            if owned:
                self._turn.release()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()

    def _leave(self, deadline: float) -> None:
        """Put back what was changed; a broken link is opened once more if there is need."""
        with contextlib.suppress(SourceError):
            if self._link.broken and self._kept:
                self._reconnect(deadline)
            if not self._link.broken:
                self._found.speaker.leave(deadline)

    # Inside --------------------------------------------------------------------------------

    def _capture(self, request: CaptureRequest, deadline: float) -> Waveform:
        _wait_until(request.fresh_after, deadline)
        speaker = self._ready(deadline)
        speaker.ask_average(max(1, request.average), deadline)
        speaker.ask_points(request.samples, deadline)
        if self._to_fit:
            fit_range(speaker, deadline)
            self._to_fit = False
        frame, converted = self._fresh(deadline)
        return self._waveform(frame, converted)

    def _fresh(self, deadline: float) -> tuple[Frame, Converted]:
        """Take frames until one is new and the instrument has no fault to tell of."""
        why: SourceError | None = None
        for _ in range(_MOST_TRIES):
            speaker = self._found.speaker
            try:
                frame = speaker.take(deadline)
            except SourceTimeout as silence:
                raise self._explained(speaker, silence) from silence
            faults = speaker.faults(deadline)
            if faults:
                why = _reported(faults)
                if not speaker.sure_of_its_way:  # the fault may be that of the command that arms
                    speaker.try_another_way()
                continue
            if self._found.rivals and not self._settle(frame, deadline):
                continue
            try:
                converted = speaker.convert(frame)
            except UnusableCapture as nothing:  # never armed, perhaps, in the way that was tried
                if frame.payload or not speaker.try_another_way():
                    raise
                why = nothing
                continue
            if frame.payload != self._last or np.ptp(converted.volts) == 0.0:
                if self._last is not None or speaker.sure_of_its_way:
                    speaker.stay()
                self._last = frame.payload
                return frame, converted
            why = SourceTimeout("the instrument keeps sending the frame of before")
            speaker.try_another_way()
        raise why if why is not None else SourceTimeout("no frame could be had")

    def _explained(self, speaker: Speaker, silence: SourceTimeout) -> SourceError:
        """After a silence, ask in the little time left whether the instrument refused."""
        try:
            grace = time.monotonic() + _GRACE_S
            speaker.talk.step_in(grace)
            faults = speaker.faults(grace)
            if not speaker.dialect.errors.asked:
                faults = _told(speaker.talk.why_silent(grace))
        except SourceError:
            return silence
        return _reported(faults) if faults else silence

    def _settle(self, frame: Frame, deadline: float) -> bool:
        """Tell rivals apart, once a frame comes that they read differently.

        Returns
        -------
        bool
            False where the frame must be taken again, in another dialect than before.
        """
        found = self._found
        if agree(found.rivals, frame.fields, frame.payload):
            return True
        speaker = found.speaker
        text = speaker.text_values(deadline)
        settled = settle(found.rivals, frame.fields, frame.payload, text) if text else None
        found.rivals = ()
        if settled is None:
            speaker.learn(settled="plausible reference values")
            found.notes = (_NOT_CERTAIN,)
            return True
        told = {
            "signed": settled.reading.signed,
            "big_endian": settled.reading.big_endian,
            "settled": "a frame read as codes and as text",
        }
        if settled.dialect is found.dialect:
            speaker.learn(**told)
            return True
        known = Known(settled.dialect.name).changed(**told)
        self._speak(Speaker(speaker.talk, settled.dialect, known, self._channel, self._kept))
        found.speaker.set_up(deadline)
        return False

    def _speak(self, speaker: Speaker) -> None:
        self._found.dialect, self._found.speaker = speaker.dialect, speaker

    def _ready(self, deadline: float) -> Speaker:
        """Give a speaker over a link in step, replacing the link if need be."""
        if self._link.broken:
            self._reconnect(deadline)
        return self._found.speaker

    def _reconnect(self, deadline: float) -> None:
        self._link.close()
        left = deadline - time.monotonic()
        if left <= 0.0:
            raise SourceTimeout(f"{self._name} did not come back in time")
        self._link = open_link(self._resource, left, again=True)
        try:
            talk = Conversation(self._link, {"channel": self._channel})
            if self._speed is not None:
                self._link.set_speed(self._speed)
            self._link.freshen(deadline)
            identity = self._identity_again(talk, deadline)
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
        self._speak(speaker)
        self._to_fit = self._set_range  # what rebooted has forgotten

    def _identity_again(self, talk: Conversation, deadline: float) -> str:
        """Ask who answers; something else than an identification may still become one."""
        try:
            return identify(talk, deadline)
        except SourceRefused as error:
            raise SourceLost(str(error)) from error

    def _waveform(self, frame: Frame, converted: Converted) -> Waveform:
        known = self._found.speaker.known
        if known != self._found.kept:
            remember(self._settings_dir, self._identity, known)
            self._found.kept = known
        coupling = _coupling(frame.fields.get(self._found.dialect.coupling or ""))
        self._seen = _seen(converted, coupling)
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
            coupling=coupling,
            averaged=converted.averaged,
            age_s=time.monotonic() - frame.complete_at,
            notes=(*self._found.notes, *converted.remarks),
        )


def _seen(converted: Converted, coupling: Coupling) -> dict[str, str]:
    """Give what a capture shows of the instrument's settings, for the log."""
    seen = {
        "samples": str(converted.volts.size),
        "samples a second": f"{1.0 / converted.interval_s:.6g}",
        "coupling": coupling,
        "averaged": str(converted.averaged),
    }
    if converted.low_rail is not None and converted.high_rail is not None:
        seen["range, V"] = f"{converted.low_rail:.4g} to {converted.high_rail:.4g}"
    if converted.bits is not None:
        seen["bits"] = str(converted.bits)
    return seen


def _coupling(word: Any) -> Coupling:
    """Read a coupling: `AC`, `A1M`, `ACLIMIT` are AC; `DC`, `D50` and the like DC."""
    first = str(word or "").strip().upper()[:1]
    return "AC" if first == "A" else "DC" if first == "D" else "unknown"


def _told(why: str | None) -> list[str]:
    """Put the event register in words, for instruments without an error queue."""
    if why == WRONG_STATE:
        return ["that it cannot do this now (execution error)"]
    return ["that it does not know the query (command error)"] if why == UNKNOWN else []


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
