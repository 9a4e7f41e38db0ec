"""Which dialect an instrument speaks: found by asking, never by a table of makers.

Only queries are sent, one a message, each with a short wait, and `*CLS` at the end: no reset, no
automatic set-up, nothing that starts or stops an acquisition. A silence is followed by a sentinel
query, so that a late answer does not pass for the answer to the next question.
"""

from __future__ import annotations

import contextlib
import time
from dataclasses import dataclass, field
from pathlib import Path

from drivers.contract import SourceError, SourceRefused, SourceTimeout, clean
from drivers.visa import answers
from drivers.visa.blocks import Block, BlockError
from drivers.visa.conversation import WRONG_STATE, Conversation
from drivers.visa.dialect import Confirm, Dialect
from drivers.visa.formula import FormulaError
from drivers.visa.kept import KeptSettings
from drivers.visa.memory import Known, recall, remember
from drivers.visa.preamble import carries, matches
from drivers.visa.shelf import chosen, shelf
from drivers.visa.speaker import Speaker
from drivers.visa.ways import PROBE_S

_LONGEST_S = 25.0
"""Seconds after which finding out is given up."""

_SETTING_UP_S = 15.0

_MOST_BYTES = 1 << 24
"""Longest block read while finding out."""

NOTHING_FITS = (
    "Name the dialect with `--dialect`, or teach the instrument by a file: see docs/dialects.md."
)


@dataclass(slots=True)
class Found:
    """A dialect found, and how."""

    dialect: Dialect
    """The dialect spoken; of rivals, the most plausible one until a frame decides."""
    speaker: Speaker
    """Set up and ready."""
    how: str
    """How it was found, in words."""
    rivals: tuple[Dialect, ...] = ()
    """Dialects that answer alike and are still to be told apart by a frame."""
    kept: Known | None = None
    """What the settings hold of this instrument."""
    notes: tuple[str, ...] = ()
    """What should be said of every capture."""


@dataclass(slots=True)
class _Asked:
    """What was answered so far."""

    talk: Conversation
    deadline: float
    given: dict[str, str | None] = field(default_factory=dict)
    blocks: dict[str, Block | None] = field(default_factory=dict)
    wrong_state: list[str] = field(default_factory=list)

    def answer(self, query: str) -> str | None:
        """Ask once; later the same answer."""
        if query not in self.given:
            answer = self.talk.quietly(query, PROBE_S, self.deadline)
            if answer is None and self.talk.why_silent(self.deadline) == WRONG_STATE:
                self.wrong_state.append(query)
            self.given[query] = answer
        return self.given[query]

    def block(self, query: str) -> Block | None:
        """Ask once for a block; None where none comes."""
        if query not in self.blocks:
            self.blocks[query] = None
            try:
                self.talk.tell(query, self.deadline)
                brief = min(self.deadline, time.monotonic() + 2.0 * PROBE_S)
                self.blocks[query] = self.talk.link.block(brief, most=_MOST_BYTES)
            except (SourceTimeout, BlockError):
                self.talk.step_in(self.deadline)
        return self.blocks[query]


def find_dialect(
    talk: Conversation,
    identity: str,
    name: str | None,
    channel: int,
    settings_dir: Path | None,
    kept: KeptSettings,
) -> Found:
    """Find the dialect, and set the instrument up in it.

    Parameters
    ----------
    talk
        The conversation.
    identity
        The whole identification.
    name
        A dialect that was named; None finds out.
    channel
        The channel read.
    settings_dir
        Where what was found before is kept.
    kept
        Takes up the settings that will be touched.

    Raises
    ------
    SourceRefused
        No dialect fits, or the one named is refused.
    """
    deadline = time.monotonic() + _LONGEST_S

    def ready(dialect: Dialect, known: Known, how: str, rivals: tuple[Dialect, ...] = ()) -> Found:
        speaker = Speaker(talk, dialect, known, channel, kept)
        speaker.set_up(time.monotonic() + _SETTING_UP_S)
        return Found(dialect, speaker, how, rivals)

    before = recall(settings_dir, identity)
    if name is not None:
        named = chosen(name, settings_dir)
        if before is not None and before.dialect == name:
            with contextlib.suppress(SourceRefused):  # what is remembered may hold no longer
                return ready(named, before, "named")
        return ready(named, Known(name), "named")
    dialects, faults = shelf(settings_dir)
    if before is not None and before.dialect in dialects:
        dialect = dialects[before.dialect]
        rivals = () if before.settled else _family(dialect, dialects)
        try:
            found = ready(dialect, before, "remembered", rivals)
        except SourceRefused:
            remember(settings_dir, identity, None)
            talk.step_in(deadline)
        else:
            found.kept = before
            return found
    if faults:
        raise faults[0]
    asked = _Asked(talk, deadline)
    candidates = _candidates(asked, dialects)
    talk.tell("*CLS", deadline)
    if not candidates:
        raise _nothing_fits(asked, identity, channel)
    return ready(candidates[0], Known(candidates[0].name), "asked", _rivals(candidates))


def _family(dialect: Dialect, dialects: dict[str, Dialect]) -> tuple[Dialect, ...]:
    """Give the dialects that answer as this one does, itself first."""
    if dialect.family is None:
        return ()
    others = [other for other in dialects.values() if other.family == dialect.family]
    return _rivals([dialect, *[other for other in others if other.name != dialect.name]])


def _rivals(candidates: list[Dialect]) -> tuple[Dialect, ...]:
    return tuple(candidates) if len(candidates) > 1 else ()


def _candidates(asked: _Asked, dialects: dict[str, Dialect]) -> list[Dialect]:
    """Ask in the order of ranks; the first answer that fits decides the family."""
    known = [(dialect.find.rank, dialect) for dialect in dialects.values() if dialect.find]
    for _, first in sorted(known, key=lambda item: (item[0], item[1].name)):
        if not _fits(asked, first):
            continue
        if first.family is None:
            return [first]
        family = [
            other
            for _, other in sorted(known, key=lambda item: (item[0], item[1].name))
            if other.family == first.family and (other is first or _fits(asked, other))
        ]
        # A sort keeps the order of equals: plausible ones first, by rank among themselves.
        return sorted(family, key=lambda dialect: not plausible(dialect, asked))
    return []


def _fits(asked: _Asked, dialect: Dialect) -> bool:
    find = dialect.find
    assert find is not None
    if find.carries_preamble:
        answered = _carried(asked, dialect, find.ask)
    else:
        answers_given = (asked.answer(asked.talk.filled(query)) for query in find.ask)
        answered = any(_says(answer, find.numbers, find.matches) for answer in answers_given)
    return answered and all(_confirmed(asked, dialect, confirm) for confirm in find.confirm)


def _says(answer: str | None, count: int | None, pattern: str | None) -> bool:
    if answer is None:
        return False
    if count is not None:
        try:
            return len(answers.numbers(answer)) >= count
        except answers.AnswerError:
            return False
    return pattern is not None and matches(answer, pattern)


def _confirmed(asked: _Asked, dialect: Dialect, confirm: Confirm) -> bool:
    if confirm.carries_preamble:
        return _carried(asked, dialect, confirm.ask)
    given = (asked.answer(asked.talk.filled(query)) for query in confirm.ask)
    return any(_says(answer, None, confirm.matches) for answer in given)


def _carried(asked: _Asked, dialect: Dialect, queries: list[str]) -> bool:
    blocks = (asked.block(asked.talk.filled(query)) for query in queries)
    return any(block is not None and carries(dialect.preamble[0], block) for block in blocks)


def plausible(dialect: Dialect, asked: _Asked) -> bool:
    """Say whether the numbers answered look like this dialect's."""
    find = dialect.find
    preamble = dialect.preamble[0]
    if find is None or find.plausible is None or not isinstance(preamble.fields, list):
        return False
    for query in find.ask:
        answer = asked.answer(asked.talk.filled(query))
        if answer is None:
            continue
        try:
            values = answers.numbers(answer)
            return bool(find.plausible(dict(zip(preamble.fields, values, strict=False))))
        except (answers.AnswerError, FormulaError):
            return False
    return False


def _nothing_fits(asked: _Asked, identity: str, channel: int) -> SourceError:
    if asked.wrong_state:
        return SourceRefused(
            f"{clean(identity)} knows {asked.wrong_state[0]} but cannot answer it now",
            f"Switch channel {channel} on at the instrument, then try again.",
        )
    return SourceRefused(f"{clean(identity)} answers in no dialect known here", NOTHING_FITS)
