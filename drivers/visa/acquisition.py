"""Arming an acquisition, and waiting for it by the instrument's own means."""

from __future__ import annotations

import time

from drivers.contract import SourceRefused, SourceTimeout, clean
from drivers.visa import answers
from drivers.visa.conversation import Conversation
from drivers.visa.dialect import Acquire
from drivers.visa.formula import same_word

_FIRST_LOOK_S = 0.0005
_LAST_LOOK_S = 0.05
_SLOWER = 1.6


def acquire(talk: Conversation, how: Acquire, deadline: float) -> None:
    """Arm, and wait until the acquisition is complete.

    Raises
    ------
    SourceTimeout
        It was not, by the deadline.
    SourceRefused
        The answer to `*OPC?` is not 1: the conversation is out of step.
    """
    for query in how.before:
        talk.ask(query, deadline)
    for command in how.send:
        talk.tell(command, deadline)
    if how.poll is not None:
        _poll(talk, how, deadline)
    if how.finish is not None:
        answer = talk.ask(how.finish, deadline)
        if how.finish.endswith("*OPC?") and answer.lstrip("+") != "1":
            raise SourceRefused(
                f"{clean(how.finish)} is answered with {clean(answer, 40)!r}, not 1",
                "Take the capture again.",
            )


def answers_poll(talk: Conversation, how: Acquire, wait_s: float, deadline: float) -> bool:
    """Say whether the instrument knows the query this way of waiting polls; nothing is armed."""
    if how.poll is None:
        return True
    answer = talk.quietly(how.poll, wait_s, deadline)
    return answer is not None and (bool(how.until) or _number(answer) is not None)


def _poll(talk: Conversation, how: Acquire, deadline: float) -> None:
    assert how.poll is not None
    pause = _FIRST_LOOK_S
    while True:
        answer = talk.ask(how.poll, deadline)
        if _complete(how, answer):
            return
        if time.monotonic() + pause >= deadline:
            raise SourceTimeout(
                f"the acquisition was not complete in time: {clean(how.poll)} still gives "
                f"{clean(answer, 30)!r}"
            )
        time.sleep(pause)
        pause = min(_LAST_LOOK_S, pause * _SLOWER)


def _complete(how: Acquire, answer: str) -> bool:
    if how.until:
        word = answer
        return any(same_word(word, wanted) for wanted in how.until)
    state = _number(answer)
    if state is None:
        return False
    if how.clear_bits is not None:
        return not state & how.clear_bits
    return bool(how.set_bits is not None and state & how.set_bits)


def _number(answer: str) -> int | None:
    try:
        return int(answers.number(answer))
    except (answers.AnswerError, OverflowError):
        return None
