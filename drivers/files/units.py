"""Units as instruments write them: `mV`, `(us)`, `second`, `Volts`, and what they are in SI."""

from __future__ import annotations

import re
from dataclasses import dataclass

_PREFIX = {
    "": 1.0,
    "f": 1e-15,
    "p": 1e-12,
    "n": 1e-9,
    "u": 1e-6,
    "\N{MICRO SIGN}": 1e-6,
    "\N{GREEK SMALL LETTER MU}": 1e-6,
    "m": 1e-3,
    "k": 1e3,
    "K": 1e3,
    "M": 1e6,
    "G": 1e9,
}
_WORD_PREFIX = {
    "": 1.0,
    "pico": 1e-12,
    "nano": 1e-9,
    "micro": 1e-6,
    "milli": 1e-3,
    "kilo": 1e3,
    "mega": 1e6,
    "giga": 1e9,
}
_BASES = {
    "s": ("s", 1.0),
    "V": ("V", 1.0),
    "A": ("A", 1.0),
    "W": ("W", 1.0),
    "Hz": ("Hz", 1.0),
    "Sa/s": ("Hz", 1.0),
    "S/s": ("Hz", 1.0),
    "Samples/s": ("Hz", 1.0),
    "SPS": ("Hz", 1.0),
    "\N{OHM SIGN}": ("ohm", 1.0),
    "\N{GREEK CAPITAL LETTER OMEGA}": ("ohm", 1.0),
}
_WORDS = {
    "second": ("s", 1.0),
    "sec": ("s", 1.0),
    "volt": ("V", 1.0),
    "ampere": ("A", 1.0),
    "amp": ("A", 1.0),
    "watt": ("W", 1.0),
    "hertz": ("Hz", 1.0),
}
_ALONE = {
    "min": ("s", 60.0),
    "minute": ("s", 60.0),
    "minutes": ("s", 60.0),
    "h": ("s", 3600.0),
    "hour": ("s", 3600.0),
    "hours": ("s", 3600.0),
    "%": ("%", 1.0),
    "div": ("div", 1.0),
    "divs": ("div", 1.0),
    "divisions": ("div", 1.0),
    "db": ("dB", 1.0),
    "dbv": ("dB", 1.0),
    "dbm": ("dB", 1.0),
    "dbu": ("dB", 1.0),
    "dbfs": ("dB", 1.0),
    "deg": ("degree", 1.0),
    "\N{DEGREE SIGN}": ("degree", 1.0),
    "\N{DEGREE SIGN}c": ("celsius", 1.0),
    "degc": ("celsius", 1.0),
    **dict.fromkeys(
        ("counts", "count", "codes", "code", "lsb", "adc", "raw", "digits", "ticks"), ("code", 1.0)
    ),
    **dict.fromkeys(
        ("sample", "samples", "pts", "pt", "points", "point", "sequence", "index", "#"),
        ("index", 1.0),
    ),
    "samples per second": ("Hz", 1.0),
}


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit: what it measures and how large it is."""

    base: str
    """The SI unit (`s`, `V`, `A`, `Hz`, ...), or `code`, `index`, `dB`, `div`, `%`."""
    factor: float = 1.0
    """Size in the base."""


def _exact_table() -> dict[str, Unit]:
    table = {
        prefix + base: Unit(name, size * factor)
        for prefix, size in _PREFIX.items()
        for base, (name, factor) in _BASES.items()
    }
    for prefix, size in _WORD_PREFIX.items():
        for word, (name, factor) in _WORDS.items():
            for form in (prefix + word, prefix + word + "s"):
                table[form] = Unit(name, size * factor)
    for prefix in ("m", "u", "n", "\N{MICRO SIGN}", "\N{GREEK SMALL LETTER MU}"):
        table[prefix + "sec"] = Unit("s", _PREFIX[prefix])
    table.update({word: Unit(name, factor) for word, (name, factor) in _ALONE.items()})
    return table


_EXACT = _exact_table()
# Headers in capitals: MV and MS are milli, since a megavolt or a megasecond meets no bench.
_FOLDED = {
    key.casefold(): unit
    for key, unit in sorted(_EXACT.items(), key=lambda pair: -pair[1].factor)
    if not (unit.base == "Hz" and unit.factor < 1.0)
}
_FOLDED |= {"mhz": Unit("Hz", 1e6), "msa/s": Unit("Hz", 1e6), "ms/s": Unit("Hz", 1e6)}
_FOLDED |= {"mv": Unit("V", 1e-3), "ms": Unit("s", 1e-3), "pv": Unit("V", 1e-12)}


def parse_unit(word: str) -> Unit | None:
    """Read a unit by itself; None where the word is no unit known here."""
    word = word.strip().strip("()[]{}").strip(" .")
    if not word or len(word) > 24:
        return None
    return _EXACT.get(word) or _FOLDED.get(word.casefold())


def parse_prefix(word: str) -> float | None:
    """Read an SI prefix by itself (`m`, `k`, `u`); None where it is none."""
    return _PREFIX.get(word) if word else None


_BRACKETED = re.compile(r"[(\[{]\s*([^()\[\]{}]{1,24}?)\s*[)\]}]")
_TAILS = (
    re.compile(r"/\s*(\S{1,12})$"),
    re.compile(r"\bin\s+(\S{1,12})$", re.IGNORECASE),
    re.compile(r",\s*(\S{1,12})$"),
)
_LOOSE_TAIL = re.compile(r"[\s_\-.](\S{2,12})$")


def unit_in_name(name: str) -> Unit | None:
    """Find the unit that a column's name carries: `Time (s)`, `CH1 [mV]`, `U/V`, `t in us`.

    A bare last letter counts for nothing: the A of `Channel A` is no ampere.
    """
    for content in _BRACKETED.findall(name):
        if unit := parse_unit(content):
            return unit
    for pattern in _TAILS:
        if (found := pattern.search(name)) and (unit := parse_unit(found[1])):
            return unit
    if (found := _LOOSE_TAIL.search(name)) and (unit := parse_unit(found[1])):
        # `CH1 Min` is a minimum and no time, `Channel 1 Raw` a name and no unit to scale by.
        return unit if unit.base in ("s", "V") and found[1].casefold() != "min" else None
    return None
