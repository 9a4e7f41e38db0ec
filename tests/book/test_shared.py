"""A book on a real PostgreSQL server: several benches at once, and a server that comes and goes."""

from __future__ import annotations

import socket
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import psycopg
import pytest

from tests.book import samples as s
from tests.book.postgres import Cluster, free_port
from tests.book.proxy import Proxy
from tests.book.test_book import one_of_everything, same_entry, written
from trimmer.book import RecordStart, SheetFilter, export_book, import_book, open_book
from trimmer.book import rows as r
from trimmer.book import tables as t
from trimmer.book.book import Book
from trimmer.book.engines import server_engine
from trimmer.book.ids import Ids
from trimmer.book.shared import SharedBook
from trimmer.book.store import Row, Store, insert
from trimmer.errors import BookError


def opened(url: str) -> SharedBook:
    book = open_book(url)
    assert isinstance(book, SharedBook)
    return book


def until(true: Callable[[], bool], seconds: float = 20.0) -> None:
    """Wait for something to come true."""
    deadline = time.monotonic() + seconds
    while not true():
        assert time.monotonic() < deadline, "it did not come true in time"
        time.sleep(0.02)


def counts(url: str) -> dict[str, int]:
    """Count the rows of every table on the server, past the book's own code."""
    with psycopg.connect(url.replace("+psycopg", "")) as connection:
        return {
            name: connection.execute(f"SELECT count(*) FROM {name}".encode()).fetchone()[0]  # type: ignore[index]
            for name in t.metadata.tables
        }


@pytest.fixture
def url(server: Cluster) -> str:
    """Give a new database's address."""
    return server.database()


@pytest.fixture
def own_server() -> Iterator[Cluster]:
    """Give a server that a test may stop."""
    from tests.book.postgres import missing

    if missing():
        pytest.skip(missing())
    cluster = Cluster(durable=False)
    try:
        cluster.start()
        yield cluster
    finally:
        cluster.remove()


def test_a_whole_sheet_comes_back_from_the_server_as_it_was_written(url: str) -> None:
    with opened(url) as book:
        sheet = written(book)
        assert book.waiting == 0
    other_machine(url)
    with opened(url) as book:
        found = book.sheet(sheet)
        assert found.start == s.start()
        assert all(same_entry(turn, s.entry(n)) for n, turn in enumerate(found.turns))
        assert found.end is not None
        assert found.end.done == s.end().done
        assert book.notices() == []


def other_machine(url: str) -> None:
    """Remove what this machine has kept, as if another one looked at the server."""
    from trimmer.book.places import find

    path = find(url).path
    for each in path.parent.glob(path.name + "*"):
        each.unlink()


def test_everything_a_book_does_it_does_on_a_server(url: str, tmp_path: Path) -> None:
    with opened(url) as book:
        sheet = one_of_everything(book)
        book.settle(10)
        assert all(counts(url)[table.name] for table in t.RECORDS)
        assert counts(url)["waiting"] == 0
        assert [row.id for row in book.sheets(SheetFilter(unit="Bench 9"))] == [sheet]
        assert book.resume(sheet[-8:]).state == {"turn": 1, "sigma": float("inf")}
        assert [row.unit for row in book.units()] == ["Bench 9"]
        assert book.kind_of("Bench 9") == "blue case"
        assert book.reference("clean source") is not None
        assert book.records("warmup", unit="Bench 9")[0].verdict == "settled"
        assert book.count() == 1
        path = tmp_path / "all.json"
        assert export_book(book, path) == 1
        assert import_book(book, path).new == 0
    with open_book(tmp_path / "file.sqlite") as file:
        assert import_book(file, path).sheets == 1
        assert file.sheet(sheet).turns[1].reading.thd == s.reading(1).thd


def test_an_import_into_a_server_is_delivered(url: str, tmp_path: Path) -> None:
    with open_book(tmp_path / "file.sqlite") as file:
        sheet = one_of_everything(file)
        export_book(file, tmp_path / "x.json")
    with opened(url) as book:
        import_book(book, tmp_path / "x.json")
        book.settle(10)
        assert counts(url)["turn"] == 2
        assert book.sheet(sheet).row.unit == "Bench 9"


def test_a_forged_export_is_held_against_what_the_server_has(url: str, tmp_path: Path) -> None:
    with opened(url) as book:
        sheet = written(book, 0)
        export_book(book, tmp_path / "x.json")
    other_machine(url)
    forged = (tmp_path / "x.json").read_text().replace('"unit":"Bench 7"', '"unit":"Bench 8"')
    (tmp_path / "x.json").write_text(forged)
    with opened(url) as book:
        with pytest.raises(BookError, match="says another unit"):
            import_book(book, tmp_path / "x.json")
        assert book.waiting == 0
        assert book.sheet(sheet).row.unit == "Bench 7"


def test_a_courier_that_stumbles_says_so_and_loses_nothing(
    url: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    with opened(url) as book:
        assert book.settle(10)
        with monkeypatch.context() as patch:
            patch.setattr("trimmer.book.outbox.insert", lambda *_: 1 / 0)
            sheet = book.begin_sheet(s.start())
            until(lambda: bool(book.waiting and book.notices()))
        until(lambda: book.waiting == 0)
        assert book.sheet(sheet).row.unit == "Bench 7"


def test_several_benches_write_at_once_and_every_row_is_there_once(
    url: str, tmp_path: Path
) -> None:
    benches, sheets = 3, 4
    with running_benches(url, tmp_path, benches, sheets) as acknowledged:
        pass
    assert len(set(acknowledged)) == benches * sheets
    there = counts(url)
    assert (there["sheet"], there["turn"]) == (benches * sheets, benches * sheets * 3)
    with opened(url) as book:
        rows = book.sheets()
        assert {row.id for row in rows} == set(acknowledged)
        assert all(row.finished for row in rows)


class running_benches:
    """Several benches, each a program with a home of its own, writing whole sheets to one server."""

    def __init__(self, url: str, folder: Path, benches: int, sheets: int) -> None:
        self._started = [
            subprocess.Popen(
                [
                    sys.executable, "-m", "tests.book.writer",
                    url, str(folder / f"bench-{n}"), str(sheets), "2",
                ],
                stdout=subprocess.PIPE,
                text=True,
            )
            for n in range(benches)
        ]  # fmt: skip
        self.acknowledged: list[str] = []

    def __enter__(self) -> list[str]:
        return self.acknowledged

    def __exit__(self, *exc: object) -> None:
        for bench in self._started:
            said, _ = bench.communicate(timeout=120)
            assert bench.returncode == 0
            self.acknowledged += [
                line.split()[1] for line in said.splitlines() if line.startswith("finished")
            ]


def test_a_server_that_stops_costs_no_sheet_and_gets_each_once_when_it_is_back(
    own_server: Cluster,
) -> None:
    url = own_server.database()
    with opened(url) as book:
        before = written(book, 1)
        across = book.begin_sheet(s.start("Bench 8"))
        book.add_turn(across, s.entry(0))
        book.settle(10)
        own_server.stop("immediate")
        started = time.monotonic()
        book.add_turn(across, s.entry(1), state={"turn": 1})
        book.finish_sheet(across, s.end(1))
        offline = written(book, 1, "Bench 9")
        assert time.monotonic() - started < 5
        (notice,) = book.notices()
        assert "cannot be reached" in notice.message
        assert "kept on this machine" in notice.message
        assert own_server.password not in notice.message + notice.remedy
        assert book.waiting == 2
        assert {row.id for row in book.sheets()} == {before, across, offline}
        assert book.resume(across).state == {"turn": 1}
        assert any("what this machine has kept" in each.message for each in book.notices())
        own_server.start()
        until(lambda: book.waiting == 0)
        until(lambda: book.settle(1))
        assert any("answers again" in each.message for each in book.notices())
    there = counts(url)
    assert (there["sheet"], there["turn"], there["sheet_end"], there["card"]) == (3, 6, 3, 3)


def test_what_was_kept_is_delivered_by_the_next_session(own_server: Cluster) -> None:
    url = own_server.database()
    with opened(url) as book:
        sheet = book.begin_sheet(s.start())
        book.settle(10)
        own_server.stop()
        book.add_turn(sheet, s.entry(0))
    assert_kept_by(url, 1)
    own_server.start()
    with opened(url) as book:
        until(lambda: book.waiting == 0)
    assert counts(url)["turn"] == 1


def assert_kept_by(url: str, sheets: int) -> None:
    with opened(url) as book:
        assert book.waiting == sheets
        assert "cannot be reached" in book.notices()[0].message


def test_a_session_may_begin_while_the_server_is_away_and_knows_its_kinds(
    own_server: Cluster,
) -> None:
    url = own_server.database()
    with opened(url) as elsewhere:
        taught = written(elsewhere, 1, "Bench 1")
        elsewhere.add_learned(taught, "Bench 1", "blue case", {"column": [1.0]})
        elsewhere.settle(10)
    other_machine(url)
    with opened(url) as book:
        assert len(book.learned_of("blue case")) == 1
    own_server.stop()
    with opened(url) as book:
        assert [row.document for row in book.learned_of("blue case")] == [{"column": [1.0]}]
        assert book.kind_of("Bench 1") == "blue case"
        assert book.open_sheets() == []
        sheet = written(book, 1, "Bench 2")
        own_server.start()
        until(lambda: book.waiting == 0)
        assert book.sheet(sheet).row.unit == "Bench 2"
    assert counts(url)["learned"] == 1


def test_a_sheet_of_another_bench_can_be_corrected_and_gone_on_with(url: str) -> None:
    with opened(url) as book:
        sheet = book.begin_sheet(s.start())
        record = book.begin_record(s_record(sheet))
        book.add_turn(sheet, s.entry(0))
    other_machine(url)
    with opened(url) as book:
        book.correct(sheet, unit="Bench 9")
        book.add_turn(sheet, s.entry(1))
        book.add_point(record, s.START, {"thd": 0.01})
        book.settle(10)
        found = book.sheet(sheet)
    assert [turn.turn for turn in found.turns] == [0, 1]
    assert found.row.unit == "Bench 9"
    assert counts(url)["record_point"] == 1


def s_record(sheet: str) -> RecordStart:
    return RecordStart("warmup", s.START, "Bench 7", sheet=sheet)


def test_two_benches_at_one_sheet_leave_its_line_as_both_have_it(url: str) -> None:
    with opened(url) as book:
        sheet = book.begin_sheet(s.start())
        book.settle(10)
    store = Store(server_engine(url), "it")
    ids = Ids()
    turn = r.turn_row(ids.new(), sheet, s.entry(1))
    values = {
        "id": ids.new(),
        "sheet_id": sheet,
        "at": s.START,
        "field": "unit",
        "value": "Bench 9",
    }
    correction = Row(t.correction, {**values, "reason": ""})
    second = threading.Thread(target=store.add, args=([turn],))
    with store.writing() as connection:
        insert(connection, [correction])
        second.start()
        time.sleep(0.3)  # the second bench's transaction is under way before the first one's ends
    second.join()
    store.close()
    with opened(url) as book:
        (row,) = book.sheets()
    assert (row.unit, row.turns) == ("Bench 9", 1)


def test_a_commit_whose_word_was_lost_is_not_made_twice(server: Cluster, url: str) -> None:
    with Proxy(server.port) as proxy:
        through = server.url(url.rsplit("/", 1)[1], port=proxy.port)
        with opened(through) as book:
            sheet = book.begin_sheet(s.start())
            assert book.settle(10)
            proxy.swallow_answer_to(b"COMMIT")
            book.add_turn(sheet, s.entry(0))
            until(lambda: proxy.swallowed > 0)
            assert counts(url)["turn"] == 1  # the server has it, and this side does not know
            until(lambda: book.waiting == 0)
            book.add_turn(sheet, s.entry(1))
            assert book.settle(10)
            assert len(book.sheet(sheet).turns) == 2
    assert counts(url)["turn"] == 2


def test_a_server_that_never_answers_holds_nobody_up() -> None:
    silent = socket.socket()
    silent.bind(("127.0.0.1", 0))
    silent.listen(8)
    url = f"postgresql://bench@127.0.0.1:{silent.getsockname()[1]}/book?connect_timeout=2"
    started = time.monotonic()
    with opened(url) as book:
        assert time.monotonic() - started < 4
        for _ in range(3):
            begun = time.monotonic()
            sheet = book.begin_sheet(s.start())
            book.add_turn(sheet, s.entry(0))
            assert time.monotonic() - begun < 1.0
        assert book.waiting == 3
    silent.close()


@pytest.mark.parametrize(
    ("change", "match"),
    [
        (lambda server, url: url.replace(server.password, "wrong"), "password"),
        (lambda server, url: url + "_none", "does not exist"),
    ],
)
def test_a_server_that_turns_us_away_is_not_mistaken_for_one_that_is_off(
    change: Callable[[Cluster, str], str], match: str, server: Cluster, url: str
) -> None:
    with pytest.raises(BookError, match=match) as refusal:
        open_book(change(server, url))
    assert refusal.value.exit_status == 5
    assert server.password not in str(refusal.value) + refusal.value.remedy


def test_a_newer_book_and_another_programs_database_are_refused(server: Cluster, url: str) -> None:
    opened(url).close()
    plain = url.replace("+psycopg", "")
    with psycopg.connect(plain) as connection:
        connection.execute("INSERT INTO migration VALUES ('0099-from-tomorrow', 'x', '9.0')")
    with pytest.raises(BookError, match="newer version"):
        open_book(url)
    strange = server.database()
    with psycopg.connect(strange.replace("+psycopg", "")) as connection:
        connection.execute("CREATE TABLE invoices (id integer)")
    with pytest.raises(BookError, match="another program's tables"):
        open_book(strange)


def test_a_row_the_server_refuses_holds_up_no_other_and_is_said(url: str) -> None:
    with opened(url) as book:
        assert book.settle(10)
        with psycopg.connect(url.replace("+psycopg", "")) as connection:
            connection.execute("ALTER TABLE sheet ADD CHECK (unit <> 'Bench 13')")
        unlucky = written(book, 1, "Bench 13")
        lucky = written(book, 1, "Bench 14")
        book.settle(10)
        assert [row.id for row in book.sheets()] == [lucky]
        assert book.waiting == 1
        (notice,) = book.notices()
        assert "kept on this machine" in notice.message
        with psycopg.connect(url.replace("+psycopg", "")) as connection:
            connection.execute("ALTER TABLE sheet DROP CONSTRAINT sheet_unit_check")
    with opened(url) as book:
        until(lambda: book.waiting == 0)
        assert {row.id for row in book.sheets()} == {unlucky, lucky}


def test_many_benches_may_open_a_new_book_at_once(url: str) -> None:
    errors: list[BaseException] = []

    def enter() -> None:
        try:
            opened(url).close()
        except BaseException as error:  # noqa: BLE001
            errors.append(error)

    threads = [threading.Thread(target=enter) for _ in range(6)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert errors == []
    assert counts(url)["migration"] == 6


def test_a_missing_driver_is_said_with_what_to_install(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("trimmer.book.engines.find_spec", lambda _name: None)
    with pytest.raises(BookError, match="driver") as refusal:
        open_book("postgresql://bench@127.0.0.1/book")
    assert "trimmer[postgres]" in refusal.value.remedy


def test_no_thread_is_left_when_a_shared_book_is_closed(url: str) -> None:
    book = opened(url)
    written(book, 0)
    book.close()
    book.close()
    assert not [thread for thread in threading.enumerate() if thread.name == "book-courier"]


def test_an_address_nobody_listens_at_can_be_written_to_all_the_same() -> None:
    with opened(f"postgresql://bench@127.0.0.1:{free_port()}/book") as book:
        assert isinstance(book, Book)
        sheet = written(book, 1)
        assert book.sheet(sheet).row.finished
