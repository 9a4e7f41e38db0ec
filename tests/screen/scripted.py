"""A scripted session: reports in order, some of them only once the person has said or done a thing."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from functools import cache
from queue import Empty, SimpleQueue

import numpy as np
from numpy.typing import NDArray

from trimmer.guidance.advice import Advice, Cause, Done, Follow, Say, Sense, Trim
from trimmer.measurement.figures import shape_at
from trimmer.measurement.reading import Crests, Flag, Interval, Reading
from trimmer.reports import (
    Advised,
    Awaiting,
    Failed,
    Finished,
    Followed,
    Measured,
    Opened,
    Report,
    Word,
)

ORDERS = 15
TAKEN_AT = datetime(2031, 5, 6, 9, 30, tzinfo=UTC)

# The invented unit's two columns: how the crest parts change in a turn of either trim. The lower
# trim's is the upper trim's mirror, (-1)^(k+1) c_k, with a little less gain.
_ORDER = np.arange(2, ORDERS + 1)
_COLUMN = 0.06 * np.exp(-0.45 * (_ORDER - 2))
UPPER = np.zeros(2 * (ORDERS - 1))
UPPER[0::2] = _COLUMN
LOWER = np.zeros(2 * (ORDERS - 1))
LOWER[0::2] = 0.9 * (-1.0) ** (_ORDER + 1) * _COLUMN
REST = np.zeros(2 * (ORDERS - 1))
REST[1::2] = 0.0035 / (_ORDER - 1) ** 2 * np.where(_ORDER % 2 == 0, 1.0, -0.4)
REST[6:14:2] = (0.0006, -0.0014, -0.0003, 0.0008)
REACH: NDArray[np.float64] = np.linalg.qr(np.stack([UPPER, LOWER]).T)[0].T


def parts_at(upper: float, lower: float) -> NDArray[np.float64]:
    """Crest and skew parts with the trims so many turns away from the best."""
    return REST + upper * UPPER + lower * LOWER


def reading(
    parts: NDArray[np.float64], flags: tuple[Flag, ...] = (), offset: float = 0.012
) -> Reading:
    """A reading with these parts, its figures worked out from them."""
    sigma = 4e-5
    thd = float(np.sqrt((parts**2).sum()))
    weight = 1.0 - np.cos(_ORDER * np.pi / 4)
    upper = float((weight * parts[0::2]).sum())
    lower = float((weight * (-1.0) ** (_ORDER + 1) * parts[0::2]).sum())
    return Reading(
        fundamental_hz=1000.02,
        fundamental_sigma_hz=0.003,
        amplitude=2.51,
        amplitude_sigma=0.0004,
        offset=offset,
        offset_sigma=0.0003,
        orders=ORDERS,
        parts=parts,
        covariance=np.eye(parts.size) * sigma**2,
        noise=0.004,
        thd=Interval(thd, sigma, thd - 2 * sigma, thd + 2 * sigma),
        thd_plus_noise=thd * 1.02,
        crests=Crests(upper, lower, upper - lower, 1e-4, 1e-4, 1.4e-4),
        rise_share=0.5 + float(parts[1]) / 1.132,
        rise_share_sigma=1e-4,
        flags=flags,
        samples=10_000,
        interval_s=1e-6,
        cycles=10.0,
        bits=8,
    )


OPENED = Opened(
    "bench", "invented unit behind an invented digitiser", "preamble-10", "invented-7",
    "diode network", "12", "bench-book.sqlite",
)  # fmt: skip


PERIOD = 437.3
"""Samples to a period of the pictured captures."""
INTERVAL_S = 1.0 / (1000.02 * PERIOD)


@cache
def _noise() -> NDArray[np.float64]:
    return np.random.default_rng(11).normal(size=2000)


def capture(parts: NDArray[np.float64]) -> NDArray[np.float64]:
    """Samples of a wave of these parts as an 8-bit digitiser gives them, 4 periods and a half."""
    theta = 2 * np.pi * np.arange(2000) / PERIOD + 0.7
    volts = 2.51 * shape_at(parts, theta) + 0.012 + 0.012 * _noise()
    return np.asarray(np.round(volts / 0.024) * 0.024)


def measured(turn: int, upper: float, lower: float, flags: tuple[Flag, ...] = ()) -> Measured:
    """A still reading after so many turns."""
    parts = parts_at(upper, lower)
    return Measured(turn, TAKEN_AT, "bench", reading(parts, flags), capture(parts), INTERVAL_S)


def advised(
    turn: int = 3,
    trim: Trim = "upper",
    sense: Sense = "clockwise",
    turns: float = 0.0611,
    follows: bool = True,
    known: bool = True,
) -> Advised:
    """The next turn."""
    reason = (
        f"The {trim} crest is too flat; this turn takes both crests towards the joint answer."
        if known
        else f"The {trim} crest is the worse one; one turn shows what its trim does."
    )
    advice = Advice(
        turn, trim, sense, turns,
        0.0061 if known else None, 0.0042 if known else None, 0.0003 if known else None, reason,
    )  # fmt: skip
    return Advised(advice, follows, REACH if known else None)


def followed(
    share: float | None,
    say: Say = "turn",
    turn: int = 3,
    trim: Trim = "upper",
    upper: float = 0.1,
    lower: float = 0.03,
    still: bool = False,
) -> Followed:
    """A live reading."""
    parts = parts_at(upper, lower)
    live = reading(parts)
    word = Follow(turn, trim, share, say, still, live.thd.value)
    return Followed(word, live, capture(parts), INTERVAL_S, 0.02)


CONFIRMING = Awaiting(
    "confirming", "This looks final; a longer reading makes sure.", "Leave both trims alone."
)
SOURCE_LOST = Awaiting(
    "source-lost",
    "The instrument stopped answering.",
    "Check the cable and that the instrument is on; the session goes on by itself.",
    24.0,
)
NO_SIGNAL = Awaiting(
    "signal", "No periodic signal is seen.", "Check the lead and the output's level.", 28.0
)
DRIFTING = Awaiting(
    "drifting",
    "The reading moves by 0.03 % a minute while nobody turns.",
    "Leave the trims alone until it is warm; the session goes on by itself.",
)
FILE = Awaiting("file", "The turn is asked for.", "Save a capture when it is made.")
FEW_CODES = Flag(
    "few-codes",
    "The signal fills 38 of 256 codes",
    "Choose a smaller range until it nearly fills it.",
)
FINISHED = Finished(
    Done(
        5, "at-floor", 0.0042, 0.0003, {"upper": 0.11, "lower": -0.04},
        (
            Cause("time-symmetry", 0.0035, "Set rise and fall even, then trim once more.", 2e-4),
            Cause("shaper", 0.0018, "Nothing the two trims can do: the network's own limit.", 2e-4),
        ),
        "THD is at its floor: no turn of these trims takes it lower.",
        0.0046,
    ),
    0.0044, 4e-5, "12",
)  # fmt: skip
FAILED = Failed(
    4, "The instrument did not come back within 30 s.",
    "Check the cable and that the instrument is on, then begin again.",
)  # fmt: skip

STATES: dict[str, Sequence[Report]] = {
    "opening": (),
    "first-reading": (OPENED, measured(0, 0.25, -0.1)),
    "first-advice": (OPENED, measured(0, 0.25, -0.1), advised(0, known=False, turns=0.06)),
    "advice": (
        OPENED, measured(0, 0.25, -0.1), measured(1, 0.19, -0.1), measured(2, 0.19, 0.03),
        measured(3, 0.1, 0.03), advised(),
    ),
}  # fmt: skip
"""Reports that lead to a state of the screen."""
_SO_FAR = STATES["advice"]
STATES |= {
    "advice-lower": (*_SO_FAR[:-1], advised(trim="lower", sense="counter-clockwise", turns=0.121)),
    "half-way": (*_SO_FAR, followed(0.52, upper=0.07)),
    "slow": (*_SO_FAR, followed(0.86, "slow", upper=0.05)),
    "stop": (*_SO_FAR, followed(1.03, "stop", upper=0.04)),
    "too-far": (*_SO_FAR, followed(1.22, "stop", upper=0.03)),
    "wrong-trim": (*_SO_FAR, followed(0.1, "wrong-trim", lower=0.05)),
    "wrong-way": (*_SO_FAR, followed(-0.12, "wrong-way", upper=0.11)),
    "hold": (*_SO_FAR, followed(0.98, "wait", upper=0.04)),
    "flagged": (*_SO_FAR[:-2], measured(3, 0.1, 0.03, (FEW_CODES,)), advised()),
    "source-lost": (*_SO_FAR, SOURCE_LOST),
    "no-signal": (*_SO_FAR, NO_SIGNAL),
    "drifting": (*_SO_FAR, DRIFTING),
    "file": (*_SO_FAR[:-1], advised(follows=False), FILE),
    "confirming": (*_SO_FAR, measured(4, 0.01, 0.005), CONFIRMING),
    "finished": (*_SO_FAR, measured(4, 0.04, 0.02), measured(5, 0.018, 0.012), FINISHED),
    "failed": (*_SO_FAR, FAILED),
}


@dataclass
class Scripted:
    """A conversation that gives its reports and then waits to be ended, as a real one does.

    A word in the script is waited for; any other word that comes first is an error of the test.
    """

    script: Sequence[Report | Word | Callable[[], None] | float]
    """Reports to give, words to wait for, calls to make, seconds to pass."""
    holds: bool = True
    """Whether it stays open after the last report until it is stopped or told to quit."""
    heard: list[Word] = field(default_factory=list)
    """Words said, in order."""
    said: bool = False
    """Whether all reports have been handed over."""
    ended: bool = False
    """Whether `run` has come to its end."""
    _words: SimpleQueue[Word] = field(default_factory=SimpleQueue)

    def say(self, word: Word) -> None:
        """Take a word."""
        self.heard.append(word)
        self._words.put(word)

    def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
        """Play the script."""
        for step in self.script:
            if isinstance(step, str):
                if not self._wait(step, stop):
                    break
            elif isinstance(step, float):
                time.sleep(step)
            elif callable(step):
                step()
            else:
                yield step
        self.said = True
        while self.holds and not stop() and "quit" not in self.heard:
            time.sleep(0.005)
        self.ended = True

    def _wait(self, wanted: Word, stop: Callable[[], bool]) -> bool:
        while not stop():
            try:
                word = self._words.get(timeout=0.01)
            except Empty:
                continue
            if word == "quit":
                return False
            assert word == wanted, f"{word!r} was said where {wanted!r} was expected"
            return True
        return False


@dataclass
class Turned:
    """A screwdriver that writes down what it was told."""

    turns: list[tuple[Trim, float]] = field(default_factory=list)
    """Turns in order."""
    made_at: list[float] = field(default_factory=list)
    """When each was made, monotonic seconds."""

    def turn(self, trim: Trim, turns: float) -> None:
        """Note a turn."""
        self.made_at.append(time.monotonic())
        self.turns.append((trim, turns))
