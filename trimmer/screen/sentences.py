"""What is said in small: why, what to expect, what is the matter, where things stand."""

from __future__ import annotations

import math

from trimmer.measurement.reading import Reading
from trimmer.screen.view import View

STALE_S = 2.0
"""A followed reading older than this is said to be old."""


def percent(ratio: float, sigma: float | None = None) -> str:
    """Write a ratio in percent, with as many digits as its uncertainty bears."""
    value = 100.0 * ratio
    if sigma is None or not math.isfinite(sigma) or sigma <= 0.0:
        return f"{value:.2f} %"
    digits = min(4, max(1, -math.floor(math.log10(100.0 * sigma))))
    return f"{value:.{digits}f} ±{100.0 * sigma:.{digits}f} %"


def why(view: View) -> str:
    """Say why this turn, or what is the matter."""
    if view.awaiting is not None and view.awaiting.code != "file":
        return view.awaiting.message
    if view.advice is not None:
        return view.advice.notice or view.advice.reason
    if view.opened is None:
        return f"Opening {view.source}."
    return "Reading the unit as it stands." if not view.steps else "Working out the next turn."


def expectation(view: View) -> str:
    """Say what to expect: of THD after this turn, or of what is being waited for."""
    if view.awaiting is not None and view.awaiting.code != "file":
        left = view.awaiting.seconds_left
        return view.awaiting.remedy + ("" if left is None else f" Given up in {left:.0f} s.")
    said = []
    if view.reading is not None:
        said.append(f"THD {100.0 * view.reading.thd.value:.2f} % now")
    advice = view.advice
    if advice is not None and advice.expected_thd is not None:
        rise = " (up first)" if advice.rises_first else ""
        said.append(f"{100.0 * advice.expected_thd:.2f} % after this turn{rise}")
    elif advice is not None:
        said.append("this turn shows what the trim does")
    if view.floor is not None:
        said.append(f"floor {percent(view.floor.thd, view.floor.sigma)}")
    return ", ".join(said)


def even_skew(reading: Reading) -> float:
    """Give what uneven rise and fall costs: the length of the even orders' skew parts, ratio."""
    return float(math.sqrt(float((reading.skew_parts[0::2] ** 2).sum())))


def first_things(reading: Reading) -> str:
    """Say rise share, offset and level, their targets and what they cost."""
    rise = 100.0 * reading.rise_share
    said = [f"rise share {rise:.2f} % (50) costs {percent(even_skew(reading))}"]
    if reading.has_volts and not reading.ac_coupled:
        said.append(f"offset {volts(reading.offset)} (0)")
    if reading.has_volts:
        said.append(f"level {volts(reading.amplitude)}")
    return ", ".join(said)


def volts(value: float) -> str:
    """Write a voltage in V or mV."""
    return f"{value:.2f} V" if abs(value) >= 0.9995 else f"{1e3 * value:.0f} mV"


def matters(view: View) -> tuple[str, ...]:
    """List what the eyes should see besides the turn, the weightiest first."""
    said: list[str] = []
    if view.reading is not None:
        said += [f"{flag.message}: {flag.remedy}" for flag in view.reading.flags]
        costly = even_skew(view.reading) > 0.5 * view.reading.thd.value
        first = first_things(view.reading)
        said.insert(0 if costly and len(view.steps) <= 1 else len(said), first)
    return (*said, *view.notes)


def waiting_for(view: View) -> str:
    """Say what the tool is waiting for."""
    if view.over:
        return "nothing more"
    if view.awaiting is not None:
        return {
            "source-lost": "the source",
            "signal": "a signal",
            "confirming": "a longer reading",
            "drifting": "the unit to settle",
            "file": "the next file",
        }.get(view.awaiting.code, view.awaiting.message)
    if view.opened is None:
        return "the source"
    if view.advice is None:
        return "a reading"
    return "the hand" if view.follows else "Enter, once turned"


def freshness(view: View, now: float) -> str:
    """Say how old the reading is; whole seconds, so that the line is seldom redrawn."""
    if view.read_at is None:
        return "no reading yet"
    age = max(0.0, now - view.read_at)
    if age < 1.0:
        return "read just now"
    said = f"{age:.0f} s" if age < 120.0 else f"{age / 60.0:.0f} min"
    return f"read {said} ago"


def status(view: View, now: float) -> tuple[str, str, str, str]:
    """Say where things stand: waiting for, freshness, source and unit, book."""
    unit = view.opened.unit if view.opened is not None else ""
    place = f"{view.source}, {unit}" if unit else view.source
    return f"waits for {waiting_for(view)}", freshness(view, now), place, kept(view)


def stale(view: View, now: float) -> bool:
    """Tell whether a watched reading has stopped coming."""
    watched = view.follows and view.advice is not None and not view.over
    return watched and view.read_at is not None and now - view.read_at > STALE_S


def kept(view: View) -> str:
    """Say what the book has."""
    if view.opened is None:
        return "book not yet open"
    count = len(view.steps)
    return f"book has {count} reading{'' if count == 1 else 's'}"
