"""Figures and uncertainties in the words of a page."""

from __future__ import annotations

import math
import unicodedata
from datetime import UTC, datetime

from drivers import clean
from trimmer.measurement.reading import Interval

CAUTIONS = (
    "This page reports measurements; it is no approval of safety. Opening mains-powered equipment "
    "exposes lethal voltage: unplug it, wait, discharge, verify. Work inside a live unit is for qualified "
    "persons and not alone. Local rules, the maker's papers and licensed practice come first."
)
UNCERTAINTY = (
    "A figure after ± is a standard uncertainty: the value lies that near with a chance of about two in "
    "three, and within twice as much with about nineteen in twenty. It covers noise, and an allowance for "
    "the digitiser's own unevenness.",
    "THD is the total harmonic distortion relative to the fundamental. A crest part makes the crests more "
    "or less pointed, which the trims set; a skew part leans the wave over, which they do not.",
)
UNSEEN = {"Cf", "Co", "Cs", "Cn", "Zl", "Zp"}
"""Categories of characters (Unicode) that are left out."""
VERDICTS = {
    "at-floor": "Both trims are at their best.",
    "end-stop": "The best lies past an end stop; this is the best inside the travel.",
    "no-response": "Neither trim changes the waveform.",
    "unstable": "The reading does not hold still.",
    "stopped": "Ended before the best was reached.",
    "inside": "Inside its limits at every point.",
    "outside": "Outside its limits.",
    "cannot-tell": "Too uncertain, or too few points, to tell.",
    "holds": "It was still as logged.",
    "drifted": "It had changed, and trimming would not have helped.",
    "retrim": "It was worth trimming again.",
    "settled": "It had settled.",
    "settling": "It was still warming up.",
    "unsettled": "It did not settle.",
}
CAUSES = {
    "time-symmetry": "unequal rise and fall",
    "slewing": "a slewing output",
    "bandwidth": "a slow node",
    "shaper": "the shaper itself",
    "hum": "hum",
    "noise": "noise",
    "clipping-in-unit": "crests cut in the unit",
    "clipping-in-digitiser": "crests cut in the digitiser",
    "supply": "a low supply",
}


def decimals(sigma: float) -> int:
    """Give the decimals that show two digits of a standard uncertainty."""
    if not sigma > 0.0 or not math.isfinite(sigma):
        return 3
    return min(6, max(0, 1 - math.floor(math.log10(sigma))))


def percent(value: float | None, sigma: float | None = None) -> str:
    """Write a ratio in percent, with its standard uncertainty where it is known."""
    if value is None or not math.isfinite(value):
        return "not known"
    if sigma is None or not sigma > 0.0 or not math.isfinite(sigma):
        return f"{100.0 * value:.3g} %"
    places = decimals(100.0 * sigma)
    return f"({100.0 * value:.{places}f} ± {100.0 * sigma:.{places}f}) %"


def between(thd: Interval) -> str:
    """Write a 95 % interval in percent."""
    places = decimals(100.0 * thd.sigma)
    return f"{100.0 * thd.low:.{places}f} % to {100.0 * thd.high:.{places}f} %"


def hertz(value: float | None) -> str:
    """Write a frequency."""
    if value is None:
        return "not known"
    return f"{value:.4g} Hz" if value < 1000.0 else f"{value / 1000.0:.4g} kHz"


def moment(when: datetime) -> str:
    """Write an instant, the same on every machine."""
    return f"{when.astimezone(UTC):%Y-%m-%d %H:%M} UTC"


def plural(count: int, word: str) -> str:
    """Write a number of things."""
    return f"{count} {word}{'' if count == 1 else 's'}"


def shown(text: object, limit: int = 80) -> str:
    """Make any text fit to stand on a page: one line, bounded, no characters that act on others.

    Besides control characters that is what has no shape of its own, such as the marks that turn the
    direction of writing round.
    """
    plain = "".join(each for each in str(text) if unicodedata.category(each) not in UNSEEN)
    return clean(plain, limit)


def turned(trim: str, turns: float) -> str:
    """Write a net turn."""
    sense = "clockwise" if turns >= 0 else "counter-clockwise"
    return f"{trim} {abs(turns):.3f} turns {sense}"
