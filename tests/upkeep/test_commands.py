"""Warm-up, survey and recheck by the real command, on the simulated unit and on files."""

from __future__ import annotations

import json
import os
import signal
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from drivers.bench import Bench
from tests.command import Running, trimmer
from tests.upkeep.warmups import WarmUnit
from trimmer.book import RecordStart, open_book
from trimmer.guidance.warming import Warming
from trimmer.upkeep.drift import course_document

SIGN = {"clockwise": 1.0, "counter-clockwise": -1.0}


def events(text: str) -> list[dict[str, Any]]:
    return [json.loads(line) for line in text.splitlines()]


def capture(
    path: Path, hertz: float, thd: float, rng: np.random.Generator, taken_at: float | None = None
) -> Path:
    """Write a capture of ten periods with one harmonic, noise of an 8-bit digitiser."""
    n = 2000
    t = np.arange(n) / (n * hertz / 10.0)
    theta = 2.0 * np.pi * hertz * t
    values = np.cos(theta) + thd * np.cos(2.0 * theta) + 0.002 * rng.standard_normal(n)
    rows = "\n".join(f"{a:.9e},{v:.6e}" for a, v in zip(t, values, strict=True))
    part = path.with_suffix(".part")
    part.write_text(f"Time (s),Channel 1 (V)\n{rows}\n")
    if taken_at is not None:
        os.utime(part, (taken_at, taken_at))
    part.rename(path)
    return path


# -- warm-up ---------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def cold(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, list[dict[str, Any]]]:
    """Watch a cold unit to its end, once for several tests."""
    home = tmp_path_factory.mktemp("cold")
    done = trimmer(
        *("warmup", "bench", "--cold", "--seed", "2", "--unit", "A1", "--kind", "four-knee"),
        *("--json", "--note", "ambient=21 C"),
        TRIMMER_HOME=str(home),
    )
    assert done.returncode == 0, done.stderr
    return home, events(done.stdout)


def test_a_cold_unit_is_watched_until_it_has_settled(
    cold: tuple[Path, list[dict[str, Any]]],
) -> None:
    _, told = cold
    assert {each["event"] for each in told} == {"warmup"}
    assert [each["verdict"] for each in told[:-1]] == ["settling"] * (len(told) - 1)
    assert told[-1]["verdict"] == "settled"
    assert told[0]["settled_thd"] is None  # too few readings: null, not 0


def test_what_was_foretold_comes_true(cold: tuple[Path, list[dict[str, Any]]]) -> None:
    _, told = cold
    end = told[-1]["settled_thd"]
    early = next(each for each in told if each["settled_thd"] is not None)
    assert early["minutes"] < 0.6 * told[-1]["minutes"]
    assert early["settled_thd_low"] <= end <= early["settled_thd_high"]
    with Bench(2) as bench:  # the same unit, long warm
        assert abs(told[-1]["thd"] - bench.thd()) <= 3.0 * told[-1]["thd_sigma"] + 1e-4


def test_a_warm_up_is_in_the_book_with_its_points_and_its_course(
    cold: tuple[Path, list[dict[str, Any]]],
) -> None:
    home, told = cold
    with open_book(home / "book.sqlite", writes=False) as book:
        (record,) = book.records("warmup", unit="A1", kind="four-knee")
    assert record.id == told[-1]["record"]
    assert record.verdict == "settled"
    assert record.start.document["notes"] == {"ambient": "21 C"}
    minutes = [point.document["minutes"] for point in record.points]
    assert minutes == sorted(minutes)
    assert len(minutes) > 15
    course = record.document["course"]
    assert len(course["minutes"]) == len(course["parts"]) <= 32


@pytest.mark.parametrize("way", ["quit", "interrupt", "kill"])
def test_a_warm_up_that_is_ended_early_keeps_its_points(way: str, own_home: Path) -> None:
    words = ("warmup", "bench", "--cold", "--seed", "7", "--unit", "B", "--json")
    with Running(*words) as running:
        told = []
        for event in running.events():
            told.append(event)
            break  # a line a moment after the first points
        if way == "quit":
            running.say("quit")
        else:
            running.process.send_signal(signal.SIGINT if way == "interrupt" else signal.SIGKILL)
        told += list(running.events())
        assert running.end() == {"quit": 0, "interrupt": 130, "kill": -9}[way]
    with open_book(own_home / "book.sqlite", writes=False) as book:
        (record,) = book.records("warmup", unit="B")
    assert len(record.points) >= 1
    assert record.verdict == (None if way == "kill" else "settling")
    if way != "kill":
        assert told[-1]["verdict"] == "settling"
        assert told[-1]["record"] == record.id


def test_plain_lines_say_how_long_until_it_is_worth_trimming(own_home: Path) -> None:
    with Running("warmup", "bench", "--cold", "--seed", "7", "--plain") as running:
        lines = [running.line() or "" for _ in range(4)]
        running.say("enough")  # no word: said so on stderr, and it goes on
        running.say("quit")
        while running.line() is not None:
            pass
        assert running.end() == 0
    assert "45 times as fast" in lines[0]
    assert "Too early to tell" in lines[2]
    assert "worth trimming in about" in lines[3]
    assert any("no word here" in text for text in running.messages)


def test_a_warm_up_saved_file_by_file_is_foretold(tmp_path: Path, own_home: Path) -> None:
    rng = np.random.default_rng(1)
    folder = tmp_path / "captures"
    folder.mkdir()
    began = datetime.now(UTC).timestamp() - 3600.0
    with Running("warmup", folder, "--json", "--unit", "W") as running:
        lines = running.events()
        told = []
        for n in range(16):  # a file every half minute, by the files' own times
            cold = np.exp(-30.0 * n / 300.0)
            hertz, thd = 1000.0 * (1.0 + 0.003 * cold), 0.01 + 0.002 * cold
            capture(folder / f"{n:02d}.csv", hertz, thd, rng, began + 30.0 * n)
            told.append(next(lines))
        running.say("quit")
        told += list(lines)
        assert running.end() == 0
    last = told[-1]
    assert last["minutes"] == pytest.approx(7.5, abs=0.02)
    assert last["settled_thd_low"] <= 0.01 <= last["settled_thd_high"]
    assert last["settled_thd_high"] - last["settled_thd_low"] < 5e-4
    assert last["time_constant_s"] == pytest.approx(300.0, rel=0.1)
    assert last["settled_fundamental_hz"] == pytest.approx(1000.0, abs=0.2)


def test_one_capture_is_no_warm_up_and_no_survey(tmp_path: Path, own_home: Path) -> None:
    one = capture(tmp_path / "one.csv", 1000.0, 0.01, np.random.default_rng(1))
    for command in ("warmup", "survey"):
        done = trimmer(command, one, "--json")
        assert done.returncode == 2
        assert done.stdout == ""
        assert "folder" in done.stderr


def test_only_the_simulated_unit_can_be_made_cold(tmp_path: Path, own_home: Path) -> None:
    done = trimmer("warmup", tmp_path, "--cold")
    assert done.returncode == 2
    assert "simulated" in done.stderr


def test_minutes_since_switch_on_must_be_a_number(own_home: Path) -> None:
    done = trimmer("warmup", "bench", "--note", "minutes=soon")
    assert done.returncode == 2
    assert "--note minutes=3" in done.stderr


# -- survey ----------------------------------------------------------------------------------------


def test_a_survey_asks_for_each_point_and_says_what_is_inside(own_home: Path) -> None:
    done = trimmer(
        *("survey", "bench", "--seed", "3", "--unit", "C", "--points", "4", "--json"),
        *("--from", "200", "--to", "18000", "--limit-thd", "0.02"),
    )
    assert done.returncode == 0, done.stderr  # whatever the verdict
    told = events(done.stdout)
    asked = [each["towards_hz"] for each in told if each["event"] == "dial"]
    readings = [each for each in told if each["event"] == "reading"]
    assert sorted(asked) == [200.0, 896.0, 4020.0, 18000.0]
    assert [each["towards_hz"] for each in readings] == asked
    with Bench(3) as bench:
        for each in readings:
            assert abs(np.log(each["fundamental_hz"] / each["towards_hz"])) < 0.12
            bench.set_frequency(each["fundamental_hz"])
            assert each["verdict"] == ("inside" if bench.thd() < 0.02 else "outside")
    last = told[-1]
    assert last["event"] == "survey"
    assert last["verdict"] == "outside"  # 18 kHz: the output slews
    assert last["points"] == 4
    assert last["remainder"][0]["cause"] == "slewing"
    assert last["worst_thd"] == max(each["thd"] for each in readings)
    with open_book(own_home / "book.sqlite", writes=False) as book:
        (record,) = book.records("survey", unit="C")
    assert len(record.points) == 4
    assert record.verdict == "outside"


def test_limits_of_a_kind_are_kept_and_used_again(own_home: Path) -> None:
    few = ("survey", "bench", "--seed", "3", "--kind", "k", "--points", "1", "--json")
    near = ("--from", "1000", "--to", "1000")
    kept = trimmer(*few, *near, "--limit-thd", "0.001", "--keep-limits")
    assert kept.returncode == 0, kept.stderr
    again = trimmer(*few, *near)
    assert events(again.stdout)[-1]["verdict"] == "outside"
    without = trimmer(*few, *near, "--kind", "other")
    assert (
        events(without.stdout)[-1]["verdict"] == "cannot-tell"
    )  # no limit, nothing to be inside of


def test_limits_without_a_kind_cannot_be_kept(own_home: Path) -> None:
    done = trimmer("survey", "bench", "--limit-thd", "0.01", "--keep-limits")
    assert done.returncode == 2
    assert "--kind" in done.stderr


def test_a_survey_from_a_folder_takes_each_file_where_it_belongs(
    tmp_path: Path, own_home: Path
) -> None:
    rng = np.random.default_rng(5)
    folder = tmp_path / "captures"
    folder.mkdir()
    words = ("survey", folder, "--points", "2", "--from", "500", "--to", "2000", "--json")
    with Running(*words, "--limit-thd", "0.02") as running:
        lines = running.events()
        told = [next(lines)]
        capture(folder / "a.csv", 1000.0, 0.01, rng)  # no point there: passed over
        capture(folder / "b.csv", 2010.0, 0.01, rng)
        told.append(next(lines))
        capture(folder / "c.csv", 505.0, 0.03, rng)
        told += list(lines)
        assert running.end() == 0
    told = [each for each in told if each["event"] != "dial"]
    assert [each["event"] for each in told] == ["reading", "reading", "survey"]
    assert [each["verdict"] for each in told] == ["inside", "outside", "outside"]
    assert told[-1]["at_hz"] == pytest.approx(505.0, rel=1e-3)


def test_a_range_that_is_none_is_said(own_home: Path) -> None:
    done = trimmer("survey", "bench", "--from", "2000", "--to", "100")
    assert done.returncode == 2
    assert "--from" in done.stderr


# -- recheck ---------------------------------------------------------------------------------------


def trimmed(bench: Bench, *words: str) -> dict[str, Any]:
    """Trim a unit by the real command, turning as advised."""
    with Running("tune", bench.resource, "--json", *words) as running:
        last: dict[str, Any] = {}
        for last in running.events():
            if last["event"] == "advice":
                bench.turn(last["trim"], SIGN[last["sense"]] * last["turns"])
                running.say()
        assert running.end() == 0
    return last


def test_a_trimmed_unit_holds_then_needs_the_turns_that_undo_a_disturbance(own_home: Path) -> None:
    with Bench(11) as bench:
        words = ("--unit", "G7", "--kind", "four-knee")
        assert trimmed(bench, *words)["verdict"] == "at-floor"
        best = bench.best()[0]
        held = events(trimmer("recheck", bench.resource, "--unit", "G7", "--json").stdout)
        assert held[-1]["event"] == "recheck"
        assert held[-1]["verdict"] == "holds"
        assert held[-1]["advice"] is None
        for trim, way in (("upper", 1.0), ("lower", -1.0)):
            bench.turn(trim, 0.10 * way)
            bench.turn(
                trim, -0.04 * way
            )  # so that the play of the screw is taken up for the way back
        assert bench.thd() > 1.3 * best
        found = events(trimmer("recheck", bench.resource, "--unit", "G7", "--json").stdout)[-1]
        assert found["verdict"] == "retrim"
        assert found["change"] > 4.0 * found["change_sigma"]
        for turn in (found["advice"], found["then"]):
            if turn is not None:
                bench.turn(turn["trim"], SIGN[turn["sense"]] * turn["turns"])
        assert bench.thd() <= best + max(0.05 * best, 2e-4)
    with open_book(own_home / "book.sqlite", writes=False) as book:
        verdicts = [record.verdict for record in book.records("recheck", unit="G7")]
        sheets = book.sheets()
        assert [record.start.sheet for record in book.records("recheck")] == 2 * [sheets[0].id]
    assert verdicts == ["retrim", "holds"]


def test_a_cold_unit_has_drifted_as_its_kind_does_and_is_not_to_be_retrimmed(
    own_home: Path,
) -> None:
    kind = ("--kind", "four-knee")
    with Bench(11) as bench:
        trimmed(bench, "--unit", "G7", *kind)
        at = (bench.position("upper"), bench.position("lower"))
    other = replace(
        WarmUnit.drawn(12, "one"), slow_s=360.0
    )  # another unit of the kind, as it warmed
    minutes = np.linspace(0.0, 30.0, 31)
    course = Warming(minutes, np.array([other.true_parts(60.0 * m) for m in minutes]))
    with open_book(own_home / "book.sqlite") as book:
        start = RecordStart("warmup", datetime.now(UTC), unit="G8", kind="four-knee")
        book.add_record(start, "settled", {"course": course_document(course)})
    with Bench(11, cold=True, time_scale=1e-6, start=at) as bench:
        plain = trimmer("recheck", bench.resource, "--unit", "G7", "--plain")
        found = events(trimmer("recheck", bench.resource, "--unit", "G7", "--json").stdout)[-1]
    assert found["verdict"] == "drifted"
    assert found["warming_minutes"] < 10.0
    assert "let it warm" in plain.stdout


def test_a_unit_without_a_sheet_cannot_be_rechecked(own_home: Path) -> None:
    for words in (("recheck", "bench", "--unit", "nobody"), ("recheck", "bench")):
        done = trimmer(*words)
        assert done.returncode == 2
        assert "--unit" in done.stderr or "log list" in done.stderr


def test_a_capture_at_another_frequency_is_refused(tmp_path: Path, own_home: Path) -> None:
    rng = np.random.default_rng(9)
    with Bench(11) as bench:
        trimmed(bench, "--unit", "G7")
    one = capture(tmp_path / "one.csv", 3000.0, 0.01, rng)
    done = trimmer("recheck", one, "--unit", "G7", "--json")
    assert done.returncode == 3
    assert done.stdout == ""
    assert "Turn the dial" in done.stderr
