"""Fields that an instrument may or may not know, asked for no more often than they matter."""

from __future__ import annotations

import math
import time
from collections import Counter
from collections.abc import Iterable
from typing import Any

from drivers.visa import answers, ways
from drivers.visa.conversation import UNKNOWN, Conversation
from drivers.visa.dialect import Dialect

_AGE_S = 1.0
"""Seconds for which they are taken as still true: a coupling switch is not turned in between."""

_MOST_SILENCES = 2
"""Silences after which a field counts as not known, where the instrument does not say why."""


class OptionalFields:
    """The `[also]` fields of a dialect.

    Parameters
    ----------
    talk
        The conversation.
    dialect
        The dialect.
    unanswered
        Names of fields that this instrument is known not to know.
    """

    def __init__(self, talk: Conversation, dialect: Dialect, unanswered: Iterable[str]) -> None:
        self._talk = talk
        self._dialect = dialect
        self._silences: Counter[str] = Counter()
        self._fields: dict[str, Any] = {}
        self._at = -math.inf
        self.unanswered = set(unanswered)
        """Names of fields the instrument does not know."""

    def forget(self) -> None:
        """Ask again next time: a setting was changed."""
        self._at = -math.inf

    def ask(self, deadline: float) -> dict[str, Any]:
        """Give the fields; None for those that are not answered."""
        if time.monotonic() - self._at < _AGE_S:
            return self._fields
        fields: dict[str, Any] = dict.fromkeys(self._dialect.also)
        for name, query in self._dialect.also.items():
            if name in self.unanswered:
                continue
            answer = self._talk.quietly(query, ways.PROBE_S, deadline)
            if answer is None:
                self._silent(name, deadline)
            else:
                fields[name] = answers.field(answer)
        self._fields, self._at = fields, time.monotonic()
        return fields

    def _silent(self, name: str, deadline: float) -> None:
        self._silences[name] += 1
        unknown = self._talk.why_silent(deadline) == UNKNOWN
        if unknown or self._silences[name] >= _MOST_SILENCES:
            self.unanswered.add(name)
        self._talk.faults(self._dialect.errors, deadline)
