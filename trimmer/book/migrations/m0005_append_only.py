"""Rows of the record tables are only ever added: the database itself refuses the rest."""

from __future__ import annotations

from trimmer.book.migrations.step import Step, Words

_TABLES = (
    "sheet",
    "turn",
    "state",
    "sheet_end",
    "correction",
    "learned",
    "reference",
    "record",
    "record_point",
    "record_end",
)
_REFUSAL = "rows of the book are only ever added"


def _sqlite() -> list[str]:
    return [
        f"""CREATE TRIGGER {table}_no_{act.lower()} BEFORE {act} ON {table}
            BEGIN SELECT RAISE(ABORT, '{_REFUSAL}'); END"""
        for table in _TABLES
        for act in ("UPDATE", "DELETE")
    ]


def _postgresql() -> list[str]:
    refuse = f"""CREATE FUNCTION book_refuse() RETURNS trigger LANGUAGE plpgsql AS $$
            BEGIN RAISE EXCEPTION '{_REFUSAL}'; END $$"""
    return [
        refuse,
        *(
            f"""CREATE TRIGGER {table}_append_only BEFORE UPDATE OR DELETE OR TRUNCATE ON {table}
                FOR EACH STATEMENT EXECUTE FUNCTION book_refuse()"""
            for table in _TABLES
        ),
    ]


def _statements(w: Words) -> list[str]:
    return _sqlite() if w.dialect == "sqlite" else _postgresql()


STEP = Step("0005-append-only", _statements)
