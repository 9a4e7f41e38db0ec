"""The person's words on stdin, handed to a session by a thread of their own."""

from __future__ import annotations

import sys
import threading
from typing import TextIO, get_args

from trimmer.console import complain
from trimmer.reports import Conversation, Word

WORDS: tuple[str, ...] = get_args(Word)


def word_of(text: str) -> Word | None:
    """Read a line as a word; an empty line says *moved*; None where it is no word."""
    said = text.strip().lower() or "moved"
    for word in WORDS:
        if said == word:
            return word  # type: ignore[return-value]
    return None


def listen(session: Conversation, *, end_quits: bool, lines: TextIO | None = None) -> None:
    """Hand each line of stdin to the session, from now on, in a thread that dies with the process.

    Parameters
    ----------
    session
        The session.
    end_quits
        True where the end of stdin ends the session (false for a folder, for following, for a
        simulated hand: nothing is waited for from stdin there).
    lines
        Where the lines come from; None is stdin.
    """
    source = lines or sys.stdin or ()  # a closed stdin has ended, as an empty one has

    def run() -> None:
        for text in source:
            word = word_of(text)
            if word is None:
                complain(
                    f"{text.strip()[:40]!r} is no word of this session",
                    f"Say nothing (or moved), {', '.join(WORDS[1:])}.",
                )
            else:
                session.say(word)
        if end_quits:
            session.say("quit")

    threading.Thread(target=run, name="words", daemon=True).start()
