"""Vertical range and offset that use the codes well: set only when asked for, put back at the end."""

from __future__ import annotations

from dataclasses import dataclass

from drivers.visa import answers
from drivers.visa.dialect import Range
from drivers.visa.frame import Converted
from drivers.visa.speaker import Speaker

_WANTED_SHARE = 0.8
"""Share of the range the signal should span: room for a hand that turns a trim the wrong way."""

_GOOD_SHARES = (0.55, 0.92)
_CENTRED = 0.06
_MOST_STEPS = 6
_OPEN_UP = 2.5
"""A clipped signal's size is not known; the range is opened by so much and looked at again."""

_LEAST_CODES = 8
_WAIT_S = 1.0


@dataclass(frozen=True, slots=True)
class Step:
    """Where range and offset should go."""

    scale: float
    """Factor on the scale."""
    centre_v: float
    """Volts for the middle of the range."""


def next_step(frame: Converted, low_v: float, high_v: float) -> Step | None:
    """Say how range and offset should change.

    Parameters
    ----------
    frame
        A frame.
    low_v, high_v
        The rails.

    Returns
    -------
    Step or None
        None where the codes are used well, or there is no signal to go by.
    """
    full = high_v - low_v
    if full <= 0.0:
        return None
    lowest, highest = float(frame.volts.min()), float(frame.volts.max())
    code = frame.code or full / 256.0
    centre, span = 0.5 * (lowest + highest), highest - lowest
    if frame.clipped or lowest <= low_v + 0.5 * code or highest >= high_v - 0.5 * code:
        return Step(_OPEN_UP, centre)
    if span < _LEAST_CODES * code:
        return None
    low_share, high_share = _GOOD_SHARES
    off_centre = abs(centre - 0.5 * (low_v + high_v))
    if low_share <= span / full <= high_share and off_centre <= _CENTRED * full:
        return None
    return Step(span / (_WANTED_SHARE * full), centre)


def fit_range(speaker: Speaker, deadline: float) -> None:
    """Set range and offset so that the signal spans most of the codes.

    What stood before is kept, and put back when the session ends. A refusal by the instrument
    leaves its settings as they were.
    """
    settings = speaker.dialect.range
    if settings is None:
        return
    touched = [settings.scale, *([settings.offset] if settings.offset else [])]
    for setting in touched:
        speaker.kept.keep(speaker.talk, setting, deadline)
    before: float | None = None
    for _ in range(_MOST_STEPS):
        frame = speaker.convert(speaker.take(deadline))
        # Asked after the frame: some instruments tell the scale of the frame they hold.
        scale = _number(speaker.talk.quietly(f"{settings.scale}?", _WAIT_S, deadline))
        rails = _rails(speaker, settings, frame, scale, deadline)
        if scale is None or scale <= 0.0 or rails is None:
            return
        step = next_step(frame, *rails)
        full = rails[1] - rails[0]
        no_finer = before is not None and step is not None and abs(full - before) < 0.02 * full
        if step is None or (no_finer and step.scale < 1.0):
            return
        before = full
        if not _set(speaker, settings, scale * step.scale, step.centre_v, deadline):
            speaker.kept.put_back(speaker.talk, touched, deadline)
            return


def _rails(
    speaker: Speaker, settings: Range, frame: Converted, scale: float | None, deadline: float
) -> tuple[float, float] | None:
    """Give the rails as the frame tells them, else as the settings do."""
    if frame.low_rail is not None and frame.high_rail is not None:
        return frame.low_rail, frame.high_rail
    if scale is None or settings.span is None:
        return None
    offset = 0.0
    if settings.offset is not None:
        offset = _number(speaker.talk.quietly(f"{settings.offset}?", _WAIT_S, deadline)) or 0.0
    half = 0.5 * settings.span * scale
    return offset - half, offset + half


def _set(speaker: Speaker, settings: Range, scale: float, centre_v: float, deadline: float) -> bool:
    """Set scale and offset; False where the instrument refuses."""
    speaker.talk.tell(f"{settings.scale} {scale:.6G}", deadline)
    if settings.offset is not None:
        offset = settings.offset_from_centre.number({"centre": centre_v})
        speaker.talk.tell(f"{settings.offset} {offset:.6G}", deadline)
    speaker.forget_optional()
    return not speaker.faults(deadline)


def _number(text: str | None) -> float | None:
    if text is None:
        return None
    try:
        return answers.number(text)
    except answers.AnswerError:
        return None
