"""What instruments answer, taken apart: numbers with units, keyed values, numeric lists."""

from __future__ import annotations

import math
import re

Field = float | str
"""One value of a preamble: a number, or a word."""

_NUMBER = re.compile(r"[-+]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][-+]?[0-9]+)?")
_PREFIXES = {
    "f": 1e-15,
    "p": 1e-12,
    "n": 1e-9,
    "u": 1e-6,
    "\N{MICRO SIGN}": 1e-6,
    "m": 1e-3,
    "k": 1e3,
    "K": 1e3,
    "M": 1e6,
    "G": 1e9,
}
_UNIT = re.compile(r"(?:V|v|S|s|Sa|Sa/s|Hz|HZ|pts|PTS|Pts|A|W|dB|%|/s)?(?:/div)?$")


class AnswerError(ValueError):
    """An answer does not have the form it should have."""


def number(text: str) -> float:
    """Read a number that may carry a unit with a prefix: `2.5E-3`, `500mV`, `1.00GSa/s`.

    Raises
    ------
    AnswerError
        It is no number, or the unit is not understood.
    """
    stripped = text.strip()
    found = _NUMBER.match(stripped)
    if found is None:
        raise AnswerError(f"{text.strip()[:40]!r} is no number")
    value = float(found.group())
    unit = stripped[found.end() :].strip()
    if not unit or _UNIT.fullmatch(unit):
        return value
    scale = _PREFIXES.get(unit[0])
    if scale is None or not _UNIT.fullmatch(unit[1:]):
        raise AnswerError(f"the unit of {stripped[:40]!r} is not understood")
    # A division by a whole power is exact where a product with its inverse is not.
    return value * scale if scale >= 1.0 else value / round(1.0 / scale)


def register(text: str | None) -> int | None:
    """Read a status register: a whole number, None where it is none."""
    stripped = (text or "").strip().lstrip("+")
    return int(stripped) if stripped.isascii() and stripped.isdigit() else None


def field(text: str) -> Field:
    """Give a number where it is one, else the word without its quotes."""
    stripped = text.strip()
    try:
        value = number(stripped)
    except AnswerError:
        return stripped.strip("\"'")
    return value if math.isfinite(value) else stripped


def numbers(text: str) -> list[float]:
    """Read comma-separated numbers.

    Raises
    ------
    AnswerError
        One of them is no number.
    """
    return [number(part) for part in text.split(",") if part.strip()]


def without_header(text: str, query: str) -> str:
    """Drop the echo of the query's header: `:WAVEFORM:PREAMBLE 0,0,...`, `C1:VDIV 1V`.

    Parameters
    ----------
    text
        The answer.
    query
        What was asked; only an echo of its last mnemonic counts, in its short or long form.
    """
    stripped = text.strip()
    head, blank, tail = stripped.partition(" ")
    asked = query.rpartition(";")[2].strip().partition(" ")[0].rstrip("?").rpartition(":")[2]
    echoed = head.rpartition(":")[2]
    if blank and echoed and asked and matches_form(echoed, asked):
        return tail.strip()
    return stripped


def split_outside_quotes(text: str, separator: str) -> list[str]:
    """Split at a separator, but not inside quotes."""
    parts, current, quote = [], "", ""
    for letter in text:
        if quote:
            quote = "" if letter == quote else quote
        elif letter in "\"'":
            quote = letter
        elif letter == separator:
            parts.append(current)
            current = ""
            continue
        current += letter
    return [*parts, current]


def keywords(text: str) -> dict[str, str]:
    """Read `:WFMPRE:BYT_NR 1;BIT_NR 8;...` into values by their last header word, upper case.

    Parts without a header are left out, so an answer with headers switched off gives nothing.
    """
    values: dict[str, str] = {}
    for part in split_outside_quotes(text, ";"):
        head, blank, tail = part.strip().partition(" ")
        if blank and re.match(r":?[A-Za-z]", head):
            values[head.rpartition(":")[2].upper()] = tail.strip()
    return values


def keyed(text: str) -> dict[str, str]:
    """Read `Key,value;Key,value;...` into values by key, lower case."""
    values: dict[str, str] = {}
    for part in split_outside_quotes(text, ";"):
        head, comma, tail = part.strip().partition(",")
        if comma:
            values[head.strip().lower()] = tail.strip()
    return values


def matches_form(word: str, form: str) -> bool:
    """Say whether a word is a form of `form`, whose capitals are its short form: `YMUlt`."""
    short = re.match(r"[^a-z]*", form)
    least = len(short.group()) if short else len(form)
    upper = form.upper()
    return len(word) >= least and upper.startswith(word.upper())
