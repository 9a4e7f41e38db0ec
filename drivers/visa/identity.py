"""Who answers: the identification, and whether it is still the same instrument."""

from __future__ import annotations

from drivers.contract import SourceRefused, SourceTimeout, clean
from drivers.visa.conversation import Conversation

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


def same_instrument(one: str, other: str) -> bool:
    """Say whether two identifications are of one instrument: all but the firmware."""
    return one.split(",")[:3] == other.split(",")[:3]
