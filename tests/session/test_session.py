"""The engine under every face: what it reports, in which order, and what it keeps when things break."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from drivers import SourceLost, SourceTimeout, UnusableCapture
from tests.session.sources import StraightUnit, UnitSource
from trimmer.book import Book, open_book
from trimmer.guidance import Guide
from trimmer.intake import Wanted
from trimmer.keeping import Keeper
from trimmer.reports import (
    Advised,
    Awaiting,
    Failed,
    Finished,
    Followed,
    Measured,
    Opened,
    Report,
    SheetNotes,
)
from trimmer.session import Manner, Session

SIGN = {"clockwise": 1.0, "counter-clockwise": -1.0}


@pytest.fixture
def book(tmp_path: Path) -> Iterator[Book]:
    with open_book(tmp_path / "book.sqlite") as book:
        yield book


def session(
    source: UnitSource, book: Book, *, follow: bool = False, patience_s: float = 0.6
) -> Session:
    notes = SheetNotes(unit="no. 1", kind="invented", notes={"ambient": "21 C"})
    keeper = Keeper(book, notes, travel_turns=0.75, orders=15)
    manner = Manner(wanted=Wanted(frames=2), follow=follow, patience_s=patience_s)
    return Session(source, Guide(followed=follow), keeper, manner)


def played(
    held: Session, unit: StraightUnit, on_report: Callable[[Report], None] | None = None
) -> list[Report]:
    """Make each turn exactly as asked, and collect the reports."""
    seen: list[Report] = []
    for report in held.run():
        seen.append(report)
        if on_report is not None:
            on_report(report)
        if isinstance(report, Advised) and not report.follows:
            unit.turn(report.advice.trim, SIGN[report.advice.sense] * report.advice.turns)
            held.say("moved")
    return seen


def finished(reports: list[Report]) -> Finished:
    last = reports[-1]
    assert isinstance(last, Finished), last
    return last


def test_a_session_ends_at_the_floor_and_keeps_a_sheet(book: Book) -> None:
    unit = StraightUnit()
    reports = played(session(UnitSource(unit), book), unit)
    end = finished(reports)
    assert isinstance(reports[0], Opened)
    assert end.done.verdict == "at-floor"
    assert unit.thd() < 0.0042 + 0.0002
    sheet = book.sheet(end.sheet)
    assert sheet.row.verdict == "at-floor"
    assert sheet.row.unit == "no. 1"
    assert sheet.start.notes == {"ambient": "21 C"}
    assert {"trimmer", "python", "numpy"} <= set(sheet.start.versions)
    readings = [report for report in reports if isinstance(report, Measured)]
    assert [turn.turn for turn in sheet.turns] == [report.turn for report in readings]
    assert sheet.turns[0].waveform is not None


def test_each_reading_is_in_the_book_when_it_is_told(book: Book) -> None:
    unit = StraightUnit(2)
    told = 0

    def check(report: Report) -> None:
        nonlocal told
        if isinstance(report, Measured):
            told += 1
            (row,) = book.sheets()
            assert len(book.sheet(row.id).turns) == told

    played(session(UnitSource(unit), book), unit, check)
    assert told >= 4


def test_a_finished_unit_teaches_its_kind(book: Book) -> None:
    unit = StraightUnit(3)
    played(session(UnitSource(unit), book), unit)
    (learned,) = book.learned_of("invented")
    assert learned.unit == "no. 1"


def test_the_unit_gives_its_kind_when_none_is_said(book: Book) -> None:
    unit = StraightUnit(3)
    played(session(UnitSource(unit), book), unit)
    assert Keeper(book, SheetNotes(unit="no. 1"), travel_turns=0.75, orders=15).kind == "invented"


@pytest.mark.parametrize(
    ("fault", "code"),
    [
        (SourceLost("the link broke"), "source-lost"),
        (SourceTimeout("no answer in 5 s"), "source-lost"),
        (UnusableCapture("pairs of minimum and maximum"), "signal"),
    ],
)
def test_what_is_lost_for_a_moment_is_waited_for(book: Book, fault: Exception, code: str) -> None:
    unit = StraightUnit(4)
    source = UnitSource(unit)
    broken = False

    def break_once(report: Report) -> None:
        nonlocal broken
        if isinstance(report, Measured) and report.turn == 1 and not broken:
            broken = True
            source.faults.append(fault)

    reports = played(session(source, book, patience_s=5.0), unit, break_once)
    waits = [report for report in reports if isinstance(report, Awaiting)]
    lost = [report for report in waits if report.code == code]
    assert lost
    assert lost[0].message == str(fault)
    assert lost[0].remedy
    assert finished(reports).done.verdict == "at-floor"


def test_a_source_lost_for_good_ends_with_4_and_keeps_the_turns(book: Book) -> None:
    unit = StraightUnit(5)
    source = UnitSource(unit)

    def break_for_good(report: Report) -> None:
        if isinstance(report, Measured) and report.turn == 1:
            source.faults.extend(SourceLost("unplugged") for _ in range(1000))

    reports = played(session(source, book), unit, break_for_good)
    last = reports[-1]
    assert isinstance(last, Failed)
    assert last.exit_status == 4
    (row,) = book.sheets()
    assert row.verdict == "stopped"
    assert [turn.turn for turn in book.sheet(row.id).turns] == [0, 1]


def test_a_signal_lost_for_good_ends_with_3(book: Book) -> None:
    unit = StraightUnit(6)
    source = UnitSource(unit)
    source.flat = True
    reports = played(session(source, book), unit)
    last = reports[-1]
    assert isinstance(last, Failed)
    assert last.exit_status == 3
    assert last.remedy


def test_quit_ends_with_a_sheet_that_says_stopped(book: Book) -> None:
    held = session(UnitSource(StraightUnit(7)), book)
    held.say("quit")
    end = finished(list(held.run()))
    assert end.done.verdict == "stopped"
    assert end.thd is not None
    assert book.sheet(end.sheet).row.verdict == "stopped"


def test_back_asks_for_the_last_turn_the_other_way(book: Book) -> None:
    unit = StraightUnit(8)
    held = session(UnitSource(unit), book)
    advices: list[Advised] = []
    for report in held.run():
        if not isinstance(report, Advised):
            continue
        advices.append(report)
        match len(advices):
            case 1:
                unit.turn(report.advice.trim, SIGN[report.advice.sense] * report.advice.turns)
                held.say("moved")
            case 2:
                held.say("back")
            case _:
                held.say("quit")
    first, back = advices[0].advice, advices[2].advice
    assert back.going_back
    assert back.trim == first.trim
    assert back.sense != first.sense


def test_skip_asks_for_another_way(book: Book) -> None:
    held = session(UnitSource(StraightUnit(9)), book)
    advices: list[Advised] = []
    for report in held.run():
        if isinstance(report, Advised):
            advices.append(report)
            held.say("skip" if len(advices) == 1 else "quit")
    first, other = advices[0].advice, advices[1].advice
    assert (first.trim, first.sense) != (other.trim, other.sense)


def test_the_faces_stop_closes_the_sheet(book: Book) -> None:
    unit = StraightUnit(10)
    held = session(UnitSource(unit), book)
    reports: list[Report] = []
    stopping = lambda: any(isinstance(report, Advised) for report in reports)  # noqa: E731
    for report in held.run(stopping):
        reports.append(report)  # noqa: PERF402 - `stopping` looks at it meanwhile
    assert finished(reports).done.verdict == "stopped"


def test_an_interrupt_at_any_report_keeps_what_was_measured(book: Book) -> None:
    for stop_after in range(1, 8):
        unit = StraightUnit(11)
        held = session(UnitSource(unit), book)
        run = held.run()
        told = 0
        for _ in range(stop_after):
            report = next(run)
            told += isinstance(report, Measured)
            if isinstance(report, Advised):
                unit.turn(report.advice.trim, SIGN[report.advice.sense] * report.advice.turns)
                held.say("moved")
        with pytest.raises(KeyboardInterrupt):
            run.throw(KeyboardInterrupt)  # type: ignore[attr-defined]
        sheet = book.sheet(book.sheets()[0].id)
        assert len(sheet.turns) == told
        assert sheet.row.verdict == "stopped"


def test_in_a_folder_a_new_file_says_moved(book: Book) -> None:
    unit = StraightUnit(12)
    source = UnitSource(unit, paced=True)
    held = session(source, book)
    reports: list[Report] = []
    source.saved = 1
    for report in held.run():
        reports.append(report)
        if isinstance(report, Advised):
            unit.turn(report.advice.trim, SIGN[report.advice.sense] * report.advice.turns)
            source.saved += 1
    assert finished(reports).done.verdict == "at-floor"
    assert source.captures == sum(isinstance(report, Measured) for report in reports)


def test_following_takes_the_turn_as_made_without_a_word(book: Book) -> None:
    unit = StraightUnit(13)
    held = session(UnitSource(unit), book, follow=True)
    left = {"trim": "upper", "turns": 0.0}
    reports: list[Report] = []
    for report in held.run():
        reports.append(report)
        if isinstance(report, Advised):
            assert report.follows
            left = {
                "trim": report.advice.trim,
                "turns": SIGN[report.advice.sense] * report.advice.turns,
            }
        if isinstance(report, Followed) and left["turns"]:
            step = max(-0.01, min(0.01, float(left["turns"])))
            unit.turn(str(left["trim"]), step)
            left["turns"] = float(left["turns"]) - step
    words = {report.word.say for report in reports if isinstance(report, Followed)}
    assert "turn" in words
    assert finished(reports).done.verdict == "at-floor"
    assert unit.thd() < 0.0042 + 0.0002
