"""Settings of an instrument that were changed, with what they were before."""

from __future__ import annotations

import contextlib
from collections.abc import Iterable

from drivers.contract import SourceError
from drivers.visa.conversation import Conversation

_WAIT_S = 1.0


class KeptSettings:
    """Former values by setting, in the order in which they were changed."""

    def __init__(self) -> None:
        self._former: dict[str, str] = {}

    def __bool__(self) -> bool:
        """Say whether anything is to be put back."""
        return bool(self._former)

    def keep(self, talk: Conversation, setting: str, deadline: float) -> str | None:
        """Read a setting before it is changed; only the first value counts.

        Returns
        -------
        str or None
            What it is now; None where the instrument does not say.
        """
        command = talk.filled(setting)
        answer = talk.quietly(f"{command}?", _WAIT_S, deadline)
        if answer is None:
            return None
        value = answer
        self._former.setdefault(command, value)
        return value

    def put_back(self, talk: Conversation, settings: Iterable[str], deadline: float) -> None:
        """Write some of them back."""
        for setting in settings:
            command = talk.filled(setting)
            value = self._former.pop(command, None)
            if value is not None:
                talk.tell(f"{command} {value}", deadline)

    def put_all_back(self, talk: Conversation, deadline: float) -> None:
        """Write all back, the last changed first."""
        while self._former:
            command, value = self._former.popitem()
            with contextlib.suppress(SourceError):
                talk.tell(f"{command} {value}", deadline)
