"""The real command: each exit status, its lines, and that nothing measured is lost."""

from __future__ import annotations

import json
import signal
import socket
from pathlib import Path

import numpy as np
import pytest

from drivers.bench import Bench
from tests.command import Running, trimmer
from tests.session.simulated import trimmed
from trimmer.book import open_book

SIGN = {"clockwise": 1.0, "counter-clockwise": -1.0}


def within_reach(thd: float, best: float) -> bool:
    """Within max(5 %, 0.02 percentage points) of the true best."""
    return thd <= best + max(0.05 * best, 2e-4)


def csv_of(path: Path, values: np.ndarray) -> Path:
    rows = "\n".join(f"{1e-5 * i:.6e},{value:.6e}" for i, value in enumerate(values))
    path.write_text(f"Time (s),Channel 1 (V)\n{rows}\n")
    return path


def sine(cycles: float, n: int = 2000) -> np.ndarray:
    theta = 2 * np.pi * cycles * np.arange(n) / n
    return np.cos(theta) + 0.01 * np.cos(2 * theta)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_a_demonstration_ends_at_the_units_true_best(seed: int, tmp_path: Path) -> None:
    end = trimmed(seed, tmp_path / "book.sqlite")
    assert end.reached, end
    assert end.verdict == "at-floor"


def test_the_demo_with_a_simulated_hand_ends_with_a_logged_sheet(own_home: Path) -> None:
    done = trimmer("demo", "--hands", "auto", "--plain", "--seed", "2")
    assert done.returncode == 0, done.stderr
    with open_book(own_home / "demo-book.sqlite", writes=False) as book:
        (row,) = book.sheets()
    assert row.finished
    assert row.id in done.stdout
    with Bench(2) as bench:
        best = bench.best()[0]
    assert row.thd is not None
    assert row.thd_sigma is not None
    # What is read carries the digitiser's own error, which its stated uncertainty owns up to.
    assert within_reach(row.thd - 2 * row.thd_sigma, best)


def test_the_demo_teaches_nothing_to_the_real_book(own_home: Path) -> None:
    assert trimmer("demo", "--hands", "auto", "--plain", "--seed", "4").returncode == 0
    listed = trimmer("log", "list", "--json")
    assert listed.returncode == 0
    assert listed.stdout == ""


def test_without_a_terminal_the_demo_says_so_and_goes_on_in_plain_lines() -> None:
    done = trimmer("demo", "--hands", "auto", "--seed", "1")
    assert done.returncode == 0
    assert "no terminal" in done.stderr
    assert "Done" in done.stdout


def test_a_script_tunes_an_instrument_in_another_process() -> None:
    with Running("bench", "--port", "0", "--seed", "5") as bench:
        resource = (bench.line() or "").split()[0]
        turns: list[str] = []
        with Running("tune", resource, "--json", "--unit", "no. 5") as tune:
            for event in tune.events():
                turns.append(event["event"])
                if event["event"] == "advice":
                    assert event["degrees"] == pytest.approx(360 * event["turns"], abs=0.06)
                    bench.say(f"{event['trim']} {SIGN[event['sense']] * event['turns']:.5f}")
                    assert (bench.line() or "").startswith(event["trim"])
                    tune.say("moved" if len(turns) % 4 else "")
                last = event
            assert tune.end() == 0
        assert last["event"] == "done"
        assert last["verdict"] == "at-floor"
        with Bench(5) as same:
            assert within_reach(last["thd"] - 2 * last["thd_sigma"], same.best()[0])
        shown = trimmer("log", "show", last["sheet"], "--json")
        sheet = json.loads(shown.stdout)
        assert sheet["unit"] == "no. 5"
        assert len(sheet["readings"]) == turns.count("reading")


def test_measure_gives_one_reading_a_file(tmp_path: Path) -> None:
    files = [csv_of(tmp_path / f"{n}.csv", sine(n + 0.3)) for n in (5, 9)]
    done = trimmer("measure", *files, "--json")
    assert done.returncode == 0
    events = [json.loads(text) for text in done.stdout.splitlines()]
    assert [event["event"] for event in events] == ["reading"] * 2
    for event in events:
        assert event["thd"] == pytest.approx(0.01, abs=1e-5)
        assert event["turn"] is None


def test_a_wrong_command_ends_with_2() -> None:
    for words in (
        [],
        ["tune"],
        ["tune", "nothing-like-a-source"],
        ["measure", "bench", "--orders", "2"],
    ):
        done = trimmer(*words)
        assert done.returncode == 2, words
        assert done.stderr
        assert "Traceback" not in done.stderr


def test_one_file_cannot_be_trimmed(tmp_path: Path) -> None:
    done = trimmer("tune", csv_of(tmp_path / "one.csv", sine(8)), "--json")
    assert done.returncode == 2
    assert "folder" in done.stderr


@pytest.mark.parametrize(
    ("values", "word"),
    [
        (np.zeros(2000), "signal"),
        (sine(2.2), "periods"),
        (np.where(np.arange(2000) == 70, np.nan, sine(8)), "number"),
    ],
    ids=["flat", "two periods", "not a number"],
)
def test_a_signal_that_cannot_be_used_ends_with_3(
    tmp_path: Path, values: np.ndarray, word: str
) -> None:
    done = trimmer("measure", csv_of(tmp_path / "bad.csv", values))
    assert done.returncode == 3
    assert word in done.stderr
    assert len(done.stderr.strip().splitlines()) >= 2
    assert done.stdout == ""


def test_a_source_that_fails_ends_with_4(tmp_path: Path) -> None:
    with socket.socket() as closed:
        closed.bind(("127.0.0.1", 0))
        port = closed.getsockname()[1]
    resource = f"TCPIP::127.0.0.1::{port}::SOCKET"
    for words in (
        ["measure", str(tmp_path / "no.csv")],
        ["measure", resource],
        ["tune", resource, "--json"],
    ):
        done = trimmer(*words, stdin="")
        assert done.returncode == 4, (words, done.stderr)
        assert "Traceback" not in done.stderr


def test_a_book_that_fails_ends_with_5(tmp_path: Path) -> None:
    no_book = tmp_path / "letter.sqlite"
    no_book.write_text("Dear all, this is no book.\n" * 100)
    for words in (["log", "list"], ["tune", "bench", "--json"]):
        done = trimmer(*words, "--book", no_book, stdin="")
        assert done.returncode == 5, done.stderr
        assert "Traceback" not in done.stderr
    assert no_book.read_text().startswith("Dear all")


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_an_interrupt_ends_with_130_and_keeps_what_was_measured(
    number: signal.Signals, own_home: Path
) -> None:
    with Running("tune", "bench", "--seed", "6", "--json") as tune:
        for event in tune.events():
            if event["event"] == "advice":
                break
        tune.process.send_signal(number)
        assert tune.end() == 130
        assert not [text for text in tune.messages if "Traceback" in text]
    with open_book(own_home / "book.sqlite", writes=False) as book:
        (row,) = book.sheets()
        assert row.verdict == "stopped"
        assert len(book.sheet(row.id).turns) == 1


def test_the_end_of_stdin_ends_a_session_that_waits_for_it() -> None:
    done = trimmer("tune", "bench", "--seed", "7", "--json", stdin="\n")
    assert done.returncode == 0
    last = json.loads(done.stdout.splitlines()[-1])
    assert (last["event"], last["verdict"], last["turns_made"]) == ("done", "stopped", 1)


def test_a_line_that_is_no_word_is_said_and_changes_nothing() -> None:
    done = trimmer("tune", "bench", "--seed", "7", "--json", stdin="jump\nquit\n")
    assert done.returncode == 0
    assert "no word" in done.stderr
    assert json.loads(done.stdout.splitlines()[-1])["turns_made"] == 0


def test_json_keeps_stdout_to_itself() -> None:
    done = trimmer("demo", "--hands", "auto", "--json", "--seed", "8")
    events = [json.loads(text) for text in done.stdout.splitlines()]
    assert events[-1]["event"] == "done"
    assert {event["event"] for event in events} == {"reading", "advice", "done"}


def test_following_needs_no_word() -> None:
    done = trimmer("demo", "--hands", "auto", "--json", "--follow", "--seed", "9")
    assert done.returncode == 0, done.stderr
    events = [json.loads(text) for text in done.stdout.splitlines()]
    says = {event["say"] for event in events if event["event"] == "follow"}
    assert {"turn", "stop"} <= says
    assert events[-1]["verdict"] == "at-floor"


@pytest.mark.parametrize(("limit", "verdict"), [(0.02, "inside"), (0.005, "outside")])
def test_a_limit_is_judged_with_the_uncertainty(tmp_path: Path, limit: float, verdict: str) -> None:
    file = csv_of(tmp_path / "one.csv", sine(8.3))
    done = trimmer("measure", file, "--json", "--limit-thd", str(limit))
    assert json.loads(done.stdout)["verdict"] == verdict


def test_a_session_says_whether_its_end_is_within_the_limit() -> None:
    done = trimmer("demo", "--hands", "auto", "--json", "--seed", "2", "--limit-thd", "0.01")
    assert json.loads(done.stdout.splitlines()[-1])["limit"] == "inside"


@pytest.mark.parametrize("content", ["x", "", "Dear all"], ids=["one byte", "empty", "text"])
def test_looking_at_what_is_no_book_leaves_it_alone(tmp_path: Path, content: str) -> None:
    path = tmp_path / "one.txt"
    path.write_text(content)
    done = trimmer("log", "list", "--book", path)
    assert done.returncode == 5
    assert path.read_text() == content
    assert list(tmp_path.glob("one.txt*")) == [path]


def test_a_seed_below_zero_is_a_wrong_command() -> None:
    done = trimmer("demo", "--hands", "auto", "--json", "--seed", "-5")
    assert done.returncode == 2
    assert "Traceback" not in done.stderr
