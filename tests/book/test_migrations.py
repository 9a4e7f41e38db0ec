"""The schema moves by named, ordered steps, each whole or not at all."""

from __future__ import annotations

import sqlite3
import threading
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path
from typing import Any

import pytest
import sqlalchemy as sa

from tests.book import samples as s
from tests.book.postgres import Cluster
from tests.book.test_book import one_of_everything, written
from trimmer.book import Book, open_book
from trimmer.book import tables as t
from trimmer.book.engines import APPLICATION_ID, server_engine, sqlite_engine
from trimmer.book.migrate import applied, migrate
from trimmer.book.migrations import STEPS, Step
from trimmer.book.store import Store
from trimmer.errors import BookError


@pytest.fixture(params=["sqlite", "postgresql"])
def engine(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[sa.Engine]:
    """Give an engine on an empty database of each sort."""
    if request.param == "sqlite":
        engine = sqlite_engine(tmp_path / "new.sqlite")
    else:
        server: Cluster = request.getfixturevalue("server")
        engine = server_engine(server.database())
    yield engine
    engine.dispose()


def names(engine: sa.Engine) -> set[str]:
    with engine.connect() as connection:
        return applied(connection)


def shape(inspector: sa.Inspector, table: str) -> dict[str, Any]:
    """Give what a table is like, in words that both databases share."""
    keys = inspector.get_foreign_keys(table)
    return {
        "columns": {
            column["name"]: (family(column["type"]), bool(column["nullable"]))
            for column in inspector.get_columns(table)
        },
        "key": inspector.get_pk_constraint(table)["constrained_columns"],
        "refers": sorted((k["constrained_columns"][0], k["referred_table"]) for k in keys),
        "indices": {
            str(index["name"]): list(index["column_names"])
            for index in inspector.get_indexes(table)
        },
    }


def family(kind: sa.types.TypeEngine[Any]) -> str:
    while isinstance(kind, sa.types.TypeDecorator):
        kind = kind.impl_instance
    for family, kinds in {
        "real": (sa.Float, sa.Numeric),
        "whole": (sa.Integer,),
        "bytes": (sa.LargeBinary, sa.BLOB),
        "text": (sa.String,),
    }.items():
        if isinstance(kind, kinds):
            return family
    raise AssertionError(f"unexpected type {kind!r}")


def planned(table: sa.Table) -> dict[str, Any]:
    return {
        "columns": {c.name: (family(c.type), bool(c.nullable)) for c in table.columns},
        "key": [c.name for c in table.primary_key.columns],
        "refers": sorted((k.parent.name, k.column.table.name) for k in table.foreign_keys),
        "indices": {str(i.name): [c.name for c in i.columns] for i in table.indexes},
    }


def test_the_steps_build_exactly_the_tables_that_the_queries_use(engine: sa.Engine) -> None:
    migrate(engine, "it")
    inspector = sa.inspect(engine)
    assert set(inspector.get_table_names()) == set(t.metadata.tables)
    for name, table in t.metadata.tables.items():
        assert shape(inspector, name) == planned(table), name


def test_each_step_is_recorded_by_name_and_applied_once(engine: sa.Engine) -> None:
    migrate(engine, "it")
    migrate(engine, "it")
    assert names(engine) == {step.name for step in STEPS}
    assert [step.name for step in STEPS] == sorted(step.name for step in STEPS)
    assert len({step.name for step in STEPS}) == len(STEPS)


def test_a_step_that_fails_leaves_the_steps_before_it_and_nothing_of_itself(
    engine: sa.Engine,
) -> None:
    broken = Step("0003-broken", lambda w: ["CREATE TABLE half (id INTEGER)", "CREATE NONSENSE"])
    with pytest.raises(sa.exc.DBAPIError):
        migrate(engine, "it", (*STEPS[:2], broken))
    assert names(engine) == {step.name for step in STEPS[:2]}
    assert "half" not in sa.inspect(engine).get_table_names()
    migrate(engine, "it")
    assert names(engine) == {step.name for step in STEPS}


def test_sheets_of_an_older_book_are_there_after_the_steps_it_lacked(engine: sa.Engine) -> None:
    migrate(engine, "it", STEPS[:3])
    store = Store(engine, "it")
    from trimmer.book import rows as r
    from trimmer.book.ids import Ids

    ids = Ids()
    finished, broken_off = ids.new(), ids.new()
    old = [
        r.sheet_row(finished, s.start("A")),
        r.sheet_row(broken_off, s.start("B")),
        r.turn_row(ids.new(), finished, s.entry(0)),
        r.turn_row(ids.new(), broken_off, s.entry(0)),
        r.turn_row(ids.new(), broken_off, s.entry(1)),
        r.end_row(ids.new(), finished, s.end(0)),
    ]
    with store.writing() as connection:
        for row in old:
            connection.execute(row.table.insert(), row.values)
    migrate(engine, "it")
    with engine.connect() as connection:
        by_steps = connection.execute(sa.select(t.card).order_by(t.card.c.sheet_id)).all()
    with store.writing() as connection:
        from trimmer.book.cards import refresh

        connection.execute(t.card.delete())
        refresh(connection, sa.true())
    with engine.connect() as connection:
        anew = connection.execute(sa.select(t.card).order_by(t.card.c.sheet_id)).all()
    assert [tuple(row) for row in by_steps] == [tuple(row) for row in anew]
    assert [(row.unit, row.verdict, row.finished, row.turns) for row in anew] == [
        ("A", "at-floor", 1, 0),
        ("B", "stopped", 0, 1),
    ]


def test_a_book_of_a_newer_version_is_refused_and_left_as_it_is(home: Path) -> None:
    with open_book() as book:
        written(book)
    path = home / "book.sqlite"
    with closing(sqlite3.connect(path)) as raw, raw:
        raw.execute("INSERT INTO migration VALUES ('0099-from-tomorrow', 'x', '9.0')")
    before = path.read_bytes()
    for writes in (True, False):
        with pytest.raises(BookError, match=r"newer version.*0099-from-tomorrow") as refusal:
            open_book(writes=writes)
        assert "Update trimmer" in refusal.value.remedy
    assert path.read_bytes() == before


def test_an_older_book_is_brought_up_to_date_even_when_only_looked_at(tmp_path: Path) -> None:
    path = tmp_path / "old.sqlite"
    engine = sqlite_engine(path)
    migrate(engine, "it", STEPS[:2])
    engine.dispose()
    with open_book(path, writes=False) as book:
        assert book.sheets() == []


def test_many_programs_may_open_a_new_book_at_once(tmp_path: Path) -> None:
    errors: list[BaseException] = []

    def enter() -> None:
        try:
            open_book(tmp_path / "new.sqlite").close()
        except BaseException as error:  # noqa: BLE001
            errors.append(error)

    threads = [threading.Thread(target=enter) for _ in range(6)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert errors == []
    with closing(sqlite3.connect(tmp_path / "new.sqlite")) as raw:
        assert raw.execute("PRAGMA application_id").fetchone()[0] == APPLICATION_ID
        assert raw.execute("SELECT count(*) FROM migration").fetchone()[0] == len(STEPS)


def test_the_database_itself_refuses_to_change_or_remove_a_row(engine: sa.Engine) -> None:
    migrate(engine, "it")
    one_of_everything(Book(Store(engine, "it")))
    with engine.connect() as connection:
        for table in (record.name for record in t.RECORDS):
            for change in (f"UPDATE {table} SET id = 'y'", f"DELETE FROM {table}"):
                with pytest.raises(sa.exc.DBAPIError, match="only ever added"):
                    connection.exec_driver_sql(change)
                connection.rollback()
            assert connection.scalar(sa.text(f"SELECT count(*) FROM {table}"))
            connection.rollback()
