"""Finding out which of a dialect's ways an instrument knows: to send, to wait, to describe."""

from __future__ import annotations

import time
from typing import Any

from drivers.contract import SourceError, SourceRefused, SourceTimeout
from drivers.visa.acquisition import answers_poll
from drivers.visa.conversation import Conversation
from drivers.visa.dialect import Dialect, Encoding
from drivers.visa.preamble import ask_fields, matches

PROBE_S = 0.5
"""Longest wait for an answer that may not come."""

ANOTHER = "Choose another dialect with `--dialect`."
CHANNEL_OR_ANOTHER = (
    "Check the channel with `--channel`, or choose another dialect with `--dialect`."
)


def must(talk: Conversation, dialect: Dialect, command: str, deadline: float) -> None:
    """Send a command that cannot be done without.

    Raises
    ------
    SourceRefused
        The instrument refuses it.
    """
    talk.tell(command, deadline)
    faults = talk.faults(dialect.errors, deadline)
    if faults:
        raise SourceRefused(
            f"the instrument refuses {talk.filled(command)}: {faults[0]}", CHANNEL_OR_ANOTHER
        )


def choose(talk: Conversation, encoding: Encoding | None, deadline: float) -> None:
    """Have the samples sent in this way from now on."""
    for command in encoding.send if encoding is not None else ():
        talk.tell(command, deadline)


def accepts(talk: Conversation, dialect: Dialect, encoding: Encoding, deadline: float) -> bool:
    """Choose a way of sending samples; False where the instrument does not take it."""
    choose(talk, encoding, deadline)
    if talk.faults(dialect.errors, deadline):
        return False
    if encoding.ask is None or encoding.matches is None:
        return True
    answer = talk.quietly(encoding.ask, PROBE_S, deadline)
    return answer is not None and matches(answer, encoding.matches)


def find_encoding(talk: Conversation, dialect: Dialect, deadline: float) -> int:
    """Choose the best way of sending samples that the instrument knows, and give its place.

    Raises
    ------
    SourceRefused
        It knows none.
    """
    for place, encoding in enumerate(dialect.encoding):
        if accepts(talk, dialect, encoding, deadline):
            return place
    if dialect.encoding:
        raise SourceRefused(
            "the instrument refuses every way of sending samples that this dialect has", ANOTHER
        )
    return 0


def find_acquire(talk: Conversation, dialect: Dialect, deadline: float) -> int:
    """Give the place of the best way of waiting whose query the instrument answers.

    Nothing is armed.

    Raises
    ------
    SourceRefused
        It knows none.
    """
    ways = dialect.acquire
    for place, way in enumerate(ways):
        if len(ways) == 1 or answers_poll(talk, way, PROBE_S, deadline):
            if way.poll is not None or place > 0:  # faults of the silent ones do not count
                talk.faults(dialect.errors, deadline)
            return place
    raise SourceRefused("the instrument knows no way of waiting that this dialect has", ANOTHER)


def find_preamble(
    talk: Conversation, dialect: Dialect, deadline: float
) -> tuple[int, dict[str, Any]]:
    """Ask for the preamble in each way; the first that gives every field is it.

    Returns
    -------
    int, dict
        Its place, and the fields.

    Raises
    ------
    SourceError
        None does.
    """
    ways = dialect.preamble
    if len(ways) == 1:
        return 0, ask_fields(talk, ways[0], deadline)
    last: SourceError | None = None
    for place, way in enumerate(ways):
        try:
            brief = min(deadline, time.monotonic() + 2.0 * PROBE_S)
            return place, ask_fields(talk, way, brief)
        except (SourceTimeout, SourceRefused) as error:
            last = error
            if isinstance(error, SourceTimeout):
                talk.step_in(deadline)
            talk.faults(dialect.errors, deadline)
    raise SourceRefused(f"no way of asking for the preamble works; last: {last}", ANOTHER)
