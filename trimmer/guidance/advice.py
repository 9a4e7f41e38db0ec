"""The values that guidance gives: a turn to make, a live word while it is made, the end."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Trim = Literal["upper", "lower"]
Sense = Literal["clockwise", "counter-clockwise"]
Say = Literal["wait", "turn", "slow", "stop", "wrong-trim", "wrong-way"]
Verdict = Literal["at-floor", "end-stop", "no-response", "unstable", "stopped"]


@dataclass(frozen=True, slots=True)
class Cause:
    """A part of the distortion that the trims do not reach, with its share and what to do of it."""

    cause: str
    """``time-symmetry``, ``slewing``, ``bandwidth``, ``shaper``, ``hum``, ``noise``, ``supply``, ..."""
    thd: float
    """Its contribution, ratio to the fundamental."""
    remedy: str
    """One imperative sentence."""
    thd_sigma: float | None = None
    """Standard uncertainty of `thd`, where known."""


@dataclass(frozen=True, slots=True)
class Advice:
    """The next turn: which trim, which way, how far, and what to expect."""

    turn: int
    """Turns made so far."""
    trim: Trim
    """As the person has labelled it."""
    sense: Sense
    """Seen from the screwdriver's side."""
    turns: float
    """Turns of the screw, positive (1 is 360 degrees)."""
    expected_thd: float | None
    """THD expected after it, ratio; None until the trim's response is known."""
    floor_thd: float | None
    """THD that no turn can remove, ratio; None until both responses are known."""
    floor_sigma: float | None
    """Its standard uncertainty."""
    reason: str
    """Why, in one sentence for the person."""
    rises_first: bool = False
    """True where THD is expected to rise before it falls with the next turn."""
    going_back: bool = False
    """True where the turn takes back an earlier one."""
    swapped: bool = False
    """True once the trim called upper was seen to shape the lower crest, and the other way round."""
    notice: str = ""
    """A guard rail's word (end stop, wrong screw, open wiper, drifting), empty where there is none."""

    @property
    def degrees(self) -> float:
        """The turn in degrees of the screw."""
        return 360.0 * self.turns


@dataclass(frozen=True, slots=True)
class Confirm:
    """The setting looks final: take a longer reading before it is called done."""

    turn: int
    """Turns made so far."""
    sigma_thd: float
    """Standard uncertainty of THD that the longer reading should reach, ratio."""
    reason: str
    """Why, in one sentence for the person."""


@dataclass(frozen=True, slots=True)
class Done:
    """The end of the guidance, whatever the verdict."""

    turn: int
    """Turns made."""
    verdict: Verdict
    """How it ended."""
    floor_thd: float | None
    """THD that no turn can remove, ratio."""
    floor_sigma: float | None
    """Its standard uncertainty."""
    net_turns: dict[Trim, float]
    """Turns of each trim from the start, estimated as really made; plus is clockwise."""
    remainder: tuple[Cause, ...]
    """What is left and why."""
    reason: str
    """One sentence for the person."""
    expected_thd_warm: float | None = None
    """THD to expect once warm, where the kind's drift is known."""


@dataclass(frozen=True, slots=True)
class Follow:
    """A live word while the hand turns."""

    turn: int
    """Turns made before this one."""
    trim: Trim
    """The trim asked for."""
    share: float | None
    """How far of the asked turn has really been made (1 is all of it); None until known."""
    say: Say
    """The one word for the hand."""
    still: bool
    """True once the turn counts as made: the reading moved and has been still for a moment."""
    thd: float | None = None
    """THD of the reading behind this word, ratio."""
