"""From the bytes of a text file to its lines, whatever the encoding, line ends and padding."""

from __future__ import annotations

import codecs
import re
from dataclasses import dataclass

from drivers.contract import UnusableCapture

NO_TEXT = "Save the capture as text (comma-separated values) or as WAV."
HOLE = "\N{REPLACEMENT CHARACTER}"
"""Stands for bytes that are missing inside the file; no number parses with it."""

_MARKS = (
    (codecs.BOM_UTF8, "utf-8", "UTF-8"),
    (codecs.BOM_UTF32_LE, "utf-32-le", "UTF-32"),
    (codecs.BOM_UTF32_BE, "utf-32-be", "UTF-32"),
    (codecs.BOM_UTF16_LE, "utf-16-le", "UTF-16"),
    (codecs.BOM_UTF16_BE, "utf-16-be", "UTF-16"),
)
_SEPARATOR_LINE = re.compile(r'^"?sep=(.)"?$', re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Text:
    """The lines of a text file."""

    lines: list[str]
    """The lines, without their ends."""
    delimiter: str | None
    """The delimiter that a first line ``sep=;`` states."""
    ended: bool
    """True where the last line has a line end."""
    notes: tuple[str, ...]
    """What was found about the encoding."""


def decode(raw: bytes) -> Text:
    """Turn the bytes of a file into lines.

    Raises
    ------
    UnusableCapture
        The bytes are no text.
    """
    text, notes = _characters(raw)
    text = text.rstrip("\x1a \t")
    head = text[:65536]
    odd = sum(1 for mark in head if mark < " " and mark not in "\t\r\n\f\v")
    if odd > len(head) // 100:
        raise UnusableCapture("the file holds binary data, not text", NO_TEXT)
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    ended = lines[-1] == ""
    while lines and not lines[-1].strip():
        lines.pop()
    delimiter = None
    if lines and (stated := _SEPARATOR_LINE.match(lines[0].strip(" \r"))):
        delimiter = stated[1]
        lines[0] = ""
    return Text(lines, delimiter, ended, notes)


def _characters(raw: bytes) -> tuple[str, tuple[str, ...]]:
    for mark, codec, name in _MARKS:
        if raw.startswith(mark):
            return raw[len(mark) :].decode(codec, errors="replace").rstrip("\0"), (f"{name} text",)
    if wide := _unmarked_wide(raw):
        return raw.decode(wide, errors="replace").rstrip("\0"), ("UTF-16 text",)
    raw, notes = _without_padding(raw)
    try:
        return raw.decode("utf-8"), notes
    except UnicodeDecodeError:
        return raw.decode("latin-1"), (*notes, "text taken as Latin-1")


def _unmarked_wide(raw: bytes) -> str | None:
    """UTF-16 without its mark: digits leave every other byte zero."""
    head = raw[:4096]
    if len(head) < 16:
        return None
    low, high = head[0::2].count(0), head[1::2].count(0)
    if high > 0.4 * len(head) and low < 0.02 * len(head):
        return "utf-16-le"
    if low > 0.4 * len(head) and high < 0.02 * len(head):
        return "utf-16-be"
    return None


def _without_padding(raw: bytes) -> tuple[bytes, tuple[str, ...]]:
    """Drop zero bytes that pad records or the end of the file; mark those that replace data.

    A record format pads every line. Zeros on a few lines only are a hole: a block that was never
    written, and what stands around it must not be joined to a number.
    """
    if b"\0" not in raw:
        return raw, ()
    raw = raw.rstrip(b"\0")
    padded = len(re.findall(rb"\0+(?=[\r\n])", raw))
    if padded >= 0.5 * (raw.count(b"\n") or raw.count(b"\r") or 1):
        raw = re.sub(rb"\0+(?=[\r\n])", b"", raw)
    return re.sub(rb"\0+", HOLE.encode(), raw), ("zero bytes dropped as padding",)
