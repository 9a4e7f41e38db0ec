"""What can go wrong with a book: exit status 5, a remedy, and nothing lost."""

from __future__ import annotations

import os
import sqlite3
import subprocess
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path

import pytest
import sqlalchemy as sa
from sqlalchemy import event

from tests.book import samples as s
from tests.book.test_book import written
from trimmer.book import Book, open_book
from trimmer.book.book import Book as FileBook
from trimmer.errors import BookError


@contextmanager
def refused(match: str) -> Iterator[None]:
    """Expect a refusal with the book's exit status and a remedy that is a sentence."""
    with pytest.raises(BookError, match=match) as refusal:
        yield
    assert refusal.value.exit_status == 5
    assert refusal.value.remedy.endswith(".")
    assert len(refusal.value.remedy.split()) >= 5


@contextmanager
def as_nobody() -> Iterator[None]:
    """Act as an ordinary user where the tests run as root, to whom every file is writable."""
    if os.geteuid() != 0:
        yield
        return
    os.setegid(65534)
    os.seteuid(65534)
    try:
        yield
    finally:
        os.seteuid(0)
        os.setegid(0)


@pytest.fixture
def shelf(tmp_path: Path) -> Path:
    """Give a folder that anybody may enter, with a whole sheet in `book.sqlite`."""
    for folder in (tmp_path, *tmp_path.parents[:3]):  # with workers, the folder lies one deeper
        folder.chmod(folder.stat().st_mode | 0o055)
    folder = tmp_path / "shelf"
    folder.mkdir()
    with open_book(folder / "book.sqlite") as book:
        written(book)
    return folder


def limit_pages(book: Book, pages: int) -> None:
    """Make SQLite's file full at so many pages, as a disk would."""
    assert isinstance(book, FileBook)
    engine = book._store.engine

    def restrict(connection: sqlite3.Connection, _record: object) -> None:
        connection.execute(f"PRAGMA max_page_count = {pages}")

    event.listen(engine, "connect", restrict)
    engine.dispose()


def test_a_full_disk_loses_nothing_that_was_acknowledged(home: Path) -> None:
    with open_book() as book:
        limit_pages(book, 120)
        sheet = book.begin_sheet(s.start())
        kept = 0
        with refused("no space left"):
            for turn in range(200):
                book.add_turn(sheet, s.entry(turn), state={"turn": turn})
                kept += 1
        assert kept > 3
        assert len(book.sheet(sheet).turns) == kept
    with open_book() as again:
        resumed = again.resume(sheet)
        assert [turn.turn for turn in resumed.sheet.turns] == list(range(kept))
        assert resumed.state == {"turn": kept - 1}
        again.add_turn(sheet, s.entry(kept))
    with closing(sqlite3.connect(home / "book.sqlite")) as raw:
        assert raw.execute("PRAGMA integrity_check").fetchall() == [("ok",)]


def test_a_disk_that_is_really_full(tmp_path: Path) -> None:
    if os.geteuid() != 0:
        pytest.skip("mounting a small disk needs root")
    disk = tmp_path / "disk"
    disk.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", "size=1m", "tmpfs", str(disk)]
    if subprocess.run(mount, capture_output=True, check=False).returncode:
        pytest.skip("no small disk can be mounted here")
    try:
        with open_book(disk / "book.sqlite") as book:
            sheet = book.begin_sheet(s.start())
            kept = 0
            with refused("no space left|disk failed"):
                for turn in range(500):
                    book.add_turn(sheet, s.entry(turn))
                    kept += 1
            assert kept > 3
        with open_book(disk / "book.sqlite", writes=False) as again:
            assert len(again.sheet(sheet).turns) == kept
    finally:
        subprocess.run(["umount", str(disk)], check=False, capture_output=True)


def test_a_book_that_may_not_be_written_says_so_when_it_is_opened(shelf: Path) -> None:
    path = shelf / "book.sqlite"
    path.chmod(0o444)
    shelf.chmod(0o555)
    with as_nobody():
        with refused("may be read but not written|cannot be opened"):
            open_book(path)
        with open_book(path, writes=False) as book:
            (row,) = book.sheets()
            assert len(book.sheet(row.id).turns) == 4
            with refused("may be read but not written"):
                book.begin_sheet(s.start())
    shelf.chmod(0o755)


def test_a_book_that_may_not_be_read_says_so(shelf: Path) -> None:
    path = shelf / "book.sqlite"
    path.chmod(0)
    with as_nobody():
        for writes in (True, False):
            with refused("failed"):
                open_book(path, writes=writes)


def test_a_folder_that_may_not_be_written_has_no_new_book(shelf: Path) -> None:
    with as_nobody():
        with refused("cannot be opened"):
            open_book(shelf / "new.sqlite")
        with refused("cannot be made"):
            open_book(shelf / "deeper" / "new.sqlite")


def test_entries_not_yet_merged_are_not_overlooked_in_a_folder_that_may_only_be_read(
    shelf: Path, tmp_path: Path
) -> None:
    stuck = tmp_path / "stuck"
    stuck.mkdir()
    with open_book(shelf / "book.sqlite") as book:
        written(book)  # an open book has its newest entries in its WAL: take it as it is now
        for name in ("book.sqlite", "book.sqlite-wal"):
            (stuck / name).write_bytes((shelf / name).read_bytes())
            (stuck / name).chmod(0o444)
    stuck.chmod(0o555)
    with as_nobody(), refused("not yet merged"):
        open_book(stuck / "book.sqlite", writes=False)
    stuck.chmod(0o755)


@pytest.mark.parametrize(
    "content", [b"not a book at all, but long enough to be looked at\n" * 40, b"SQLite format 3\0x"]
)
def test_a_file_that_is_no_book_is_refused_and_left_as_it_is(
    tmp_path: Path, content: bytes
) -> None:
    path = tmp_path / "letter.txt"
    path.write_bytes(content)
    for writes in (True, False):
        with refused("not a bench book"):
            open_book(path, writes=writes)
    assert path.read_bytes() == content
    assert [each.name for each in tmp_path.iterdir() if each.is_file()] == ["letter.txt"]


def test_another_programs_database_is_refused_and_left_as_it_is(tmp_path: Path) -> None:
    path = tmp_path / "other.sqlite"
    with closing(sqlite3.connect(path)) as raw, raw:
        raw.execute("CREATE TABLE sheet (id TEXT)")
    before = path.read_bytes()
    for writes in (True, False):
        with refused("another program's database"):
            open_book(path, writes=writes)
    assert path.read_bytes() == before


def test_a_folder_and_a_pipe_are_no_books(tmp_path: Path) -> None:
    with refused("a folder"):
        open_book(tmp_path)
    os.mkfifo(tmp_path / "pipe")
    with refused("no plain file"):
        open_book(tmp_path / "pipe")


def test_an_empty_file_becomes_a_book(tmp_path: Path) -> None:
    path = tmp_path / "new.sqlite"
    path.touch()
    with open_book(path) as book:
        written(book, 0)
        assert len(book.sheets()) == 1


def test_a_named_book_that_is_not_there_is_not_made_just_by_looking(tmp_path: Path) -> None:
    with refused("There is no book"):
        open_book(tmp_path / "typo.sqlite", writes=False)
    assert not (tmp_path / "typo.sqlite").exists()


def test_the_default_book_may_be_looked_at_before_anything_was_written(home: Path) -> None:
    with open_book(writes=False) as book:
        assert book.sheets() == []


def test_a_damaged_book_is_refused_without_a_traceback(home: Path) -> None:
    with open_book() as book:
        sheet = written(book, 6)
    path = home / "book.sqlite"
    content = bytearray(path.read_bytes())
    for start in range(4096, len(content), 4096):
        content[start : start + 200] = b"\xa5" * 200
    path.write_bytes(bytes(content))
    with refused("damaged|failed|cannot be read"), open_book() as book:
        book.sheet(sheet)


def test_an_entry_that_cannot_be_read_is_named(home: Path) -> None:
    with open_book() as book:
        sheet = book.begin_sheet(s.start())
        book.add_turn(sheet, s.entry(0))
    with closing(sqlite3.connect(home / "book.sqlite")) as raw, raw:
        raw.execute("DROP TRIGGER turn_no_update")
        raw.execute("UPDATE turn SET waveform = x'00112233'")
    with open_book() as book, refused(f"Sheet {sheet}"):
        book.sheet(sheet)


@pytest.mark.parametrize("column", ["reading", "notes", "taken_at"])
def test_an_entry_whose_packing_is_damaged_is_no_traceback(home: Path, column: str) -> None:
    with open_book() as book:
        sheet = book.begin_sheet(s.start())
        book.add_turn(sheet, s.entry(0))
    with closing(sqlite3.connect(home / "book.sqlite")) as raw, raw:
        raw.execute("DROP TRIGGER turn_no_update")
        raw.execute(f"UPDATE turn SET {column} = x'7b7b7b7b'")
    with open_book() as book, refused("cannot be read"):
        book.sheet(sheet)


def test_a_book_another_program_keeps_locked_is_waited_for_and_then_reported(
    home: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("trimmer.book.engines.BUSY_S", 0.2)
    with open_book() as book, closing(sqlite3.connect(home / "book.sqlite")) as other:
        other.isolation_level = None
        other.execute("BEGIN IMMEDIATE")
        with refused("locked"):
            book.begin_sheet(s.start())
        other.execute("ROLLBACK")
        book.begin_sheet(s.start())
        assert len(book.sheets()) == 1


def test_a_book_is_kept_so_that_a_committed_row_is_on_the_disk(book: Book) -> None:
    assert isinstance(book, FileBook)
    with book._store.engine.connect() as connection:

        def pragma(name: str) -> object:
            return connection.execute(sa.text(f"PRAGMA {name}")).scalar()

        assert pragma("journal_mode") == "wal"
        assert pragma("synchronous") == 2  # FULL, as SQLite's documentation numbers it
        assert pragma("foreign_keys") == 1


def test_closing_twice_does_no_harm(home: Path) -> None:
    book = open_book()
    book.close()
    book.close()
