"""Who answers: the identification, and whether it is still the same instrument."""

from __future__ import annotations

import time

from drivers.contract import SourceError, SourceRefused, SourceTimeout, clean
from drivers.visa.conversation import Conversation

SPEEDS = (9600, 115200, 57600, 38400, 19200)
"""Speeds tried on a serial line, baud; a USB port that only looks like one takes any."""

_EACH_S = 0.8
_MOST = 500


def identify(talk: Conversation, deadline: float) -> str:
    """Ask for the identification, without header echo and extra blanks.

    Raises
    ------
    SourceTimeout
        Nothing answers.
    SourceRefused
        What answers is no identification.
    """
    try:
        answer = talk.ask("*IDN?", deadline)
    except SourceTimeout as error:
        raise SourceTimeout(
            f"{talk.link.resource} does not answer *IDN?",
            "Check the address, the port and, on a serial line, the speed; switch the instrument's "
            "remote control on.",
        ) from error
    told = ",".join(part.strip() for part in answer.split(","))
    if "," not in told or len(told) > _MOST:
        raise SourceRefused(
            f"*IDN? is answered with {clean(answer, 60)!r}",
            "Check that this resource is an instrument that speaks SCPI.",
        )
    return told


def identify_serial(talk: Conversation, deadline: float) -> tuple[str, int]:
    """Ask for the identification at the usual speeds of a serial line, until one is answered.

    Returns
    -------
    str, int
        The identification, and the speed in baud.
    """
    last: SourceError | None = None
    for baud in SPEEDS:
        left = deadline - time.monotonic()
        if left <= 0.0:
            break
        talk.link.resume()
        talk.link.set_speed(baud)
        try:
            talk.link.freshen(deadline)
            return identify(talk, time.monotonic() + min(_EACH_S, left)), baud
        except (SourceTimeout, SourceRefused) as error:
            last = error
    raise last if last is not None else SourceTimeout("no time to ask for an identification")


def same_instrument(one: str, other: str) -> bool:
    """Say whether two identifications are of one instrument: all but the firmware."""
    return one.split(",")[:3] == other.split(",")[:3]
