"""Sentences for the person at the bench: short, in the trade's words."""

from __future__ import annotations

from trimmer.guidance.advice import Sense, Trim

TRIMS: tuple[Trim, Trim] = ("upper", "lower")

FIRST = "To learn what the {trim} trim does: the {trim} crest is the worse one."
FIRST_OTHER = (
    "To learn what the {trim} trim does; the size is the likely one, the sense is not known yet."
)
OTHER_SENSE = "Nothing changed; the other sense tells whether the trim stood at its end."
OTHER_TRIM = "The other trim gave no answer; this one may."
NEARER = "Brings both crests towards their joint best."
RISES = "Brings both trims towards their joint best; THD rises first and falls with the next turn."
LAST_BIT = "A last small turn is still worth making."
BACK = "Takes the last turn back."
ANOTHER = "Another way, since the last one was passed over."
BEST_SEEN = "Goes back towards the best setting seen."
SURPRISING = "The reading is not what this turn should give: a longer one tells, hands off."
CONFIRM = "Nothing more to gain that a hand can set: a longer reading decides."
AT_FLOOR = "What is left, the trims do not reach."
AT_STOP = "The best setting lies past the end of the {trim} trim; this is the best inside."
NO_RESPONSE = (
    "Neither trim changes the wave: check that these are the shaping trims and their wipers."
)
ONE_SILENT = "One trim gives no answer; this is the best that the other one reaches."
UNSTABLE = "The unit drifts while nobody turns: let it warm up, then start again."
STOPPED = "Ended by the person."
END_OF_TRAVEL = (
    "The {trim} trim changed nothing: end stop if it turns back with effect, else the wrong screw or an "
    "open wiper."
)
SILENT = "The {trim} trim answers in neither sense: another screw, or an open wiper."
STOP_MET = "The {trim} trim is at its end."
WRONG_TRIM = "It was the {trim} trim that moved; the guide goes on from there."
AFRESH = "The turns made do not fit together: the guide begins afresh from here, turn by turn."
MISTAKEN = (
    "An earlier turn seems to have been another one than was asked; the guide goes on from there."
)
WRONG_WAY = "The {trim} trim went the other way; the guide goes on from there."
KIND_TURNED = "In this unit the {trim} trim works the other way round than in others of its kind."
KIND_DIFFERS = "This unit answers differently from its kind; it is learned afresh."
SLEWING = (
    "The output is slewing and makes {thd:.2g} % by itself: lower the frequency or the amplitude; the "
    "trims are not used to hide it."
)
SYMMETRY_FIRST = "Set the time symmetry first if it can be set: it makes {thd:.2g} % by itself."
SWAPPED = "The trim called upper shapes the lower crest, and the other way round."
DRIFTING = "The reading moves while nobody turns: still warming up?"


def sense_of(signed: float) -> Sense:
    """Name the sense of a signed turn."""
    return "clockwise" if signed >= 0.0 else "counter-clockwise"
