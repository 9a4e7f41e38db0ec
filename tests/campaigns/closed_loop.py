"""The closed loop at full size: ``python -m tests.campaigns.closed_loop [SEEDS] [--kind] [--past-the-stop]``.

For each circuit and seed: a unit as it comes is trimmed through the real command, on captures of
the simulator. About four seconds a trial on one core. With ``--kind`` the units of a circuit are
trimmed one after another as one kind, in one book, so that each learns from those before it. With
``--past-the-stop`` a part of each unit is so far off that its best setting is at an end stop.
"""

from __future__ import annotations

import argparse
import tempfile
from pathlib import Path

import numpy as np

from tests.circuits.closed_loop import PAST_THE_STOP, bench_of, reached
from tests.circuits.netlist import CIRCUITS
from tests.circuits.optimum import optimum
from tests.circuits.person import trim_by_the_command


def main() -> int:
    """Run the trials and print what came of each; status 1 where one did not reach its best."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("seeds", type=int, nargs="?", default=10, help="units of each circuit")
    parser.add_argument("--kind", action="store_true", help="units of a circuit share a memory")
    parser.add_argument("--past-the-stop", action="store_true", help="units that end at a stop")
    parser.add_argument("--circuit", choices=CIRCUITS, action="append", help="only this one")
    options = parser.parse_args()
    turns, failed = [], []
    with tempfile.TemporaryDirectory(prefix="closed-loop-") as room:
        for circuit in options.circuit or (PAST_THE_STOP if options.past_the_stop else CIRCUITS):
            more = ("--kind", circuit, "--book", f"{room}/{circuit}.db") if options.kind else ()
            for seed in range(options.seeds):
                bench = bench_of(
                    circuit, seed, clean=seed % 10 == 9, past_the_stop=options.past_the_stop
                )
                best = optimum(bench.unit)
                folder = Path(room) / f"{circuit}-{seed}"
                folder.mkdir()
                outcome = trim_by_the_command(bench, folder, *more)
                good = reached(outcome, best)
                turns.append(outcome.turns)
                verdict = (outcome.done or {}).get("verdict", f"status {outcome.status}")
                print(
                    f"{circuit:22} {seed:3} best {100 * best.thd:.3f} % ended {100 * outcome.thd:.3f} %"
                    f" after {outcome.turns:2} turns, {verdict}{'' if good else '  NOT REACHED'}",
                    flush=True,
                )
                if not good:
                    failed.append(outcome)
                    print(outcome.told(), flush=True)
    print(
        f"{len(turns)} trials, {len(failed)} not reached; turns until done: median"
        f" {np.median(turns):g}, 95th percentile {np.percentile(turns, 95):g}, most {max(turns)}"
    )
    return 1 if failed else 0


if __name__ == "__main__":
    raise SystemExit(main())
