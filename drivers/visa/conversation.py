"""Questions and answers over one link: commands filled in, error queues, keeping in step."""

from __future__ import annotations

import re
import time
from collections.abc import Mapping

from drivers.contract import SourceError, SourceRefused, SourceTimeout, clean
from drivers.visa.answers import register, without_header
from drivers.visa.blocks import Block, BlockError
from drivers.visa.dialect import Errors
from drivers.visa.link import Link

_MOST_FAULTS = 32
_FAULT = re.compile(r"\s*([-+]?[0-9]{1,9})\s*(?:,\s*(.*))?$", re.DOTALL)
_EVENT_FAULTS = 0b0011_1100
"""Bits of the standard event register that mean an error: query, device, execution, command."""

WRONG_STATE = "wrong state"
UNKNOWN = "unknown"


class Conversation:
    """What is said over a link.

    Parameters
    ----------
    link
        The link.
    fill
        What stands for the names in braces in every command, such as the channel.
    """

    def __init__(self, link: Link, fill: Mapping[str, object]) -> None:
        self.link = link
        self._fill = dict(fill)
        self.asks_errors = True
        """False once the instrument has shown that it keeps no errors to ask for."""

    def filled(self, command: str, **more: object) -> str:
        """Fill in the names in braces."""
        return command.format_map({**self._fill, **more})

    def tell(self, command: str, deadline: float, **more: object) -> None:
        """Send a command."""
        self.link.write(self.filled(command, **more), deadline)

    def ask(self, query: str, deadline: float, **more: object) -> str:
        """Send a query and read the line it is answered with, without an echo of the query."""
        self.tell(query, deadline, **more)
        try:
            return without_header(self.link.line(deadline), query)
        except BlockError as error:
            raise SourceRefused(f"{clean(query)}: {clean(str(error))}") from error

    def ask_block(self, query: str, deadline: float, expect: int, **more: object) -> Block:
        """Send a query and read the block it is answered with.

        Raises
        ------
        SourceRefused
            No block, or not the one it said; the link is out of step then.
        """
        self.tell(query, deadline, **more)
        try:
            return self.link.block(deadline, expect)
        except BlockError as error:
            raise SourceRefused(
                f"{clean(query)}: {clean(str(error))}",
                "Take the capture again; if it happens again, choose another dialect with `--dialect`.",
            ) from error

    def quietly(self, query: str, wait_s: float, deadline: float) -> str | None:
        """Ask what may not be known: None where no answer comes within `wait_s`.

        The conversation is in step afterwards, or an error is raised.
        """
        try:
            return self.ask(query, min(deadline, time.monotonic() + wait_s))
        except SourceTimeout:
            self.step_in(deadline)
            return None

    def step_in(self, deadline: float) -> None:
        """Get in step after a silence: a late answer must not pass for the next one.

        The sentinel is `*OPC?`, whose answer is 1; whatever comes before it is late.
        """
        self.link.resume()
        try:
            answer = self.ask("*OPC?", min(deadline, time.monotonic() + 1.0))
            for _ in range(8):
                if answer.lstrip("+") == "1":
                    self.link.drain()
                    return
                answer = self.link.line(min(deadline, time.monotonic() + 0.5))
        except SourceTimeout:
            self.link.broken = True
            raise
        self.link.broken = True
        raise SourceRefused(
            f"{self.link.resource} answers *OPC? with {clean(answer, 40)!r}, again and again",
            "Check that this resource is an instrument that speaks SCPI.",
        )

    def faults(self, errors: Errors, deadline: float) -> list[str]:
        """Empty the instrument's error queue.

        Returns
        -------
        list of str
            What it held, cleaned. Empty where the instrument keeps none.
        """
        if not self.asks_errors:
            return []
        if errors.queue is not None:
            return self._queued(errors.queue, deadline)
        if errors.event is not None:
            return self._events(errors.event, deadline)
        return []

    def _queued(self, query: str, deadline: float) -> list[str]:
        found: list[str] = []
        while len(found) < _MOST_FAULTS:
            answer = self.quietly(query, 1.0, deadline)
            read = _FAULT.match(answer) if answer is not None else None
            if read is None:
                self.asks_errors = False
                return found
            if int(read[1]) == 0:
                return found
            found.append(clean(answer or "", 120))
        return found

    def _events(self, query: str, deadline: float) -> list[str]:
        events = register(self.quietly("*ESR?", 1.0, deadline))
        if events is None:
            self.asks_errors = False
            return []
        if not events & _EVENT_FAULTS:
            return []
        told = self.quietly(query, 1.0, deadline)
        return [clean(told, 120) if told else f"event register {events}"]

    def why_silent(self, deadline: float) -> str | None:
        """After a query without an answer: was it unknown, or asked in the wrong state?

        Returns
        -------
        str or None
            `UNKNOWN` (a command error), `WRONG_STATE` (an execution error), None where nothing
            is told.
        """
        try:
            events = register(self.quietly("*ESR?", 0.7, deadline)) or 0
        except SourceError:
            return None
        if events & 0b0001_0000:
            return WRONG_STATE
        return UNKNOWN if events & 0b0010_0000 else None
