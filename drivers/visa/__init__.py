"""Instruments over VISA: links, IEEE 488.2 blocks, dialects as data.

Importing this package loads no VISA library; opening an instrument does.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from drivers.contract import WaveformSource

if TYPE_CHECKING:
    from drivers.visa.listing import Listed

__all__ = ["dialect_names", "list_instruments", "open_instrument"]


def open_instrument(
    resource: str,
    *,
    name: str | None = None,
    channel: int = 1,
    dialect: str | None = None,
    settings_dir: Path | None = None,
    set_range: bool = False,
    timeout_s: float = 5.0,
) -> WaveformSource:
    """Open an oscilloscope or digitiser.

    Parameters
    ----------
    resource
        A VISA resource: `TCPIP::192.0.2.10::INSTR`, `TCPIP::127.0.0.1::5025::SOCKET`.
    name
        The SOURCE word to show; None shows the resource.
    channel
        Channel read, counted from 1.
    dialect
        Name of the waveform dialect; None finds out by asking.
    settings_dir
        Where what was found out is kept, with the person's own dialects in `dialects/`; None
        keeps nothing and knows the shipped dialects only.
    set_range
        Set range and offset so that the codes are used well, and put them back at the end.
    timeout_s
        Longest wait for the link and its identification, finite.

    Raises
    ------
    SourceError
        One of its leaves, with a remedy.
    """
    from drivers.visa.source import InstrumentSource

    return InstrumentSource(
        resource,
        name=name if name is not None else resource,
        channel=channel,
        dialect=dialect,
        settings_dir=settings_dir,
        set_range=set_range,
        timeout_s=timeout_s,
    )


def list_instruments(timeout_s: float = 5.0, settings_dir: Path | None = None) -> list[Listed]:
    """List the instruments this machine can see, with what each answers.

    Slow (it broadcasts on the network) and never complete: raw sockets cannot be listed. Only
    to be called when a person asks, and off the thread of a screen.
    """
    from drivers.visa.listing import list_instruments as listed

    return listed(timeout_s, settings_dir)


def dialect_names(settings_dir: Path | None = None) -> list[str]:
    """Give the names of all dialects, shipped ones and the person's own."""
    from drivers.visa.shelf import shelf

    return sorted(shelf(settings_dir)[0])
