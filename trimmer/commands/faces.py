"""The two faces without a screen: plain lines and lines of JSON."""

from __future__ import annotations

import sys
from typing import Protocol, TextIO, assert_never

from trimmer.commands.wording import (
    advice_lines,
    done_lines,
    limit_fields,
    limit_lines,
    percent,
    reading_lines,
)
from trimmer.events import advice_event, done_event, follow_event, line, reading_event
from trimmer.measurement.reading import Reading
from trimmer.reports import (
    Advised,
    Awaiting,
    Conversation,
    Failed,
    Finished,
    Followed,
    Measured,
    Opened,
    Report,
    Told,
)

CAUTIONS = (
    "Cautions. Opening mains-powered equipment exposes lethal voltage: unplug it, wait, discharge and",
    "verify first. Trimming inside a live unit is for qualified persons, and not alone. The clip of an",
    "oscilloscope's probe and the ground of a sound card are earth: never on mains-side or non-isolated",
    "circuits. Use an insulated trimming tool; do not force end stops. Local rules, the maker's papers",
    "and licensed practice come first. What this tool says is no safety approval.",
)


class Face(Protocol):
    """Something that shows reports."""

    def show(self, report: Report) -> None:
        """Show one report."""
        ...


class JsonFace:
    """Lines of JSON on stdout and nothing else there; messages go to stderr."""

    def __init__(
        self,
        out: TextIO | None = None,
        messages: TextIO | None = None,
        *,
        limit_thd: float | None = None,
    ) -> None:
        self._out = out or sys.stdout
        self._messages = messages or sys.stderr
        self._limit_thd = limit_thd
        self._reading: Reading | None = None

    def show(self, report: Report) -> None:
        """Show one report."""
        match report:
            case Measured():
                self._reading = report.reading
                event = reading_event(
                    report.turn,
                    report.taken_at,
                    report.source,
                    report.reading,
                    notes=list(report.notes),
                )
                self._print(line(event))
            case Advised():
                self._print(line(advice_event(report.advice)))
            case Followed():
                self._print(line(follow_event(report.word, report.age_s)))
            case Finished():
                event = done_event(report.done, report.thd, report.thd_sigma, report.sheet)
                if self._reading is not None and self._limit_thd is not None:
                    event["limit"] = limit_fields(self._reading, self._limit_thd)["verdict"]
                self._print(line(event))
            case Opened():
                _message(
                    self._messages, f"{report.identity}: sheet {report.sheet} in {report.book}"
                )
            case Awaiting() | Told() | Failed():
                _trouble(self._messages, report)
            case _:
                assert_never(report)

    def _print(self, text: str) -> None:
        print(text, file=self._out, flush=True)


class PlainFace:
    """Sentences on stdout; trouble on stderr."""

    def __init__(
        self,
        out: TextIO | None = None,
        messages: TextIO | None = None,
        *,
        prompt: bool = True,
        limit_thd: float | None = None,
    ) -> None:
        self._limit_thd = limit_thd
        self._reading: Reading | None = None
        self._out = out or sys.stdout
        self._messages = messages or sys.stderr
        self._prompt = prompt
        self._word = ""

    def show(self, report: Report) -> None:
        """Show one report."""
        match report:
            case Opened():
                unit = f"unit {report.unit}" if report.unit else "an unnamed unit"
                self._print(*CAUTIONS)
                self._print(f"Trimming {unit} from {report.source}: {report.identity}.")
                self._print(f"Sheet {report.sheet} in {report.book}.")
            case Measured():
                self._reading = report.reading
                self._print(*reading_lines(f"Turn {report.turn}", report.reading, report.notes))
            case Advised():
                self._word = ""
                self._print(*advice_lines(report.advice))
                if self._prompt and not report.follows:
                    self._print("  Press Enter when made; or type back, at-stop, skip, quit.")
            case Followed():
                self._followed(report)
            case Finished():
                self._print(*done_lines(report.done, report.thd, report.thd_sigma, report.sheet))
                if self._reading is not None:
                    self._print(*limit_lines(self._reading, self._limit_thd))
            case Awaiting() | Told() | Failed():
                _trouble(self._messages, report)
            case _:
                assert_never(report)

    def _followed(self, report: Followed) -> None:
        """Say a word only when it changes: a line for each reading would flood a screen reader."""
        word = report.word
        if word.say != self._word:
            self._word = word.say
            share = "" if word.share is None else f", {100 * word.share:.0f} % of the turn made"
            self._print(f"  {word.say.replace('-', ' ').upper()}{share}, THD {percent(word.thd)}.")

    def _print(self, *lines: str) -> None:
        for text in lines:
            print(text, file=self._out)
        self._out.flush()


def _message(out: TextIO, text: str) -> None:
    print(f"trimmer: {text}", file=out, flush=True)


def _trouble(out: TextIO, report: Awaiting | Told | Failed) -> None:
    _message(out, report.message)
    left = ""
    if isinstance(report, Awaiting) and report.seconds_left is not None:
        left = f" (waiting {report.seconds_left:.0f} s more)"
    print(f"  {report.remedy}{left}", file=out, flush=True)


def converse(session: Conversation, face: Face) -> int:
    """Run a session to its end in this thread, showing each report.

    Returns
    -------
    int
        0, or the documented status of what ended it.
    """
    status = 0
    reports = session.run()
    try:
        for report in reports:
            face.show(report)
            if isinstance(report, Failed):
                status = report.exit_status
    finally:
        close = getattr(reports, "close", None)
        if close is not None:
            close()
    return status
