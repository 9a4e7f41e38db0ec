"""One file as a source."""

from __future__ import annotations

from pathlib import Path
from typing import Self

from drivers.contract import (
    CaptureRequest,
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
from drivers.files.csvfile import Wanted

ASKED = CaptureRequest()


class FileSource:
    """A file that holds one capture.

    The same capture is given each time it is asked for: the file is read anew, so that one which
    was saved over gives its new content. `info.finite` says that there is nothing to wait for.
    `CaptureRequest.fresh_after` does not apply, since the file was written when it was written.
    """

    def __init__(self, path: Path, wanted: Wanted) -> None:
        self._path = path
        self._wanted = wanted
        self._aside = Aside()
        self._closed = False
        self._info = SourceInfo(clean(str(path)), clean(path.name), finite=True)

    @property
    def info(self) -> SourceInfo:
        """What this source is."""
        return self._info

    def capture(self, request: CaptureRequest = ASKED) -> Waveform:
        """Read the file.

        Raises
        ------
        SourceError
            The file is gone or cannot be read as one plain waveform.
        """
        if self._closed:
            raise SourceLost("the file source is closed", "Open it again.")
        try:
            raw, taken_at = self._aside.ask("load", lambda: load(self._path), request.timeout_s)
        except NoAnswer as error:
            raise SourceTimeout(
                f"{clean(self._path.name)} was not read within {request.timeout_s:.3g} s",
                "Check the connection to the share that it lies on.",
            ) from error
        return interpret(raw, self._path, self._wanted, taken_at).waveform

    def close(self) -> None:
        """Nothing is held between captures; further ones are refused. Safe to call twice."""
        self._closed = True

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()


def checked(channel: int | None, interval_s: float | None) -> Wanted:
    """Check what the person decided.

    Raises
    ------
    SourceRefused
        The channel is not 1 or more, or the interval is not above 0.
    """
    if channel is not None and channel < 1:
        raise SourceRefused(f"there is no channel {channel}", "Count channels from 1.")
    if interval_s is not None and not 0.0 < interval_s < 1e6:
        raise SourceRefused(
            f"an interval of {interval_s} s is not possible",
            "State the seconds between two samples, for example `--interval 1e-6`.",
        )
    return Wanted(channel, interval_s)


def open_file(
    path: Path, *, channel: int | None = None, interval_s: float | None = None
) -> FileSource:
    """Open a `.csv`, `.txt`, `.tsv` or `.wav` file as a source of one capture.

    Parameters
    ----------
    path
        The file.
    channel
        1-based column of values, or channel of a WAV file; None lets the file decide.
    interval_s
        Seconds between samples, for files that do not say; it overrides what they say.

    Raises
    ------
    SourceNotFound
        There is no such file.
    """
    wanted = checked(channel, interval_s)
    if not path.exists():
        raise SourceNotFound(f"there is no file {clean(str(path))}", "Check the path of the file.")
    if not path.is_file():
        raise SourceNotFound(f"{clean(str(path))} is not a file", "Name a file or a folder.")
    return FileSource(path, wanted)
