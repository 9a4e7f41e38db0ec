"""Several benches write a thousand sheets to one server that is stopped and started meanwhile.

Run as ``python -m tests.campaigns.book_servers [BENCHES] [SHEETS] [STOPS]``. Every bench is a program
with a home of its own. The server's files are durable, and every other stop is as a crash.
"""

from __future__ import annotations

import collections
import random
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import psycopg

from tests.book import samples as s
from tests.book.postgres import Cluster, missing
from tests.book.test_book import same_entry
from trimmer.book import open_book


def main(benches: int = 8, sheets: int = 1000, stops: int = 6) -> int:
    """Run the campaign and give its exit status."""
    if missing():
        print(missing())
        return 1
    cluster = Cluster(durable=True)
    try:
        cluster.start()
        with tempfile.TemporaryDirectory(prefix="trimmer-benches-") as folder:
            return _campaign(cluster, Path(folder), benches, sheets, stops)
    finally:
        cluster.remove()


def _campaign(cluster: Cluster, folder: Path, benches: int, sheets: int, stops: int) -> int:
    url, turns = cluster.database(), 3
    started = time.monotonic()
    programs = [
        subprocess.Popen(
            [
                sys.executable, "-m", "tests.book.writer",
                url, str(folder / str(n)), str(sheets // benches), str(turns),
            ],
            stdout=(folder / f"{n}.said").open("w"),
        )
        for n in range(benches)
    ]  # fmt: skip
    made = _stop_and_start(cluster, programs, stops)
    codes = [program.wait(600) for program in programs]
    writing = time.monotonic() - started
    _deliver(url, folder, benches)
    said = [line.split() for n in range(benches) for line in (folder / f"{n}.said").open()]
    finished = [words[1] for words in said if words[0] == "finished"]
    print(f"{benches} benches, {len(finished)} sheets acknowledged, exit statuses {set(codes)}")
    print(f"server stopped and started {made} times; {writing:.1f} s of writing")
    return _compare(url, finished, turns)


def _stop_and_start(cluster: Cluster, programs: list[subprocess.Popen[bytes]], stops: int) -> int:
    dice, made = random.Random(1), 0
    while made < stops and any(program.poll() is None for program in programs):
        time.sleep(dice.uniform(1.0, 3.0))
        cluster.stop("immediate" if made % 2 else "fast")
        time.sleep(dice.uniform(0.2, 2.0))
        cluster.start()
        made += 1
    return made


def _deliver(url: str, folder: Path, benches: int) -> None:
    """Open each bench's book once more, as the next session would, until nothing waits."""
    import os

    waiting = 0
    for n in range(benches):
        os.environ["TRIMMER_HOME"] = str(folder / str(n))
        with open_book(url) as book:
            waiting += book.waiting
            deadline = time.monotonic() + 60
            while book.waiting and time.monotonic() < deadline:
                time.sleep(0.05)
            assert book.waiting == 0
    print(f"{waiting} sheets were left for the next session, and were delivered")


def _compare(url: str, finished: list[str], turns: int) -> int:
    with psycopg.connect(url.replace("+psycopg", "")) as connection:
        rows = connection.execute("SELECT sheet_id, number FROM turn").fetchall()
        there = {row[0] for row in connection.execute("SELECT id FROM sheet").fetchall()}
        ends = collections.Counter(
            row[0] for row in connection.execute("SELECT sheet_id FROM sheet_end").fetchall()
        )
    times = collections.Counter(rows)
    lost = [sheet for sheet in finished if sheet not in there or ends[sheet] != 1]
    lost += [(sh, n) for sh in finished for n in range(turns + 1) if times[sh, n] != 1]  # type: ignore[misc]
    doubles = sum(count - 1 for count in times.values())
    with open_book(url) as book:
        sample = random.Random(2).sample(sorted(set(finished)), min(50, len(finished)))
        same = all(
            same_entry(entry, s.entry(n, samples=500))
            for sheet in sample
            for n, entry in enumerate(book.sheet(sheet).turns)
        )
        cards = sum(row.finished for row in book.sheets())
    print(f"on the server: {len(there)} sheets, {len(rows)} turns, {cards} finished in the list")
    print(f"lost {len(lost)}, double {doubles}; {len(sample)} sheets bit for bit the same: {same}")
    good = not lost and not doubles and same and cards == len(finished) == len(there)
    print("passed" if good else "FAILED")
    return 0 if good else 1


if __name__ == "__main__":
    raise SystemExit(main(*map(int, sys.argv[1:])))
