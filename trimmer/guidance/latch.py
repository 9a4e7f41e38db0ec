"""Keeps the live word from flickering: near a limit, noise must not make it come and go."""

from __future__ import annotations

from dataclasses import replace
from typing import Final

from trimmer.guidance.advice import Follow, Say

ORDER: Final[tuple[Say, ...]] = ("turn", "slow", "stop")
"""The words of one turn, in the order in which they come."""
GONE_BACK: Final = 0.15
"""A share of the turn by which the hand must have gone back for an earlier word to be right again."""


class Latch:
    """Within one turn *slow* does not fall back to *turn*, nor *stop* to *slow*, unless the hand goes back.

    The other words (*wait*, wrong trim, wrong way) pass as they come.
    """

    def __init__(self) -> None:
        self._said = 0
        self._furthest = 0.0

    def hold(self, word: Follow) -> Follow:
        """Give the word to say."""
        if word.say not in ORDER:
            return word
        if word.share is not None:
            if word.share < self._furthest - GONE_BACK:
                self._said, self._furthest = 0, word.share
            self._furthest = max(self._furthest, word.share)
        self._said = max(self._said, ORDER.index(word.say))
        return replace(word, say=ORDER[self._said])
