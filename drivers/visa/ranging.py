"""Vertical range and offset that use the codes well: set only when asked for, put back at the end."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from drivers.visa import answers
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
    lowest, highest = float(frame.volts.min()), float(frame.volts.max())
    middle = 0.5 * (low_v + high_v)
    if frame.clipped:
        return Step(_OPEN_UP, 0.5 * (lowest + highest))
    span = highest - lowest
    code = frame.code or full / 256.0
    if full <= 0.0 or span < _LEAST_CODES * code:
        return None
    centre = 0.5 * (lowest + highest)
    low_share, high_share = _GOOD_SHARES
    if low_share <= span / full <= high_share and abs(centre - middle) <= _CENTRED * full:
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
    talk = speaker.talk
    for _ in range(_MOST_STEPS):
        scale = _number(speaker.kept.keep(talk, settings.scale, deadline))
        if scale is None:
            return
        if settings.offset is not None:
            speaker.kept.keep(talk, settings.offset, deadline)
        frame = speaker.convert(speaker.take(deadline))
        low = frame.low_rail if frame.low_rail is not None else -scale
        high = frame.high_rail if frame.high_rail is not None else scale
        step = next_step(frame, low, high)
        if step is None:
            return
        talk.tell(f"{settings.scale} {scale * step.scale:.6G}", deadline)
        if settings.offset is not None:
            offset = settings.offset_from_centre.number({"centre": step.centre_v})
            talk.tell(f"{settings.offset} {offset:.6G}", deadline)
        if speaker.faults(deadline):
            touched = [settings.scale, *([settings.offset] if settings.offset else [])]
            speaker.kept.put_back(talk, touched, deadline)
            return
        now = _number(talk.ask(f"{settings.scale}?", deadline))
        if now is not None and step.scale < 1.0 and np.isclose(now, scale, rtol=0.02):
            return  # the instrument has no finer step


def _number(text: str | None) -> float | None:
    if text is None:
        return None
    try:
        value = answers.number(text)
    except answers.AnswerError:
        return None
    return value if value > 0.0 else None
