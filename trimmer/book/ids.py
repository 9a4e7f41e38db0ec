"""Ids that sort by time and never clash between benches: UUID version 7 (RFC 9562, section 5.7)."""

from __future__ import annotations

import re
import secrets
import threading
import time
import uuid

_FORM = re.compile(r"[0-9a-f]{8}-[0-9a-f]{4}-7[0-9a-f]{3}-[89ab][0-9a-f]{3}-[0-9a-f]{12}\Z")
_AHEAD_MS = 24 * 3600 * 1000


def is_id(text: str) -> bool:
    """Tell whether `text` is an id in the form this module gives."""
    return _FORM.match(text) is not None


class Ids:
    """Gives ids, each greater than the one before. Safe from any thread.

    The 12 bits after the version count within a millisecond, which RFC 9562 (section 6.2, method 1)
    allows; 62 bits are random. A clock set back does not break the order: the count goes on from the
    last millisecond used.
    """

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._last = (0, 0)

    def new(self) -> str:
        """Give the next id."""
        with self._lock:
            milliseconds, count = self._last
            now = time.time_ns() // 1_000_000
            if now > milliseconds:
                milliseconds, count = now, 0
            elif count < 0xFFF:
                count += 1
            else:
                milliseconds, count = milliseconds + 1, 0
            self._last = (milliseconds, count)
        return _spell(milliseconds, count, secrets.randbits(62))

    def after(self, known: str) -> None:
        """Make every later id greater than `known`, so that order is kept where clocks differ.

        An id more than a day ahead of the clock is not followed: one wrong clock must not spoil the
        ids of every bench that reads its sheets.
        """
        value = uuid.UUID(known).int
        moment = (value >> 80, value >> 64 & 0xFFF)
        with self._lock:
            ahead = moment[0] - time.time_ns() // 1_000_000
            if ahead < _AHEAD_MS:
                self._last = max(self._last, moment)


def _spell(milliseconds: int, count: int, random: int) -> str:
    return str(uuid.UUID(int=milliseconds << 80 | 7 << 76 | count << 64 | 2 << 62 | random))
