"""What answers on this machine: for a person who asks, never as part of anything else."""

from __future__ import annotations

import time
from dataclasses import dataclass
from pathlib import Path

from drivers.contract import SourceError, SourceTimeout, clean
from drivers.visa.bounded import Overdue, bounded
from drivers.visa.conversation import Conversation
from drivers.visa.faults import translate
from drivers.visa.identity import identify
from drivers.visa.library import manager
from drivers.visa.link import open_link
from drivers.visa.memory import recall

_EACH_S = 1.5
"""Longest wait for one instrument."""


@dataclass(frozen=True, slots=True)
class Listed:
    """One resource that was seen."""

    resource: str
    """The VISA resource, cleaned."""
    identity: str | None = None
    """What it answers to `*IDN?`; None where it was not asked or did not answer."""
    dialect: str | None = None
    """The dialect remembered for it."""
    problem: str | None = None
    """Why it was not asked, or what went wrong."""


def list_instruments(timeout_s: float, settings_dir: Path | None) -> list[Listed]:
    """List what the library sees, and ask each who it is, within `timeout_s` together.

    Raises
    ------
    SourceError
        The list itself could not be had in time.
    """
    deadline = time.monotonic() + timeout_s
    seen = _resources(timeout_s)
    return [_asked(resource, settings_dir, deadline) for resource in seen]


def _resources(timeout_s: float) -> list[str]:
    visa = manager()
    try:
        seen: list[str] = bounded(
            lambda: sorted(visa.list_resources("?*")), timeout_s, too_late=lambda _: None
        )
    except Overdue as error:
        raise SourceTimeout(f"no list of instruments within {timeout_s:g} s") from error
    except Exception as error:
        raise translate(error, "listing instruments") from error
    return seen


def _asked(resource: str, settings_dir: Path | None, deadline: float) -> Listed:
    shown = clean(resource)
    if resource.upper().startswith("ASRL"):
        # A stray line can reset or confuse what hangs on a serial port and is no instrument.
        return Listed(shown, problem="a serial port; not asked")
    left = min(_EACH_S, deadline - time.monotonic())
    if left <= 0.0:
        return Listed(shown, problem="not asked: no time left")
    try:
        link = open_link(resource, left)
    except SourceError as error:
        return Listed(shown, problem=clean(str(error)))
    try:
        identity = identify(Conversation(link, {"channel": 1}), time.monotonic() + left)
    except SourceError as error:
        return Listed(shown, problem=clean(str(error)))
    finally:
        link.close()
    known = recall(settings_dir, identity)
    return Listed(shown, clean(identity), known.dialect if known is not None else None)
