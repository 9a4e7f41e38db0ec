"""From a file on disk to a waveform, whatever kind it is."""

from __future__ import annotations

import stat
from datetime import datetime
from pathlib import Path

from drivers.contract import SourceLost, SourceNotFound, SourceRefused, UnusableCapture, clean
from drivers.files.csvfile import FileCapture, Wanted, read_csv
from drivers.files.wav import is_wav, read_wav

MOST_BYTES = 1 << 29
"""Larger files are refused before a byte is read."""
SUFFIXES = frozenset((".csv", ".txt", ".tsv", ".wav"))
"""Names of files that can be captures."""


def load(path: Path) -> tuple[bytes, datetime]:
    """Read a file and the time it was saved; no handle stays open.

    Raises
    ------
    SourceError
        It is gone, not a plain file, not readable, or too large.
    """
    shown = clean(path.name)
    try:
        known = path.stat()
        if not stat.S_ISREG(known.st_mode):
            raise SourceNotFound(f"{shown} is not a file", "Name a file or a folder.")
        if known.st_size > MOST_BYTES:
            raise UnusableCapture(
                f"{shown} has {known.st_size / 1e6:.0f} MB, more than {MOST_BYTES / 1e6:.0f} MB",
                "Save fewer points: some tens of periods are plenty.",
            )
        raw = path.read_bytes()
    except FileNotFoundError as error:
        raise SourceLost(f"{shown} is gone", "Save the capture again.") from error
    except OSError as error:
        raise SourceRefused(
            f"{shown} cannot be read: {clean(error.strerror or str(error))}",
            "Check the permissions of the file, and that no other program holds it.",
        ) from error
    return raw, datetime.fromtimestamp(known.st_mtime).astimezone()


def interpret(raw: bytes, path: Path, wanted: Wanted, taken_at: datetime) -> FileCapture:
    """Read the bytes of a file as a waveform.

    Raises
    ------
    UnusableCapture
        The file is no plain waveform.
    """
    source = clean(path.name)
    try:
        if is_wav(raw):
            return read_wav(raw, wanted, taken_at, source)
        if path.suffix.casefold() == ".wav":
            raise UnusableCapture("the file does not begin as a WAV file does")
        return read_csv(raw, wanted, taken_at, source)
    except MemoryError as error:
        raise UnusableCapture(
            f"{source} is too large for this machine", "Save fewer points."
        ) from error
