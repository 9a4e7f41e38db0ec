"""Sheets, memory and records of a book in one file."""

from __future__ import annotations

import sqlite3
import subprocess
import sys
from datetime import timedelta
from pathlib import Path

import pytest

from tests.book import samples as s
from tests.book.test_readings import same
from trimmer.book import (
    Book,
    RecordStart,
    Reference,
    Sheet,
    SheetFilter,
    TurnEntry,
    open_book,
)
from trimmer.errors import BookError


def written(book: Book, turns: int = 3, unit: str = "Bench 7", kind: str = "blue case") -> str:
    """Write a whole sheet and give its id."""
    sheet = book.begin_sheet(s.start(unit, kind))
    for turn in range(turns + 1):
        book.add_turn(sheet, s.entry(turn))
    book.finish_sheet(sheet, s.end(turns))
    return sheet


def one_of_everything(book: Book) -> str:
    """Write at least one row into each table of records and give the sheet's id."""
    sheet = book.begin_sheet(s.start())
    book.add_turn(sheet, s.entry(0), state={"turn": 0})
    book.add_turn(sheet, s.entry(1), state={"turn": 1, "sigma": float("inf")})
    book.finish_sheet(sheet, s.end(1))
    book.correct(sheet, unit="Bench 9", notes={"load": "600 Ω"}, reason="wrong label")
    book.add_learned(sheet, "Bench 9", "blue case", {"column": [0.1 / 3]})
    book.add_reference(Reference("clean source", s.START, "sound", s.reading(7), {"level": "1 V"}))
    record = book.begin_record(RecordStart("warmup", s.START, "Bench 9", sheet=sheet))
    book.add_point(record, s.START, {"thd": 0.01})
    book.finish_record(record, "settled", {"settled_thd": 0.003})
    book.add_record(RecordStart("note", s.START, "Bench 9", document={"text": "new pot"}))
    return sheet


def same_entry(one: TurnEntry, other: TurnEntry) -> bool:
    plain = ("turn", "taken_at", "source", "advice", "made_turns", "word", "interval_s", "notes")
    assert one.waveform is not None
    assert other.waveform is not None
    return (
        all(getattr(one, name) == getattr(other, name) for name in plain)
        and same(one.reading, other.reading)
        and one.waveform.tobytes() == other.waveform.tobytes()
    )


def test_a_whole_sheet_comes_back_as_it_was_written(book: Book) -> None:
    sheet: Sheet = book.sheet(written(book))
    assert sheet.start == s.start()
    assert len(sheet.turns) == 4
    assert all(same_entry(turn, s.entry(n)) for n, turn in enumerate(sheet.turns))
    assert not same_entry(sheet.turns[0], s.entry(0, seed=5))
    assert sheet.end is not None
    assert sheet.end.done == s.end().done
    assert sheet.end.ended_at == s.end().ended_at
    assert sheet.end.reading is not None
    assert same(sheet.end.reading, s.reading(99))
    assert sheet.net_turns == {"upper": 0.1 / 3, "lower": -0.02}


def test_what_was_written_is_there_when_the_book_is_opened_again(home: Path) -> None:
    with open_book() as book:
        sheet = written(book)
    with open_book() as again:
        assert again.sheet(sheet).start == s.start()


def test_the_line_of_a_sheet_follows_its_last_reading_and_then_its_end(book: Book) -> None:
    sheet = book.begin_sheet(s.start())
    (row,) = book.sheets()
    assert (row.thd, row.fundamental_hz, row.turns, row.finished) == (None, None, 0, False)
    for turn in range(3):
        book.add_turn(sheet, s.entry(turn))
        (row,) = book.sheets()
        assert row.thd == s.reading(turn).thd.value
        assert row.fundamental_hz == s.reading(turn).fundamental_hz
        assert row.turns == turn
        assert row.verdict == "stopped"
    book.finish_sheet(sheet, s.end(2))
    (row,) = book.sheets()
    assert (row.verdict, row.finished, row.turns) == ("at-floor", True, 2)
    assert row.thd == s.reading(99).thd.value
    assert row.short == sheet[-8:]


def test_an_unfinished_sheet_counts_as_stopped_and_is_listed_as_open(book: Book) -> None:
    broken_off = book.begin_sheet(s.start("Bench 8"))
    given_up = book.begin_sheet(s.start("Bench 8"))
    book.finish_sheet(given_up, s.end(0, "stopped"))
    written(book)
    assert {row.id for row in book.sheets(SheetFilter(verdict="stopped"))} == {broken_off, given_up}
    assert [row.id for row in book.open_sheets("Bench 8")] == [broken_off]
    assert book.open_sheets("Bench 7") == []


def test_a_session_is_taken_up_with_the_state_of_its_last_turn(book: Book) -> None:
    sheet = book.begin_sheet(s.start())
    assert book.resume(sheet).state is None
    for turn in range(3):
        book.add_turn(sheet, s.entry(turn), state={"turn": turn, "belief": [0.1 / 3, None, True]})
    book.save_state(sheet, {"turn": 2, "advised": "upper"})
    resumed = book.resume(sheet)
    assert resumed.state == {"turn": 2, "advised": "upper"}
    assert [turn.turn for turn in resumed.sheet.turns] == [0, 1, 2]
    assert not resumed.sheet.row.finished


def test_a_sheet_taken_up_where_the_clock_lags_keeps_its_order(
    book: Book, monkeypatch: pytest.MonkeyPatch
) -> None:
    import time

    sheet = book.begin_sheet(s.start())
    book.add_turn(sheet, s.entry(0), state={"turn": 0})
    now = time.time_ns()
    monkeypatch.setattr(time, "time_ns", lambda: now - 7200 * 10**9)
    with open_book() as again:
        again.resume(sheet)
        again.add_turn(sheet, s.entry(1), state={"turn": 1})
        again.finish_sheet(sheet, s.end(1))
        resumed = again.resume(sheet)
    assert [turn.turn for turn in resumed.sheet.turns] == [0, 1]
    assert resumed.state == {"turn": 1}


@pytest.mark.parametrize(
    ("which", "units"),
    [
        (SheetFilter(), {"A", "B", "C", "D"}),
        (SheetFilter(unit="B"), {"B"}),
        (SheetFilter(kind="red"), {"B", "C"}),
        (SheetFilter(kind="red", unit="C"), {"C"}),
        (SheetFilter(since=s.START + timedelta(days=2)), {"C", "D"}),
        (SheetFilter(until=s.START + timedelta(days=2)), {"A", "B"}),
        (
            SheetFilter(since=s.START + timedelta(days=1), until=s.START + timedelta(days=2)),
            {"B"},
        ),
        (SheetFilter(limit_thd=0.003), {"C", "D"}),
        (SheetFilter(within_thd=0.003), {"A", "B"}),
        (SheetFilter(verdict="end-stop"), {"D"}),
        (SheetFilter(finished=False), set()),
        (SheetFilter(unit="none"), set()),
    ],
)
def test_filters_take_what_they_say(book: Book, which: SheetFilter, units: set[str]) -> None:
    for number, (unit, kind) in enumerate([("A", "blue"), ("B", "red"), ("C", "red"), ("D", "")]):
        sheet = book.begin_sheet(s.start(unit, kind, s.START + timedelta(days=number)))
        end = s.end(0, "end-stop" if unit == "D" else "at-floor")
        assert end.reading is not None
        reading = s.reading(number, thd=0.001 + 0.001 * number if number < 2 else 0.004)
        book.finish_sheet(sheet, type(end)(end.ended_at, end.done, reading))
    assert {row.unit for row in book.sheets(which)} == units
    assert book.count(which) == len(units)


def test_sheets_come_newest_first_and_in_pages(book: Book) -> None:
    ids = [book.begin_sheet(s.start(at=s.START + timedelta(days=day))) for day in range(7)]
    newest_first = ids[::-1]
    assert [row.id for row in book.sheets()] == newest_first
    assert [row.id for row in book.sheets(limit=3)] == newest_first[:3]
    assert [row.id for row in book.sheets(limit=3, offset=3)] == newest_first[3:6]
    assert [row.id for row in book.sheets(offset=5)] == newest_first[5:]


def test_a_sheet_is_found_by_its_beginning_or_its_end(book: Book) -> None:
    one, other = written(book, 0), written(book, 0)
    assert book.find(one) == one
    assert book.find(one[-6:].upper()) == one
    assert book.find(other[:-1]) == other
    with pytest.raises(BookError, match="may be any of"):
        book.find(one[:8])
    for none in ("zzz", "", "%", "_", "' OR 1=1 --"):
        with pytest.raises(BookError, match="No sheet's id") as refusal:
            book.sheet(none)
        assert "log list" in refusal.value.remedy


def test_a_correction_is_a_new_row_and_what_it_corrects_stays(book: Book, home: Path) -> None:
    sheet = written(book)
    book.correct(sheet, unit="Bench 9", notes={"ambient": "25 °C"}, reason="read the wrong label")
    book.correct(sheet, unit="Bench 10", kind="red case")
    found = book.sheet(sheet)
    assert (found.row.unit, found.row.kind) == ("Bench 10", "red case")
    assert (found.start.unit, found.start.kind) == ("Bench 10", "red case")
    assert found.start.notes == {"ambient": "25 °C", "supply": "±12 V"}
    first = found.corrections[0]
    assert (first.field, first.value, first.reason) == ("unit", "Bench 9", "read the wrong label")
    assert [row.id for row in book.sheets(SheetFilter(unit="Bench 10"))] == [sheet]
    assert book.sheets(SheetFilter(unit="Bench 7")) == []
    with sqlite3.connect(home / "book.sqlite") as raw:
        assert raw.execute("SELECT unit FROM sheet").fetchone() == ("Bench 7",)
    raw.close()


def test_units_have_their_latest_sheet_and_their_latest_named_kind(book: Book) -> None:
    for day, (unit, kind) in enumerate([("B", "red"), ("A", "blue"), ("B", ""), ("", "green")]):
        book.begin_sheet(s.start(unit, kind, s.START + timedelta(days=day)))
    rows = book.units()
    assert [(row.unit, row.kind, row.sheets) for row in rows] == [("A", "blue", 1), ("B", "red", 2)]
    assert rows[1].last_taken_at == s.START + timedelta(days=2)
    assert book.kind_of("B") == "red"
    assert book.kind_of("nobody's") is None


def test_a_kind_remembers_what_its_sheets_taught_newest_first_one_word_a_sheet(book: Book) -> None:
    one, other = written(book, 0, "A"), written(book, 0, "B")
    book.add_learned(one, "A", "blue case", {"column": [0.1 / 3]})
    book.add_learned(other, "B", "blue case", {"column": [2.0]})
    book.add_learned(one, "A", "blue case", {"column": [3.0]})
    book.add_learned(other, "B", "red case", {"column": [4.0]})
    learned = book.learned_of("blue case")
    assert [(row.sheet, row.document) for row in learned] == [
        (one, {"column": [3.0]}),
        (other, {"column": [2.0]}),
    ]
    assert [row.document for row in book.learned_of(unit="A")] == [{"column": [3.0]}]
    assert book.learned_of("green case") == []
    assert len(book.learned_of("blue case", limit=1)) == 1


def test_the_newest_reference_of_a_name_counts(book: Book) -> None:
    assert book.reference("clean source") is None
    for seed in (1, 2):
        book.add_reference(
            Reference("clean source", s.START, "sound", s.reading(seed), {"level": "1 V"})
        )
    found = book.reference(" clean source ")
    assert found is not None
    assert same(found.reading, s.reading(2))
    assert found.document == {"level": "1 V"}
    assert book.references() == ["clean source"]


def test_a_warm_up_keeps_every_point_even_where_it_broke_off(book: Book) -> None:
    start = RecordStart("warmup", s.START, "Bench 7", "blue case", "bench", None, {"ambient": 23.0})
    record = book.begin_record(start)
    for minute in range(3):
        at = s.START + timedelta(minutes=minute)
        book.add_point(record, at, {"minutes": minute, "thd": 0.01 / (minute + 1)})
    (broken_off,) = book.records("warmup", unit="Bench 7")
    assert broken_off.start == start
    assert [point.document["minutes"] for point in broken_off.points] == [0, 1, 2]
    assert (broken_off.verdict, broken_off.ended_at, broken_off.document) == (None, None, {})
    book.finish_record(record, "settled", {"settled_thd": 0.003})
    (whole,) = book.records("warmup", kind="blue case")
    assert (whole.verdict, whole.document) == ("settled", {"settled_thd": 0.003})


def test_records_are_told_apart_by_what_they_are_of(book: Book) -> None:
    sheet = written(book)
    recheck = book.add_record(
        RecordStart("recheck", s.START, "Bench 7", sheet=sheet), "holds", {"change": 1e-5}
    )
    book.add_record(RecordStart("note", s.START, "Bench 7", document={"text": "new pot"}))
    book.add_record(RecordStart("limits", s.START, kind="blue case", document={"thd": 0.01}))
    (found,) = book.records("recheck", sheet=sheet)
    assert (found.id, found.verdict, found.document) == (recheck, "holds", {"change": 1e-5})
    assert [r.start.document for r in book.records("note", unit="Bench 7")] == [{"text": "new pot"}]
    assert book.records("limits", kind="blue case", limit=1)[0].start.document == {"thd": 0.01}
    assert book.records("survey") == []


def test_text_from_outside_is_kept_or_made_harmless_but_never_refused(book: Book) -> None:
    odd = "x [/] '; DROP TABLE sheet; -- \x1b[31m\0 \udcff ± 漢"
    sheet = book.begin_sheet(s.start(odd, odd))
    found = book.sheet(sheet)
    assert "DROP TABLE" in found.row.unit
    assert "漢" in found.row.unit
    assert not set("\x1b\0\udcff") & set(found.row.unit)
    assert [row.id for row in book.sheets(SheetFilter(unit=odd))] == [sheet]


def test_a_turn_of_a_sheet_that_is_not_there_is_refused(book: Book) -> None:
    with pytest.raises(BookError):
        book.add_turn("01a231db-23a5-7000-a03d-0fa6a5679b9f", s.entry(0))


def test_a_figure_that_is_not_finite_costs_no_sheet(book: Book) -> None:
    from dataclasses import replace

    sheet = book.begin_sheet(s.start())
    odd = replace(s.entry(0), reading=replace(s.reading(), thd_plus_noise=float("nan")))
    book.add_turn(sheet, odd, state={"sigma": float("inf")})
    resumed = book.resume(sheet)
    assert same(resumed.sheet.turns[0].reading, odd.reading)
    assert resumed.state == {"sigma": float("inf")}


def test_loading_the_package_loads_no_database_library() -> None:
    looks = (
        "import sys, trimmer.book; late = {'sqlalchemy', 'pydantic', 'psycopg', 'numpy', 'scipy'}; "
        "print(sorted(late & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", looks], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_writers_in_many_threads_lose_nothing(book: Book) -> None:
    from concurrent.futures import ThreadPoolExecutor

    with ThreadPoolExecutor(4) as pool:
        ids = list(pool.map(lambda n: written(book, 1, f"U{n}"), range(12)))
    assert {row.id for row in book.sheets()} == set(ids)
    assert all(len(book.sheet(sheet).turns) == 2 for sheet in ids)


def test_a_list_of_sheets_waits_neither_for_the_guide_nor_for_the_numeric_library(
    book: Book, home: Path
) -> None:
    written(book, 0)
    looks = (
        "import sys, trimmer.book; rows = trimmer.book.open_book(writes=False).sheets(); "
        "late = {'numpy', 'scipy', 'pydantic', 'psycopg', 'trimmer.guidance', 'trimmer.measurement'}; "
        "print(len(rows), sorted(late & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", looks], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "1 []"
