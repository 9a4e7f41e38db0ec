"""What a session tells its faces (screen, plain lines, JSON) and what they tell it."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from datetime import datetime
from typing import Literal, Protocol

import numpy as np
from numpy.typing import NDArray

from trimmer.guidance.advice import Advice, Done, Follow, Trim
from trimmer.measurement.reading import Reading

Word = Literal["moved", "back", "at-stop", "skip", "quit"]
"""What the person can say to a session: the contract's words on stdin, the screen's actions."""


@dataclass(frozen=True, slots=True)
class Opened:
    """The source answered and the sheet was begun."""

    source: str
    """SOURCE word."""
    identity: str
    """Who answers, cleaned."""
    dialect: str | None
    """Waveform dialect, where there is one."""
    unit: str
    """Unit's name; empty where none was given."""
    kind: str
    """Unit's kind; empty where none is known."""
    sheet: str
    """Sheet's id in the book."""
    book: str
    """Where the book is."""


@dataclass(frozen=True, slots=True, eq=False)
class Measured:
    """A still reading was taken after `turn` turns; it is in the book when this is handed out."""

    turn: int
    """Turns made before it."""
    taken_at: datetime
    """When, with time zone."""
    source: str
    """Cleaned name of what was read."""
    reading: Reading
    """The reading."""
    waveform: NDArray[np.float64]
    """Shape (n,), at most a few thousand samples of the capture, for the picture."""
    interval_s: float
    """Seconds between the samples of `waveform`."""
    notes: tuple[str, ...] = ()
    """The source's own remarks."""


@dataclass(frozen=True, slots=True)
class Advised:
    """The next turn to make; the session now waits for it (or follows the hand)."""

    advice: Advice
    """What to do."""
    follows: bool
    """True where the session watches the hand and takes the turn as made by itself."""
    reach: NDArray[np.float64] | None = field(default=None, compare=False, repr=False)
    """Shape (m, 2(K-1)), orthonormal rows in the order of `Reading.parts`: the span of the trims'
    columns as far as they are known; None until one is."""


@dataclass(frozen=True, slots=True, eq=False)
class Followed:
    """A live reading while the hand turns."""

    word: Follow
    """What to say to the hand."""
    reading: Reading
    """The reading behind it."""
    waveform: NDArray[np.float64]
    """Shape (n,), samples for the picture."""
    interval_s: float
    """Seconds between the samples of `waveform`."""
    age_s: float
    """Seconds from the last sample to this report."""


@dataclass(frozen=True, slots=True)
class Awaiting:
    """The session waits for something that was lost or is not yet good enough, and says so."""

    code: str
    """``source-lost``, ``signal``, ``confirming``, ``drifting``, ``file``."""
    message: str
    """What is the matter."""
    remedy: str
    """What to do."""
    seconds_left: float | None = None
    """After which the session gives up, where it does."""


@dataclass(frozen=True, slots=True)
class Told:
    """Something worth knowing that changes nothing of what to do: the book has something to say."""

    message: str
    """What is the matter."""
    remedy: str
    """What to do, or that nothing needs to be done."""


@dataclass(frozen=True, slots=True)
class Finished:
    """The session's end; the sheet is in the book."""

    done: Done
    """Verdict and remainder."""
    thd: float | None
    """Final THD, ratio."""
    thd_sigma: float | None
    """Its standard uncertainty."""
    sheet: str
    """Sheet's id in the book."""


@dataclass(frozen=True, slots=True)
class Failed:
    """The session could not go on; what was measured is in the book."""

    exit_status: int
    """As documented: 3 signal, 4 source, 5 book."""
    message: str
    """What happened."""
    remedy: str
    """What to do."""


Report = Opened | Measured | Advised | Followed | Awaiting | Told | Finished | Failed


@dataclass(frozen=True, slots=True)
class SheetNotes:
    """What the person says of the session when it begins."""

    unit: str = ""
    """Unit's name."""
    kind: str = ""
    """Unit's kind."""
    notes: dict[str, str] = field(default_factory=dict)
    """KEY=VALUE notes."""


class Conversation(Protocol):
    """A session as its faces see it."""

    def run(self, stop: Callable[[], bool] = ...) -> Iterator[Report]:
        """Give reports until the session ends or `stop` says so. Called once, in one thread."""
        ...

    def say(self, word: Word) -> None:
        """Take a word from the person. Safe from any thread; answered through the reports."""
        ...


class Screwdriver(Protocol):
    """Something that turns the simulated unit's trims: keys on the screen, lines on stdin."""

    def turn(self, trim: Trim, turns: float) -> None:
        """Turn a trim's screw; plus is clockwise. Safe from any thread, returns at once."""
        ...
