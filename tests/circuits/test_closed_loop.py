"""The real command, told of a circuit's captures alone, trims it to the circuit's own best."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import pytest

from tests.circuits.closed_loop import allowance, bench_of, reached
from tests.circuits.netlist import CIRCUITS
from tests.circuits.optimum import optimum
from tests.circuits.person import Event, Outcome, trim_by_the_command
from tests.circuits.runner import needs_ngspice

pytestmark = [needs_ngspice, pytest.mark.circuit]


@pytest.mark.parametrize("circuit", CIRCUITS)
def test_a_circuit_ends_at_its_own_best(circuit: str, tmp_path: Path) -> None:
    bench = replace(bench_of(circuit, seed=1), start=(0.25, 0.7))
    best = optimum(bench.unit)
    outcome = trim_by_the_command(bench, tmp_path)
    assert outcome.track[0] > best.thd + 5.0 * allowance(best), "it was good from the start"
    assert reached(outcome, best), f"best {best}\n{outcome.told()}"
    assert outcome.status == 0, outcome.told()
    check_the_last_line(outcome)


def test_a_best_past_the_end_stop_is_settled_for_at_the_stop(tmp_path: Path) -> None:
    bench = bench_of("pair_coupled", seed=1, past_the_stop=True)
    best = optimum(bench.unit)
    assert {best.u, best.l} & {0.0, 1.0}
    outcome = trim_by_the_command(bench, tmp_path)
    assert outcome.stops > 0, "the hand met no end stop"
    assert reached(outcome, best), f"best {best}\n{outcome.told()}"
    check_the_last_line(outcome, verdict="end-stop")


def test_screws_that_do_nothing_are_told_from_trims(tmp_path: Path) -> None:
    bench = replace(bench_of("few_sections", seed=1), start=(0.25, 0.7), senses=(0, 0))
    outcome = trim_by_the_command(bench, tmp_path)
    assert not reached(outcome, optimum(bench.unit))
    check_the_last_line(outcome, verdict="no-response")


def test_captures_without_noise_end_there_too_and_the_sheet_is_in_the_book(tmp_path: Path) -> None:
    bench = bench_of("tapped_string_diodes", seed=2, clean=True)
    best = optimum(bench.unit)
    outcome = trim_by_the_command(bench, tmp_path)
    assert reached(outcome, best), f"best {best}\n{outcome.told()}"
    check_the_last_line(outcome)
    assert outcome.done is not None
    sheets = sheets_of(tmp_path / "home")
    assert [sheet["id"] for sheet in sheets] == [outcome.done["sheet"]]
    assert sheets[0]["unit"] == "bench unit"
    assert sheets[0]["thd"] == pytest.approx(outcome.done["thd"])


def sheets_of(home: Path) -> list[Event]:
    """What the command lists of the book in `home`."""
    listed = subprocess.run(
        [sys.executable, "-m", "trimmer", "log", "list", "--json"],
        env={**os.environ, "TRIMMER_HOME": str(home)},
        capture_output=True,
        text=True,
        timeout=60,
        check=True,
    )
    return [json.loads(line) for line in listed.stdout.splitlines()]


def check_the_last_line(outcome: Outcome, verdict: str = "at-floor") -> None:
    """What the command says at the end agrees with what was done and what the simulator sees."""
    done = outcome.done
    assert done is not None
    assert done["verdict"] == verdict, outcome.told()
    assert done["turns_made"] == outcome.turns
    assert abs(done["thd"] - outcome.thd) < 5.0 * done["thd_sigma"] + 1e-5
    kinds = [event["event"] for event in outcome.events]
    assert kinds[:2] == ["reading", "advice"]
    assert kinds.count("reading") == outcome.turns + 1
    assert set(kinds) == {"reading", "advice", "done"}
