"""A folder into which an instrument saves: every file that appears is the next capture."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from datetime import datetime
from hashlib import blake2b
from pathlib import Path
from typing import Self, TypeVar

from drivers.contract import (
    CaptureRequest,
    SourceError,
    SourceInfo,
    SourceLost,
    SourceNotFound,
    SourceRefused,
    SourceTimeout,
    Waveform,
    clean,
)
from drivers.files.aside import Aside, NoAnswer
from drivers.files.capture import interpret, load
from drivers.files.csvfile import FileCapture, Wanted
from drivers.files.single import ASKED, checked
from drivers.files.watch import HOLDING_S, Seen, Watch

T = TypeVar("T")
LEAST_PAUSE_S = 0.05
MOST_PAUSE_S = 1.0
GRACE_S = 0.5
"""Beyond the time asked for, a slow share is given so long to answer."""
LOOK_SHARE = 0.05
"""Part of the time that may go into looking: slow folders are looked at less often."""
SAVE = "Save a capture from the instrument into the folder."


@dataclass(frozen=True, slots=True)
class _Taken:
    """The content that was last taken from a name."""

    size: int
    digest: bytes

    def begins(self, raw: bytes) -> bool:
        """Say whether this content is the beginning of longer content: the file only grew."""
        return len(raw) > self.size and _digest(raw[: self.size]) == self.digest


def _digest(raw: bytes) -> bytes:
    return blake2b(raw, digest_size=16).digest()


class FolderSource:
    """A watched folder: the person saves a capture after each turn, and that says *moved*.

    Files are taken in the order in which they appeared, none skipped, each once it is complete:
    it stands still and its end is an end. A file saved over under its old name is a new capture;
    one that merely grew on is not. Of the files that are there at the start only the newest is
    taken, as the first capture, and that is said. `CaptureRequest.fresh_after` does not apply.
    """

    def __init__(self, path: Path, wanted: Wanted) -> None:
        self._path = path
        self._wanted = wanted
        self._closed = False
        self._info = SourceInfo(
            clean(str(path)), f"folder {clean(path.name or str(path))}", paced_by_person=True
        )
        self._watch = Watch(path)
        self._aside = Aside()
        self._deadline = time.monotonic() + CaptureRequest().timeout_s
        self._contents: dict[str, _Taken] = {}
        self._unripe: dict[str, Seen] = {}
        self._pause_s = LEAST_PAUSE_S
        self._earlier = self._pass_over_earlier()

    @property
    def info(self) -> SourceInfo:
        """What this source is."""
        return self._info

    def capture(self, request: CaptureRequest = ASKED) -> Waveform:
        """Wait for the next complete file and read it.

        Raises
        ------
        SourceTimeout
            No file was completed within the time.
        UnusableCapture
            The next file is no plain waveform; it counts as taken.
        SourceLost
            The folder cannot be read any more.
        """
        self._deadline = time.monotonic() + request.timeout_s
        while True:
            if self._closed:
                raise SourceLost("the folder source is closed", "Open it again.")
            files = self._look()
            if (waveform := self._next(files)) is not None:
                return waveform
            left = self._deadline - time.monotonic()
            if left <= 0.0:
                raise SourceTimeout(self._nothing(files, request.timeout_s), SAVE)
            time.sleep(min(self._pause_s, left))

    def close(self) -> None:
        """Stop watching. Safe to call twice."""
        self._closed = True

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()

    def _pass_over_earlier(self) -> str | None:
        """Count the files already there as taken, but for the newest."""
        present = sorted(self._look(), key=lambda seen: (seen.mark.saved_ns, seen.name))
        for seen in present[:-1]:
            self._watch.settle(seen)
        return present[-1].name if present else None

    def _look(self) -> list[Seen]:
        began = time.monotonic()
        try:
            files = self._ask("look", lambda: self._watch.look(time.monotonic()))
        except OSError as error:
            raise SourceLost(
                f"the folder {clean(str(self._path))} cannot be read: "
                f"{clean(error.strerror or str(error))}",
                "Bring the folder back; the session goes on by itself.",
            ) from error
        took_s = time.monotonic() - began
        self._pause_s = min(MOST_PAUSE_S, max(LEAST_PAUSE_S, took_s / LOOK_SHARE))
        return files

    def _ask(self, what: object, call: Callable[[], T]) -> T:
        """Ask the file system, and wait no longer than the capture may."""
        wait_s = max(0.0, self._deadline - time.monotonic()) + GRACE_S
        try:
            return self._aside.ask(what, call, wait_s)
        except NoAnswer as error:
            raise SourceTimeout(
                f"the folder {clean(str(self._path))} does not answer",
                "Check the connection to the share that it lies on.",
            ) from error

    def _next(self, files: list[Seen]) -> Waveform | None:
        """Take the first file in order; a growing one holds up the others, though not for ever."""
        for seen in files:
            if (waveform := self._take(seen)) is not None:
                return waveform
            if self._is_growing(seen):
                return None
        return None

    def _is_growing(self, seen: Seen) -> bool:
        """Say whether a file is worth holding up the others for."""
        now = time.monotonic()
        growing = seen.name in self._unripe or not seen.is_steady(now)
        return growing and now - seen.first < HOLDING_S

    def _take(self, seen: Seen) -> Waveform | None:
        """Read a file if it is complete; None where it is not, or is no new capture."""
        now = time.monotonic()
        stalled = seen.is_stalled(now)
        if not seen.is_steady(now) or (self._unripe.get(seen.name) == seen and not stalled):
            return None
        self._unripe.pop(seen.name, None)
        try:
            raw, taken_at = self._ask(seen, lambda: load(self._path / seen.name))
            if len(raw) != seen.mark.size:
                return None  # written to while it was read: the next look sees the change
            if self._grew(seen, raw):
                return None
            read = interpret(raw, self._path / seen.name, self._wanted, taken_at)
        except SourceTimeout:
            raise
        except SourceLost:
            return None  # gone again: renamed or removed
        except SourceError as error:
            if not stalled:
                self._unripe[seen.name] = seen
                return None
            self._watch.settle(seen)
            raise type(error)(f"{clean(seen.name)}: {error}", error.remedy) from error
        if read.cut and not stalled:
            self._unripe[seen.name] = seen
            return None
        return self._given(seen, raw, read, taken_at)

    def _grew(self, seen: Seen, raw: bytes) -> bool:
        """Say whether a file that was taken has only been continued; that is no new capture."""
        taken = self._contents.get(seen.name)
        if taken is None or not taken.begins(raw):
            return False
        self._contents[seen.name] = _Taken(len(raw), _digest(raw))
        self._watch.settle(seen)
        return True

    def _given(self, seen: Seen, raw: bytes, read: FileCapture, taken_at: datetime) -> Waveform:
        self._watch.settle(seen)
        self._contents[seen.name] = _Taken(len(raw), _digest(raw))
        if seen.name != self._earlier:
            return read.waveform
        self._earlier = None
        age_s = max(0.0, datetime.now().astimezone().timestamp() - taken_at.timestamp())
        note = f"this file was already there when the session began ({_ago(age_s)} old): the newest"
        return replace(read.waveform, notes=(*read.waveform.notes, note))

    def _nothing(self, files: list[Seen], timeout_s: float) -> str:
        where = clean(str(self._path))
        if files:
            return f"{clean(files[0].name)} in {where} was not complete within {timeout_s:.3g} s"
        return f"no new capture in {where} within {timeout_s:.3g} s"


def _ago(age_s: float) -> str:
    for size, name in ((86400.0, "days"), (3600.0, "hours"), (60.0, "minutes")):
        if age_s >= 2 * size:
            return f"{age_s / size:.0f} {name}"
    return f"{age_s:.0f} seconds"


def open_folder(
    path: Path, *, channel: int | None = None, interval_s: float | None = None
) -> FolderSource:
    """Open a folder as a source: each file that appears in it is the next capture.

    Parameters
    ----------
    path
        The folder.
    channel, interval_s
        As for a single file; they hold for every file.

    Raises
    ------
    SourceNotFound
        There is no such folder.
    """
    wanted = checked(channel, interval_s)
    if not path.is_dir():
        raise SourceNotFound(
            f"there is no folder {clean(str(path))}", "Check the path of the folder."
        )
    try:
        return FolderSource(path, wanted)
    except (SourceLost, SourceTimeout) as error:
        raise SourceRefused(str(error), "Check the permissions of the folder.") from error
