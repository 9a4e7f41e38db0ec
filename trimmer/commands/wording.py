"""Sentences for plain lines: good for a screen reader, a log, a person with a screwdriver."""

from __future__ import annotations

import math

from trimmer.guidance.advice import Advice, Done
from trimmer.measurement.reading import Interval, Reading
from trimmer.upkeep.limits import judged

VERDICTS = {
    "at-floor": "Done: both trims are at their best",
    "end-stop": "Done: the best lies past an end stop; this is the best inside the travel",
    "no-response": "Ended: neither trim changes the waveform",
    "unstable": "Ended: the reading does not hold still",
    "stopped": "Stopped before the end",
}


def percent(ratio: float | None, sigma: float | None = None) -> str:
    """Write a ratio in percent, with as many digits as its standard uncertainty bears."""
    if ratio is None or not math.isfinite(ratio):
        return "not known"
    if sigma is None or not math.isfinite(sigma) or sigma <= 0:
        return f"{100 * ratio:.3g} %"
    digits = _digits(100 * sigma)
    return f"{100 * ratio:.{digits}f} % \N{PLUS-MINUS SIGN} {100 * sigma:.{digits}f}"


def _digits(sigma: float) -> int:
    """Give the decimals that show two digits of a standard uncertainty."""
    return min(6, max(0, 1 - math.floor(math.log10(sigma)))) if sigma > 0 else 3


def between(thd: Interval) -> str:
    """Write a 95 % interval in percent."""
    digits = _digits(100 * thd.sigma)
    return f"{100 * thd.low:.{digits}f} % to {100 * thd.high:.{digits}f} %"


def frequency(hertz: float, sigma: float) -> str:
    """Write a frequency with as many digits as its standard uncertainty bears."""
    return f"{hertz:.{_digits(sigma)}f} Hz"


def crest(name: str, value: float, sigma: float) -> str:
    """Say whether a crest is too pointed or too flat."""
    if abs(value) < 2 * sigma:
        return f"{name} crest right within {percent(2 * sigma)}"
    return f"{name} crest too {'pointed' if value > 0 else 'flat'} by {percent(abs(value), sigma)}"


def reading_lines(source: str, reading: Reading, notes: tuple[str, ...] = ()) -> list[str]:
    """Write a reading as lines."""
    crests = reading.crests
    lines = [
        f"{source}: THD {percent(reading.thd.value, reading.thd.sigma)} "
        f"(95 % interval {between(reading.thd)}), "
        f"orders 2 to {reading.orders}, "
        f"at {frequency(reading.fundamental_hz, reading.fundamental_sigma_hz)}.",
        f"  {crest('upper', crests.upper, crests.upper_sigma)}; "
        f"{crest('lower', crests.lower, crests.lower_sigma)}.",
        f"  Rise share {percent(reading.rise_share, reading.rise_share_sigma)} of the period; "
        + level(reading),
    ]
    lines += [f"  Note: {note}" for note in notes]
    for flag in reading.flags:
        lines.append(f"  Mind ({flag.code}): {flag.message} {flag.remedy}")
    return lines


def level(reading: Reading) -> str:
    """Write amplitude and offset, as far as the source knows them."""
    if not reading.has_volts:
        return f"level {percent(reading.amplitude)} of full scale (peak)."
    text = f"amplitude {reading.amplitude:.4g} V peak"
    return text + ("." if reading.ac_coupled else f", offset {1000 * reading.offset:.1f} mV.")


def advice_lines(advice: Advice) -> list[str]:
    """Write an advice as lines: the order first, then why, then what to expect."""
    sense = advice.sense.upper()
    lines = [
        f"TURN THE {advice.trim.upper()} TRIM {sense} by {advice.turns:.3f} turns "
        f"({advice.degrees:.0f} degrees)."
    ]
    if advice.notice:
        lines.append(f"  {advice.notice}")
    lines.append(f"  Why: {advice.reason}")
    if advice.expected_thd is not None:
        rises = " It rises first; that is right." if advice.rises_first else ""
        lines.append(f"  THD to expect: {percent(advice.expected_thd)}.{rises}")
    if advice.floor_thd is not None:
        lines.append(f"  Floor: {percent(advice.floor_thd, advice.floor_sigma)}.")
    return lines


def done_lines(done: Done, thd: float | None, sigma: float | None, sheet: str) -> list[str]:
    """Write the end of a session as lines."""
    lines = [f"{VERDICTS[done.verdict]}. THD {percent(thd, sigma)} after {done.turn} turns."]
    if done.reason:
        lines.append(f"  {done.reason}")
    if done.floor_thd is not None:
        lines.append(f"  Floor: {percent(done.floor_thd, done.floor_sigma)}.")
    net = ", ".join(f"{trim} {turns:+.3f} turns" for trim, turns in done.net_turns.items())
    lines.append(f"  From the start: {net} (plus is clockwise).")
    lines += [
        f"  Left: {cause.cause} {percent(cause.thd, cause.thd_sigma)}. {cause.remedy}"
        for cause in done.remainder
    ]
    if done.expected_thd_warm is not None:
        lines.append(f"  THD to expect once warm: {percent(done.expected_thd_warm)}.")
    lines.append("  Check again when the unit is warm.")
    lines.append(f"Sheet {sheet}.")
    return lines


def limit_fields(reading: Reading, limit_thd: float | None) -> dict[str, str]:
    """Give the verdict on a limit of THD as fields of a line; none without a limit."""
    if limit_thd is None:
        return {}
    return {"verdict": judged(reading.thd.low, reading.thd.high, limit_thd)}


def limit_lines(reading: Reading, limit_thd: float | None) -> list[str]:
    """Say whether THD is within a limit, its 95 % interval counted."""
    if limit_thd is None:
        return []
    said = {
        "inside": "within",
        "outside": "above",
        "cannot-tell": "too uncertain to be told from",
    }[judged(reading.thd.low, reading.thd.high, limit_thd)]
    return [f"  THD is {said} the limit of {percent(limit_thd)}."]
