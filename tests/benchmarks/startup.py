"""How soon the person sees something: `python -m tests.benchmarks.startup`.

Times the real command from the start of its process, beside the start of a bare interpreter that
imports numpy, in the same run; prints seconds and ratios, asserts nothing.
"""

from __future__ import annotations

import os
import pty
import select
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable

from tests.command import COMMAND, Running

RUNS = 5


def bare() -> float:
    """Time an interpreter that imports numpy and ends."""
    start = time.perf_counter()
    subprocess.run([sys.executable, "-c", "import numpy"], check=True)
    return time.perf_counter() - start


def version() -> float:
    """Time `trimmer --version`."""
    start = time.perf_counter()
    subprocess.run([*COMMAND, "--version"], check=True, capture_output=True)
    return time.perf_counter() - start


def first_advice() -> float:
    """Time `trimmer tune bench --json` up to its first advice."""
    start = time.perf_counter()
    with Running("tune", "bench", "--json", "--seed", "1") as tune:
        for event in tune.events():
            if event["event"] == "advice":
                break
        return time.perf_counter() - start


def first_paint() -> float:
    """Time `trimmer demo` in a terminal of its own up to the first large letters."""
    start = time.perf_counter()
    child, terminal = pty.fork()
    if child == 0:
        os.environ |= {"TERM": "xterm-256color", "COLUMNS": "120", "LINES": "40"}
        os.execv(COMMAND[0], [*COMMAND, "demo", "--seed", "1"])
    seen = b""
    try:
        while "█".encode() not in seen:
            ready, _, _ = select.select([terminal], [], [], 20.0)
            if not ready:
                return float("nan")
            seen += os.read(terminal, 65536)
        return time.perf_counter() - start
    finally:
        os.kill(child, 9)
        os.waitpid(child, 0)
        os.close(terminal)


def main() -> None:
    """Print the table."""
    with tempfile.TemporaryDirectory() as home:
        os.environ["TRIMMER_HOME"] = home
        rows: dict[str, Callable[[], float]] = {
            "bare interpreter with numpy": bare,
            "trimmer --version": version,
            "first paint of the screen": first_paint,
            "first advice, lines of JSON": first_advice,
        }
        times = {name: [run() for _ in range(RUNS)] for name, run in rows.items()}
    base = statistics.median(times["bare interpreter with numpy"])
    print(f"{'':32}{'median':>9}{'worst':>9}{'ratio':>8}")
    for name, seen in times.items():
        middle = statistics.median(seen)
        print(f"{name:32}{middle:8.2f}s{max(seen):8.2f}s{middle / base:8.1f}")


if __name__ == "__main__":
    main()
