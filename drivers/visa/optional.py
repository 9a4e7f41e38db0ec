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
from drivers.visa.soundness import formulas

_AGE_S = 1.0
"""Seconds for which a field that no formula uses (coupling) is taken as still true."""

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
        self._used = frozenset().union(*(formula.names for _, formula in formulas(dialect)))
        self.unanswered = set(unanswered)
        """Names of fields the instrument does not know."""

    def forget(self) -> None:
        """Ask again next time: a setting was changed."""
        self._at = -math.inf

    def ask(self, deadline: float) -> dict[str, Any]:
        """Give the fields; None for those that are not answered.

        Those that a formula uses are asked with every frame: a frame in peak detect, or with
        another record length, must not be read by what held for the one before.
        """
        old = time.monotonic() - self._at >= _AGE_S
        fields: dict[str, Any] = dict.fromkeys(self._dialect.also)
        for name, query in self._dialect.also.items():
            if name in self.unanswered:
                continue
            if not old and name not in self._used:
                fields[name] = self._fields.get(name)
                continue
            answer = self._talk.quietly(query, ways.PROBE_S, deadline)
            if answer is None:
                self._silent(name, deadline)
            else:
                fields[name] = answers.field(answer)
        if old:
            self._at = time.monotonic()
        self._fields = fields
        return fields

    def _silent(self, name: str, deadline: float) -> None:
        self._silences[name] += 1
        faults = self._talk.faults(self._dialect.errors, deadline)
        unknown = any(fault.startswith("-113") for fault in faults)
        unknown = unknown or self._talk.why_silent(deadline) == UNKNOWN
        if unknown or self._silences[name] >= _MOST_SILENCES:
            self.unanswered.add(name)
