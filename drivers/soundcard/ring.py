"""The last seconds of sound, with the time at which each sample was taken.

A sound server hands old sound to a reader that stalled, and says nothing. The only witness is
the clock: sample n arrives no earlier than ``t0 + n / rate``, and the least ``arrival - n / rate``
over all blocks is the best estimate of t0. A block that arrives later than its line is late by
the difference. The line may rise by a thousandth, which covers a slow crystal (100 ppm is common
practice, no source) and forgets a lucky block in time.
"""

from __future__ import annotations

import math
import threading
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

LEAK = 1e-3
"""Seconds a second by which the line of earliest arrival may rise."""
LATE_S = 0.15
"""A block later than this is backlog, or follows a gap that nobody reported."""

Frames = NDArray[np.int32]
"""Shape (n, channels), whole numbers with full scale at 2**31."""


@dataclass(frozen=True, slots=True, eq=False)
class Piece:
    """A stretch of sound without gaps."""

    frames: Frames
    """Shape (n, channels)."""
    taken: float
    """`time.monotonic()` seconds at which the last sample was taken."""
    breaks: int
    """Gaps noticed since the piece before."""


class Ring:
    """Keep the newest frames. Filled by the sound thread, read by the owner of the source.

    Parameters
    ----------
    size
        Frames kept.
    channels
        Channels of a frame.
    rate_hz
        Frames a second.
    """

    def __init__(self, size: int, channels: int, rate_hz: float) -> None:
        self._frames = np.zeros((size, channels), np.int32)
        self._rate_hz = rate_hz
        self._lock = threading.Lock()
        self._arrived = threading.Condition(self._lock)
        self.latency_s = 0.0
        self._restart()

    def restart(self) -> None:
        """Forget everything: the stream starts anew."""
        with self._lock:
            self._restart()

    def _restart(self) -> None:
        self._total = 0
        self._line = math.inf
        self._last = -math.inf
        self._late_s = 0.0
        self._whole_from = 0
        self._given = 0
        self._breaks = 0

    @property
    def late_s(self) -> float:
        """How late the newest block was, seconds."""
        with self._lock:
            return self._late_s

    @property
    def last_arrival(self) -> float:
        """`time.monotonic()` of the newest block; minus infinity before the first."""
        with self._lock:
            return self._last

    def push(self, block: Frames, now: float, *, gap: bool) -> None:
        """Take a block as it arrives.

        Parameters
        ----------
        block
            Shape (n, channels), n not above the ring's size.
        now
            `time.monotonic()` of the arrival.
        gap
            True where the sound system says that frames were lost before this block.
        """
        with self._arrived:
            if gap:
                self._line = math.inf  # what follows a gap is counted from a new start
                self._break(self._total)
            self._time(len(block), now)
            if self._late_s > LATE_S:
                self._break(self._total + len(block))
            size = len(self._frames)
            block = block[-size:]
            place = self._total % size
            first = min(len(block), size - place)
            self._frames[place : place + first] = block[:first]
            self._frames[: len(block) - first] = block[first:]
            self._total += len(block)
            self._arrived.notify_all()

    def _break(self, frame: int) -> None:
        """Let no piece reach back before a frame; a row of late blocks counts as one gap."""
        self._breaks += self._whole_from < self._total or frame == self._total
        self._whole_from = frame

    def _time(self, count: int, now: float) -> None:
        earliest = now - (self._total + count) / self._rate_hz
        if math.isfinite(self._line):
            self._line += LEAK * max(0.0, now - self._last)
        self._line = min(self._line, earliest)
        self._late_s = earliest - self._line
        self._last = now

    def newest(self, count: int, since: float, deadline_s: float) -> Piece | None:
        """Wait for a piece that was not given before.

        Parameters
        ----------
        count
            Frames wanted, not above the ring's size.
        since
            `time.monotonic()` before which no frame may have been taken.
        deadline_s
            Longest wait, seconds.

        Returns
        -------
        Piece or None
            The newest frames without a gap; None where the wait was not enough.
        """
        with self._arrived:
            if not self._arrived.wait_for(lambda: self._ready(count, since), deadline_s):
                return None
            breaks, self._breaks = self._breaks, 0
            self._given = self._total
            return Piece(self._copy(count), self._taken(self._total), breaks)

    def _ready(self, count: int, since: float) -> bool:
        start = self._total - count
        if start < max(self._given, self._whole_from) or self._late_s > LATE_S:
            return False
        return self._taken(start) >= since

    def _taken(self, frame: int) -> float:
        return self._line + frame / self._rate_hz - self.latency_s

    def _copy(self, count: int) -> Frames:
        size = len(self._frames)
        places = np.arange(self._total - count, self._total) % size
        return self._frames[places]

    def peak(self, count: int) -> NDArray[np.float64]:
        """Give the largest part of full scale in the newest frames, for a level bar.

        Returns
        -------
        ndarray
            Shape (channels,), 0 to 1.
        """
        with self._lock:
            known = min(count, self._total, len(self._frames))
            frames = self._copy(known)
        if known == 0:
            return np.zeros(self._frames.shape[1])
        return np.asarray(np.abs(frames.astype(np.float64)).max(axis=0) / 2.0**31)
