"""Which files of a folder are new, in what order, and whether they are still being written."""

from __future__ import annotations

import os
from collections.abc import Iterable
from dataclasses import dataclass, replace
from pathlib import Path

from drivers.files.capture import SUFFIXES

STEADY_S = 0.15
"""A file whose size and time stood still for so long may be complete."""
STALLED_S = 3.0
"""A file that looks cut short but stands still for so long will not grow any more."""
HOLDING_S = 10.0
"""A file that keeps growing holds up those that came after it for so long."""
_TEMPORARY = (".part", ".tmp", ".temp", ".crdownload", ".partial", "~")


@dataclass(frozen=True, slots=True)
class Mark:
    """What tells one state of a file from the next."""

    inode: int
    """The file itself, whatever its name."""
    size: int
    """Bytes."""
    saved_ns: int
    """Time of the last write, ns."""


@dataclass(frozen=True, slots=True)
class Seen:
    """A file in the folder, as seen by the looks so far."""

    name: str
    """Its name in the folder."""
    mark: Mark
    """Its state at the last look."""
    since: float
    """`time.monotonic()` when this state was first seen, under whatever name."""
    first: float
    """`time.monotonic()` when the file was first seen as a candidate."""
    order: tuple[int, int, str]
    """Number of the look that saw it first, time of last write then, name."""
    pace_s: float = 0.0
    """Longest pause seen between two writes, seconds."""

    def is_steady(self, now: float) -> bool:
        """Say whether the file stands still: for longer than its writer has ever paused."""
        return now - self.since >= max(STEADY_S, min(3.0 * self.pace_s, STALLED_S))

    def is_stalled(self, now: float) -> bool:
        """Say whether the file has stood still for so long that it will not grow any more."""
        return now - self.since >= STALLED_S


def is_candidate(name: str) -> bool:
    """Say whether a name is one of a capture: not hidden, not temporary, of a kind read here."""
    folded = name.casefold()
    if folded.startswith((".", "~")) or folded.endswith(_TEMPORARY):
        return False
    return os.path.splitext(folded)[1] in SUFFIXES


class Watch:
    """The looks at one folder.

    Polling, not notification: instruments save to shares of all kinds, and those notify of
    nothing. A look reads the folder's entries and opens no file.
    """

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self._looks = 0
        self._steady: dict[Mark, float] = {}
        self._new: dict[str, Seen] = {}
        self._done: dict[str, Mark] = {}

    def look(self, now: float) -> list[Seen]:
        """Look once.

        Returns
        -------
        list of Seen
            Files not yet settled, in order of their appearance.

        Raises
        ------
        OSError
            The folder cannot be read.
        """
        self._looks += 1
        entries = list(self._entries())
        self._steady = {mark: self._steady.get(mark, now) for _, mark in entries}
        there = {name: mark for name, mark in entries if is_candidate(name)}
        self._new = {name: seen for name, seen in self._new.items() if name in there}
        self._done = {name: mark for name, mark in self._done.items() if name in there}
        for name, mark in there.items():
            if self._done.get(name) != mark:
                self._new[name] = self._updated(name, mark, now)
        return sorted(self._new.values(), key=lambda seen: seen.order)

    def settle(self, seen: Seen) -> None:
        """Count this state of a file as dealt with."""
        self._done[seen.name] = seen.mark
        self._new.pop(seen.name, None)

    def _updated(self, name: str, mark: Mark, now: float) -> Seen:
        known = self._new.get(name)
        since = self._steady[mark]
        if known is None:
            return Seen(name, mark, since, now, (self._looks, mark.saved_ns, name))
        if known.mark == mark:
            return known
        pace_s = max(known.pace_s, now - known.since)
        return replace(known, mark=mark, since=since, pace_s=pace_s)

    def _entries(self) -> Iterable[tuple[str, Mark]]:
        with os.scandir(self._folder) as entries:
            for entry in entries:
                try:
                    if not entry.is_file():
                        continue
                    known = entry.stat()
                    yield entry.name, Mark(entry.inode(), known.st_size, known.st_mtime_ns)
                except OSError:
                    continue  # gone between the listing and the look: the next look settles it
