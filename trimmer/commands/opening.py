"""Which source a SOURCE word names, and how it is opened: the only place that knows the drivers."""

from __future__ import annotations

import argparse
import contextlib
import os
import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Literal

from drivers import SourceNotFound, WaveformSource, clean
from trimmer.errors import CommandError

if TYPE_CHECKING:
    from drivers.bench import Bench

Shape = Literal["bench", "visa", "sound", "file", "folder"]

FILE_ENDINGS = {".csv", ".txt", ".tsv", ".wav"}
_INTERFACES = ("TCPIP", "USB", "GPIB", "ASRL", "PRLGX", "VICP")
_VISA = re.compile(rf"^({'|'.join(_INTERFACES)})[^:]*::", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Opened:
    """An open source, and the simulated unit behind it where there is one."""

    source: WaveformSource
    """The source."""
    bench: Bench | None = None
    """The simulated unit, for `bench`."""


def shape_of(word: str) -> Shape:
    """Tell a SOURCE word by its shape.

    Raises
    ------
    CommandError
        The word has no known shape.
    SourceNotFound
        It is a path, and there is nothing there.
    """
    if word == "bench":
        return "bench"
    if word == "sound" or word.startswith("sound:"):
        return "sound"
    if _VISA.match(word):
        return "visa"
    path = Path(word)
    if word and path.is_dir():  # an empty word would be the folder one stands in
        return "folder"
    if path.suffix.lower() in FILE_ENDINGS:
        if not path.exists():
            raise SourceNotFound(f"there is no file {clean(word)}", "Check the path of the file.")
        return "file"
    if word and path.exists():
        raise CommandError(
            f"{clean(word)} is not a .csv, .txt, .tsv or .wav file",
            "Save the waveform as comma-separated values or as WAV.",
        )
    if os.sep in word or (os.altsep and os.altsep in word):
        raise SourceNotFound(f"there is no file or folder {clean(word)}", "Check the path.")
    raise CommandError(
        f"{clean(word)!r} is no source",
        "Name a source as `bench`, a VISA resource, `sound`, a .csv/.txt/.tsv/.wav file, or a folder.",
    )


def settings_folder() -> Path:
    """Give the folder of settings, dialects and calibrations, made if need be."""
    home = os.environ.get("TRIMMER_HOME")
    if home:
        folder = Path(home)
    else:
        from platformdirs import user_config_path

        folder = user_config_path("trimmer", appauthor=False)
    with contextlib.suppress(OSError):  # a read-only home still measures; it only cannot remember
        folder.mkdir(parents=True, exist_ok=True)
    return folder


@contextlib.contextmanager
def opened(word: str, options: argparse.Namespace) -> Iterator[Opened]:
    """Open a source by its word, and close it.

    Parameters
    ----------
    word
        SOURCE.
    options
        The command's: `channel`, `interval`, `dialect`, `set_range`, `seed`, `travel`, `cold`.
    """
    with contextlib.ExitStack() as stack:
        yield _open(word, options, stack)


def _open(word: str, options: argparse.Namespace, stack: contextlib.ExitStack) -> Opened:
    shape = shape_of(word)
    if shape == "bench":
        from drivers.bench import Bench

        bench = stack.enter_context(
            Bench(
                options.seed,
                travel_turns=getattr(options, "travel", None) or 0.75,
                cold=getattr(options, "cold", False),
            )
        )
        return Opened(stack.enter_context(_instrument(bench.resource, word, options)), bench)
    if shape == "visa":
        return Opened(stack.enter_context(_instrument(word, word, options)))
    if shape == "sound":
        from drivers.soundcard import open_sound

        device = word.partition(":")[2] or None
        return Opened(
            stack.enter_context(
                open_sound(device, channel=options.channel or 1, settings_dir=settings_folder())
            )
        )
    from drivers.files import open_file, open_folder

    path, channel, interval_s = Path(word), options.channel, options.interval
    if shape == "file":
        file = open_file(path, channel=channel, interval_s=interval_s)
        return Opened(stack.enter_context(file))
    return Opened(stack.enter_context(open_folder(path, channel=channel, interval_s=interval_s)))


def _instrument(resource: str, name: str, options: argparse.Namespace) -> WaveformSource:
    from drivers.visa import open_instrument

    return open_instrument(
        resource,
        name=name,
        channel=options.channel or 1,
        dialect=options.dialect,
        settings_dir=settings_folder(),
        set_range=options.set_range,
    )
