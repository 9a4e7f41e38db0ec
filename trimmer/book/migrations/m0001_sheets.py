"""Sheets, their turns, the guide's state, how they ended, and corrections."""

from __future__ import annotations

from trimmer.book.migrations.step import Step, Words


def _statements(w: Words) -> list[str]:
    return [
        f"""CREATE TABLE sheet (
            id {w.text} NOT NULL PRIMARY KEY,
            taken_at {w.text} NOT NULL,
            unit {w.text} NOT NULL,
            kind {w.text} NOT NULL,
            source {w.text} NOT NULL,
            identity {w.text} NOT NULL,
            dialect {w.text},
            settings {w.document} NOT NULL,
            notes {w.document} NOT NULL,
            travel_turns {w.real},
            orders INTEGER,
            versions {w.document} NOT NULL)""",
        f"""CREATE TABLE turn (
            id {w.text} NOT NULL PRIMARY KEY,
            sheet_id {w.text} NOT NULL REFERENCES sheet (id),
            number INTEGER NOT NULL,
            taken_at {w.text} NOT NULL,
            source {w.text} NOT NULL,
            word {w.text} NOT NULL,
            trim {w.text},
            sense {w.text},
            asked_turns {w.real},
            made_turns {w.real},
            advice {w.document},
            fundamental_hz {w.real},
            thd {w.real},
            thd_sigma {w.real},
            reading {w.blob} NOT NULL,
            waveform {w.blob},
            interval_s {w.real},
            notes {w.document} NOT NULL)""",
        "CREATE INDEX turn_of_sheet ON turn (sheet_id, id)",
        f"""CREATE TABLE state (
            id {w.text} NOT NULL PRIMARY KEY,
            sheet_id {w.text} NOT NULL REFERENCES sheet (id),
            saved_at {w.text} NOT NULL,
            document {w.blob} NOT NULL)""",
        "CREATE INDEX state_of_sheet ON state (sheet_id, id)",
        f"""CREATE TABLE sheet_end (
            id {w.text} NOT NULL PRIMARY KEY,
            sheet_id {w.text} NOT NULL REFERENCES sheet (id),
            ended_at {w.text} NOT NULL,
            verdict {w.text} NOT NULL,
            turns INTEGER NOT NULL,
            fundamental_hz {w.real},
            thd {w.real},
            thd_sigma {w.real},
            floor_thd {w.real},
            floor_sigma {w.real},
            net_upper {w.real},
            net_lower {w.real},
            expected_thd_warm {w.real},
            remainder {w.document} NOT NULL,
            reason {w.text} NOT NULL,
            reading {w.blob})""",
        "CREATE INDEX end_of_sheet ON sheet_end (sheet_id, id)",
        f"""CREATE TABLE correction (
            id {w.text} NOT NULL PRIMARY KEY,
            sheet_id {w.text} NOT NULL REFERENCES sheet (id),
            at {w.text} NOT NULL,
            field {w.text} NOT NULL,
            value {w.text} NOT NULL,
            reason {w.text} NOT NULL)""",
        "CREATE INDEX correction_of_sheet ON correction (sheet_id, field, id)",
    ]


STEP = Step("0001-sheets", _statements)
