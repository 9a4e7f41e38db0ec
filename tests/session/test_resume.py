"""A session that broke off is taken up where it stopped."""

from __future__ import annotations

import argparse
import signal
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.command import Running, trimmer
from tests.session.sources import StraightUnit, UnitSource
from tests.session.test_session import SIGN, finished, played, session
from trimmer.book import Book, open_book
from trimmer.cli import build_parser
from trimmer.commands.holding import session_of
from trimmer.commands.opening import Opened
from trimmer.errors import CommandError
from trimmer.guidance.advice import Advice
from trimmer.reports import Advised, Measured


@pytest.fixture
def book(tmp_path: Path) -> Iterator[Book]:
    with open_book(tmp_path / "book.sqlite") as book:
        yield book


def resumed(sheet: str) -> argparse.Namespace:
    return build_parser().parse_args(["tune", "bench", "--json", "--resume", sheet])


def broken_off(book: Book, unit: StraightUnit, turns: int) -> Advice:
    """Hold a session up to the advice after some turns, and leave it there as a kill would."""
    held = session(UnitSource(unit), book)
    for report in held.run():
        if isinstance(report, Advised):
            if report.advice.turn == turns:
                held.keeper.abandon = lambda *_: None  # type: ignore[method-assign]
                return report.advice
            unit.turn(report.advice.trim, SIGN[report.advice.sense] * report.advice.turns)
            held.say("moved")
    raise AssertionError("the session ended first")


@pytest.mark.parametrize("made", [False, True], ids=["turn not made yet", "turn made meanwhile"])
def test_a_session_taken_up_goes_on_to_the_floor(book: Book, made: bool) -> None:
    unit = StraightUnit(21)
    pending = broken_off(book, unit, 2)
    (row,) = book.open_sheets()
    if made:
        unit.turn(pending.trim, SIGN[pending.sense] * pending.turns)
    source = Opened(UnitSource(unit))
    again = session_of(resumed(row.id), source, book, follow=False)
    reports = played(again, unit)
    first = next(report for report in reports if isinstance(report, Advised)).advice
    assert (first == pending) is not made
    end = finished(reports)
    assert end.sheet == row.id
    assert end.done.verdict == "at-floor"
    turns = [report.turn for report in reports if isinstance(report, Measured)]
    assert turns[0] == 2
    assert book.sheet(row.id).row.unit == "no. 1"


def test_a_finished_sheet_is_not_taken_up(book: Book) -> None:
    unit = StraightUnit(22)
    end = finished(played(session(UnitSource(unit), book), unit))
    with pytest.raises(CommandError, match="finished"):
        session_of(resumed(end.sheet), Opened(UnitSource(unit)), book, follow=False)


def test_a_killed_command_is_taken_up(own_home: Path) -> None:
    with Running("bench", "--port", "0", "--seed", "31") as bench:
        resource = (bench.line() or "").split()[0]
        with Running("tune", resource, "--json", "--unit", "no. 31") as tune:
            for event in tune.events():
                if event["event"] == "advice" and event["turn"] == 2:
                    break
                if event["event"] == "advice":
                    bench.say(f"{event['trim']} {SIGN[event['sense']] * event['turns']:.5f}")
                    bench.line()
                    tune.say()
            tune.process.send_signal(signal.SIGKILL)
            tune.end()
        with open_book(own_home / "book.sqlite", writes=False) as book:
            (row,) = book.open_sheets()
            assert [turn.turn for turn in book.sheet(row.id).turns] == [0, 1, 2]
        done = trimmer("tune", resource, "--json", "--resume", row.id, stdin="quit\n")
    assert done.returncode == 0, done.stderr
    assert f'"sheet": "{row.id}"' in done.stdout
    assert '"turns_made": 2' in done.stdout
