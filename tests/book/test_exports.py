"""Exports lose nothing, imports make no doubles, and hostile files change nothing."""

from __future__ import annotations

import csv
import json
import math
import shutil
import sqlite3
from collections.abc import Callable
from contextlib import closing
from pathlib import Path
from typing import Any

import pytest

from tests.book import samples as s
from tests.book.test_book import one_of_everything, same_entry, written
from trimmer.book import (
    Book,
    SheetFilter,
    export_book,
    import_book,
    open_book,
    sheet_document,
    sheet_event,
)
from trimmer.book import tables as t
from trimmer.errors import BookError

Rows = list[dict[str, Any]]


@pytest.fixture(scope="module")
def masters(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Give a folder with a closed book of one of everything, its export, and another bench's book."""
    folder = tmp_path_factory.mktemp("masters")
    with open_book(folder / "book.sqlite") as book:
        one_of_everything(book)
        assert export_book(book, folder / "bench-a.json") == 1
    with open_book(folder / "other.sqlite") as book:
        written(book, 0, "Bench 1")
    return folder


@pytest.fixture
def exported(masters: Path, tmp_path: Path) -> Path:
    """Give a copy of an export of one of everything, beside another bench's book."""
    for name in ("bench-a.json", "other.sqlite"):
        shutil.copyfile(masters / name, tmp_path / name)
    return tmp_path / "bench-a.json"


def other(tmp_path: Path) -> Book:
    return open_book(tmp_path / "other.sqlite")


def content(path: Path) -> dict[str, list[tuple[Any, ...]]]:
    """Give every row of the record tables and the cards as they lie in the file."""
    with closing(sqlite3.connect(path)) as raw:
        return {
            table.name: raw.execute(f"SELECT * FROM {table.name} ORDER BY 1").fetchall()
            for table in (*t.RECORDS, t.card)
        }


def test_a_book_goes_through_its_export_without_losing_a_bit(
    exported: Path, masters: Path, tmp_path: Path
) -> None:
    with open_book(tmp_path / "new.sqlite") as book:
        merged = import_book(book, exported)
    there, here = content(tmp_path / "new.sqlite"), content(masters / "book.sqlite")
    assert all(here.values())
    assert there == here
    assert merged.sheets == 1
    assert (
        merged.new == merged.rows == sum(len(rows) for name, rows in here.items() if name != "card")
    )


def test_an_import_makes_no_doubles_however_often_and_adds_what_is_new(
    book: Book, home: Path, tmp_path: Path
) -> None:
    sheet = book.begin_sheet(s.start())
    book.add_turn(sheet, s.entry(0))
    path = tmp_path / "a.json"
    export_book(book, path)
    with other(tmp_path) as there:
        own = written(there, 1, "Bench 1")
        import_book(there, path)
        before = content(tmp_path / "other.sqlite")
        again = import_book(there, path)
        assert (again.new, again.rows) == (0, 2)
        assert content(tmp_path / "other.sqlite") == before
        book.add_turn(sheet, s.entry(1))
        book.finish_sheet(sheet, s.end(1))
        export_book(book, path)
        assert import_book(there, path).new == 2
        assert {row.id for row in there.sheets()} == {sheet, own}
        assert [turn.turn for turn in there.sheet(sheet).turns] == [0, 1]
        assert there.sheets(SheetFilter(unit="Bench 7"))[0].verdict == "at-floor"


def test_the_export_is_one_json_array_and_also_one_row_a_line(exported: Path) -> None:
    text = exported.read_text("utf-8")
    rows: Rows = json.loads(text)
    assert rows[0]["row"] == "book"
    assert rows[0]["form"] == 1
    lines = text.splitlines()
    assert (lines[0], lines[-1]) == ("[", "]")
    assert [json.loads(line.rstrip(",")) for line in lines[1:-1]] == rows
    assert {row["row"] for row in rows[1:]} == {table.name for table in t.RECORDS}
    turn = next(row for row in rows if row["row"] == "turn")
    assert turn["waveform"] == s.wave(0).tolist()
    assert turn["reading"]["thd"]["value"] == s.reading(0).thd.value


def test_a_filter_takes_the_sheets_it_says_and_what_belongs_to_them(
    book: Book, tmp_path: Path
) -> None:
    one_of_everything(book)
    sheet = written(book, 1, "Bench 2", "red case")
    book.add_learned(sheet, "Bench 2", "red case", {"c": 1})
    path = tmp_path / "red.json"
    assert export_book(book, path, SheetFilter(kind="red case")) == 1
    with other(tmp_path) as there:
        import_book(there, path)
        assert [row.id for row in there.sheets()] == [sheet]
        assert len(there.learned_of("red case")) == 1
        assert there.records("warmup") == []
        assert there.references() == []


def test_a_file_that_is_there_is_replaced_whole_or_not_at_all(
    book: Book, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    written(book, 1)
    path = tmp_path / "out.json"
    path.write_text("the export of yesterday")

    def broken(*_: object) -> str:
        raise OSError(28, "No space left on device")

    with monkeypatch.context() as patch:
        patch.setattr("trimmer.book.exporting.spoken", broken)
        with pytest.raises(BookError):
            export_book(book, path)
    assert path.read_text() == "the export of yesterday"
    assert [each.name for each in tmp_path.iterdir() if each.is_file()] == ["out.json"]
    with pytest.raises(BookError, match="cannot be written"):
        export_book(book, tmp_path / "nowhere" / "out.json")
    with pytest.raises(BookError, match="neither"):
        export_book(book, tmp_path / "out.xml")


def table_of(path: Path) -> list[dict[str, str]]:
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def test_the_table_has_a_sheets_figures_to_the_last_digit(book: Book, tmp_path: Path) -> None:
    sheet = written(book)
    unfinished = book.begin_sheet(s.start("=cmd|' /C calc'!A0", "-2+3"))
    empty = book.begin_sheet(s.start("none"))
    book.add_turn(unfinished, s.entry(0))
    path = tmp_path / "figures.csv"
    assert export_book(book, path) == 3
    lines = {line["id"]: line for line in table_of(path)}
    line, final = lines[sheet], s.reading(99)
    assert float(line["thd"]) == final.thd.value
    assert float(line["pointedness_upper"]) == final.crests.upper
    assert float(line["crest_3"]) == final.crest_parts[1]
    assert float(line["skew_15"]) == final.skew_parts[13]
    assert float(line["skew_sigma_2"]) == math.sqrt(final.covariance[1, 1])
    assert float(line["net_upper"]) == 0.1 / 3
    assert line["notes"] == "ambient=23 °C; supply=±12 V"
    odd = lines[unfinished]
    assert odd["unit"] == "'=cmd|' /C calc'!A0"
    assert odd["kind"] == "'-2+3"
    assert float(odd["thd"]) == s.reading(0).thd.value
    assert (odd["finished"], odd["floor_thd"]) == ("0", "")
    assert (lines[empty]["thd"], lines[empty]["verdict"]) == ("", "stopped")


def test_the_documents_have_the_fields_of_the_json_lines(book: Book) -> None:
    sheet = book.sheet(written(book))
    listed = sheet_event(sheet.row)
    assert {
        "event",
        "id",
        "unit",
        "kind",
        "taken_at",
        "fundamental_hz",
        "thd",
        "thd_sigma",
        "verdict",
    } <= set(listed)
    assert listed["event"] == "sheet"
    assert listed["taken_at"] == "2031-05-06T07:08:09.123456+00:00"
    whole = sheet_document(sheet)
    assert whole == json.loads(json.dumps(whole, allow_nan=False))
    assert [reading["turn"] for reading in whole["readings"]] == [0, 1, 2, 3]
    assert whole["readings"][0]["event"] == "reading"
    assert whole["readings"][0]["advice"] is None
    assert whole["readings"][1]["advice"]["trim"] == "upper"
    assert whole["readings"][0]["waveform"]["samples"] == s.wave(0).tolist()
    assert whole["end"]["net_turns"] == {"upper": 0.1 / 3, "lower": -0.02}
    assert whole["end"]["remainder"][0]["cause"] == "time-symmetry"
    assert sheet_document(sheet, waveforms=False)["readings"][0]["waveform"] is None


# -- hostile files ---------------------------------------------------------------------------------

Change = Callable[[Rows], object]


def first(rows: Rows, table: str) -> dict[str, Any]:
    return next(row for row in rows if row["row"] == table)


def put(table: str, field: str, value: Any) -> Change:
    return lambda rows: first(rows, table).__setitem__(field, value)


def put_in(table: str, outer: str, field: str, value: Any) -> Change:
    return lambda rows: first(rows, table)[outer].__setitem__(field, value)


HOSTILE: dict[str, Change] = {
    "no head": lambda rows: rows.pop(0),
    "head of another program": lambda rows: rows[0].update(row="ledger"),
    "a form from tomorrow": lambda rows: rows[0].update(form=99),
    "a step from tomorrow": lambda rows: rows[0]["steps"].append("0099-from-tomorrow"),
    "an unknown table": put("turn", "row", "sqlite_master"),
    "a table of ours that is not exported": put("turn", "row", "card"),
    "an unknown column": put("sheet", "colour", "blue"),
    "a column missing": lambda rows: first(rows, "sheet").pop("unit"),
    "an id that is none": put("sheet", "id", "1'; DROP TABLE sheet; --"),
    "a turn of no sheet": put("turn", "sheet_id", "01a231db-23a5-7000-a03d-0fa6a5679b9f"),
    "a point of no record": put(
        "record_point", "record_id", "01a231db-23a5-7000-a03d-0fa6a5679b9f"
    ),
    "no text": put("sheet", "unit", 3),
    "text without end": put("sheet", "unit", "x" * 100_000),
    "an instant without a zone": put("sheet", "taken_at", "2031-05-06T07:08:09"),
    "an instant out of range": put("sheet", "taken_at", "0001-01-01T00:00:00+14:00"),
    "an instant as a number": put("sheet", "taken_at", 12),
    "a number as text": put("turn", "thd", "0.1"),
    "a turn below zero": put("turn", "number", -1),
    "a turn beyond counting": put("turn", "number", 10**30),
    "a truth for a number": put("turn", "thd", True),
    "an unknown verdict": put("sheet_end", "verdict", "perfect"),
    "an unknown trim": put("turn", "trim", "middle"),
    "an unknown record": put("record", "what", "rumour"),
    "a correction of the id": put("correction", "field", "id"),
    "a reading that is none": put("turn", "reading", {"thd": 1}),
    "parts that do not fit": put_in("turn", "reading", "parts", [0.1]),
    "a covariance that does not fit": put_in("turn", "reading", "covariance", [0.1]),
    "orders beyond reason": put_in("turn", "reading", "orders", 10**9),
    "parts of text": put_in("turn", "reading", "parts", ["x"] * 28),
    "an advice that is none": put("turn", "advice", {"trim": "upper"}),
    "an advice for no trim": lambda rows: [
        row["advice"].update(trim="middle") for row in rows if row.get("advice")
    ],
    "a remainder of text": put("sheet_end", "remainder", ["x"]),
    "a waveform of text": put("turn", "waveform", ["x"]),
    "a waveform of lists": put("turn", "waveform", [[1.0]]),
    "a waveform in a string": put("turn", "waveform", "AAAA"),
    "notes of numbers": put("sheet", "notes", {"ambient": 23}),
    "a document that is a list": put("learned", "document", [1]),
    "the same id with another content": lambda rows: rows.append(
        {**first(rows, "sheet"), "unit": "forged"}
    ),
}


@pytest.mark.parametrize("wrong", HOSTILE.values(), ids=HOSTILE.keys())
def test_a_hostile_export_is_refused_and_nothing_of_it_taken_in(
    wrong: Change, exported: Path, tmp_path: Path
) -> None:
    rows: Rows = json.loads(exported.read_text())
    wrong(rows)
    exported.write_text("[\n" + ",\n".join(json.dumps(row) for row in rows) + "\n]\n")
    with other(tmp_path) as book:
        own = book.sheets()
        before = content(tmp_path / "other.sqlite")
        with pytest.raises(BookError) as refusal:
            import_book(book, exported)
        assert refusal.value.remedy
        assert len(str(refusal.value)) < 500
        assert content(tmp_path / "other.sqlite") == before
        assert book.sheets() == own


RAW: dict[str, bytes] = {
    "nothing": b"",
    "an empty array": b"[]",
    "not JSON": b"id,unit,kind\n1,2,3\n",
    "bytes": bytes(range(256)) * 10,
    "deep": b"[\n" + b"[" * 200_000,
    "an object": b"{}",
    "a head cut short": b'[\n{"row":"book","form":1,',
    "NaN": b'[\n{"row":"book","form":1,"steps":[]},\n{"row":"turn","thd":NaN}\n]',
    "a number without end": b'[\n{"row":"book","form":1,"steps":[]},\n{"row":"turn","n":'
    + b"9" * 100_000
    + b"}\n]",
    "deep in a row": b'[\n{"row":"book","form":1,"steps":[]},\n{"row":"learned","document":'
    + b'{"a":' * 5000
    + b"1"
    + b"}" * 5001
    + b"\n]",
}


@pytest.mark.parametrize("raw", RAW.values(), ids=RAW.keys())
def test_what_is_no_export_is_refused(raw: bytes, book: Book, tmp_path: Path) -> None:
    path = tmp_path / "x.json"
    path.write_bytes(raw)
    with pytest.raises(BookError) as refusal:
        import_book(book, path)
    assert refusal.value.remedy
    assert book.sheets() == []


def test_an_export_cut_off_anywhere_is_refused_and_leaves_nothing_half(
    exported: Path, tmp_path: Path
) -> None:
    whole = exported.read_bytes()
    ends = [place + 1 for place, byte in enumerate(whole[:-2]) if byte == ord("\n")]
    assert len(ends) > 10
    cut_path = tmp_path / "cut.json"
    with open_book(tmp_path / "new.sqlite") as book:
        for cut in (*ends, *(len(whole) * part // 12 for part in range(12))):
            cut_path.write_bytes(whole[:cut])
            with pytest.raises(BookError):
                import_book(book, cut_path)
            assert book.sheets() == []
        assert import_book(book, exported).sheets == 1


def test_a_line_too_long_is_refused_before_it_is_read(
    exported: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("trimmer.book.importing._LONGEST_LINE", 1000)
    with other(tmp_path) as book, pytest.raises(BookError, match="longer than any row"):
        import_book(book, exported)


def test_an_import_of_a_file_that_is_not_there_says_so(book: Book, tmp_path: Path) -> None:
    for path in (tmp_path / "none.json", tmp_path):
        with pytest.raises(BookError, match="cannot be read"):
            import_book(book, path)


def test_an_imported_turn_is_the_turn_that_was_exported(exported: Path, tmp_path: Path) -> None:
    with open_book(tmp_path / "new.sqlite") as book:
        import_book(book, exported)
        (row,) = book.sheets()
        resumed = book.resume(row.id)
    assert all(same_entry(turn, s.entry(n)) for n, turn in enumerate(resumed.sheet.turns))
    assert resumed.state == {"turn": 1, "sigma": math.inf}
