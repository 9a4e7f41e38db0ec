"""The JSON lines: one dictionary for each event, with the contract's field names.

Ratios are ratios to the fundamental, times are ISO 8601 with offset, a figure that cannot be had
is None, never 0. Fields are only ever added.
"""

from __future__ import annotations

import json
import math
from datetime import datetime
from typing import Any

from trimmer.guidance.advice import Advice, Cause, Done, Follow
from trimmer.measurement.reading import Flag, Reading

Event = dict[str, Any]


def _figure(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else float(value)


def flag_event(flag: Flag) -> dict[str, str]:
    """Give a flag as the contract's triple of code, message and remedy."""
    return {"code": flag.code, "message": flag.message, "remedy": flag.remedy}


def harmonics(reading: Reading) -> list[dict[str, float | int | None]]:
    """List crest and skew parts of orders 2 to K with their standard uncertainties (ratios)."""
    sigma = [math.sqrt(max(0.0, float(v))) for v in reading.covariance.diagonal()]
    return [
        {
            "order": order,
            "crest": _figure(reading.parts[2 * i]),
            "crest_sigma": _figure(sigma[2 * i]),
            "skew": _figure(reading.parts[2 * i + 1]),
            "skew_sigma": _figure(sigma[2 * i + 1]),
        }
        for i, order in enumerate(range(2, reading.orders + 1))
    ]


def reading_event(
    turn: int | None, taken_at: datetime, source: str, reading: Reading, **more: Any
) -> Event:
    """Give the `reading` line.

    Parameters
    ----------
    turn
        Turns made before the reading; None outside a session.
    taken_at
        When, with time zone.
    source
        Cleaned name of what was read.
    reading
        The reading.
    more
        Further fields, added at the end.
    """
    crests = reading.crests
    return {
        "event": "reading",
        "turn": turn,
        "taken_at": taken_at.isoformat(),
        "source": source,
        "fundamental_hz": _figure(reading.fundamental_hz),
        "fundamental_sigma_hz": _figure(reading.fundamental_sigma_hz),
        "amplitude_v": _figure(reading.amplitude) if reading.has_volts else None,
        "amplitude_sigma_v": _figure(reading.amplitude_sigma) if reading.has_volts else None,
        "offset_v": (
            _figure(reading.offset) if reading.has_volts and not reading.ac_coupled else None
        ),
        "offset_sigma_v": (
            _figure(reading.offset_sigma) if reading.has_volts and not reading.ac_coupled else None
        ),
        "thd": _figure(reading.thd.value),
        "thd_sigma": _figure(reading.thd.sigma),
        "thd_low": _figure(reading.thd.low),
        "thd_high": _figure(reading.thd.high),
        "thd_plus_noise": _figure(reading.thd_plus_noise),
        "orders": reading.orders,
        "harmonics": harmonics(reading),
        "crests": {
            "upper": _figure(crests.upper),
            "lower": _figure(crests.lower),
            "asymmetry": _figure(crests.asymmetry),
            "upper_sigma": _figure(crests.upper_sigma),
            "lower_sigma": _figure(crests.lower_sigma),
            "asymmetry_sigma": _figure(crests.asymmetry_sigma),
        },
        "rise_share": _figure(reading.rise_share),
        "rise_share_sigma": _figure(reading.rise_share_sigma),
        "flags": [flag_event(flag) for flag in reading.flags],
        "capture": {
            "samples": reading.samples,
            "interval_s": _figure(reading.interval_s),
            "cycles": _figure(reading.cycles),
            "bits": reading.bits,
            "frames": reading.frames,
        },
        **more,
    }


def advice_event(advice: Advice) -> Event:
    """Give the `advice` line."""
    return {
        "event": "advice",
        "turn": advice.turn,
        "trim": advice.trim,
        "sense": advice.sense,
        "turns": _figure(advice.turns),
        "degrees": _figure(round(advice.degrees, 1)),
        "expected_thd": _figure(advice.expected_thd),
        "floor_thd": _figure(advice.floor_thd),
        "floor_sigma": _figure(advice.floor_sigma),
        "reason": advice.reason,
        "rises_first": advice.rises_first,
        "going_back": advice.going_back,
        "swapped": advice.swapped,
        "notice": advice.notice,
    }


def follow_event(word: Follow, age_s: float) -> Event:
    """Give the `follow` line."""
    return {
        "event": "follow",
        "turn": word.turn,
        "trim": word.trim,
        "share": _figure(word.share),
        "say": word.say,
        "age_s": _figure(round(age_s, 4)),
        "thd": _figure(word.thd),
    }


def cause_event(cause: Cause) -> dict[str, Any]:
    """Give one item of a remainder."""
    return {
        "cause": cause.cause,
        "thd": _figure(cause.thd),
        "thd_sigma": _figure(cause.thd_sigma),
        "remedy": cause.remedy,
    }


def done_event(done: Done, thd: float | None, thd_sigma: float | None, sheet: str) -> Event:
    """Give the `done` line."""
    return {
        "event": "done",
        "verdict": done.verdict,
        "thd": _figure(thd),
        "thd_sigma": _figure(thd_sigma),
        "floor_thd": _figure(done.floor_thd),
        "floor_sigma": _figure(done.floor_sigma),
        "turns_made": done.turn,
        "net_turns": {trim: _figure(turns) for trim, turns in done.net_turns.items()},
        "expected_thd_warm": _figure(done.expected_thd_warm),
        "remainder": [cause_event(cause) for cause in done.remainder],
        "reason": done.reason,
        "sheet": sheet,
    }


def line(event: Event) -> str:
    """Write an event as one line of JSON: no newline inside, no NaN, any text escaped to ASCII."""
    return json.dumps(event, ensure_ascii=True, allow_nan=False, separators=(", ", ": "))
