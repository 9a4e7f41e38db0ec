"""The closed loop at full size: ``python -m tests.campaigns.closed_loop [SEEDS] [OPTION ...]``.

For each circuit and seed: a unit as it comes is trimmed through the real command, on captures of
the simulator. About four seconds a trial on one core. With ``--kind`` the units of a circuit are
trimmed one after another as one kind, in one book, so that each learns from those before it; with
``--turned-about`` too, both trims of the last one turn the other way. With ``--past-the-stop`` a
part of each unit is so far off that its best setting is at an end stop. With ``--clean`` all
captures are as the simulator gives them, else every tenth unit's.
"""

from __future__ import annotations

import argparse
import tempfile
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from tests.circuits.closed_loop import PAST_THE_STOP, bench_of, reached
from tests.circuits.maps import Best
from tests.circuits.netlist import CIRCUITS
from tests.circuits.optimum import optimum
from tests.circuits.person import Bench, Outcome, trim_by_the_command


@dataclass(frozen=True, slots=True)
class Trial:
    """One unit, trimmed."""

    best: Best
    """What its trims can reach."""
    outcome: Outcome
    """What came of it."""

    @property
    def good(self) -> bool:
        """Whether it was reached."""
        return reached(self.outcome, self.best)

    def told(self, circuit: str, seed: int) -> str:
        """Give it in a line, or in some more where it failed."""
        outcome = self.outcome
        verdict = (outcome.done or {}).get("verdict", f"status {outcome.status}")
        line = (
            f"{circuit:22} {seed:3} best {100 * self.best.thd:.3f} % ended {100 * outcome.thd:.3f} %"
            f" after {outcome.turns:2} turns, {verdict}"
        )
        return line if self.good else f"{line}  NOT REACHED\n{outcome.told()}"


def bench(circuit: str, seed: int, options: argparse.Namespace) -> Bench:
    """Find a unit; those of one kind are wired alike, but for one that may be turned about."""
    found = bench_of(
        circuit,
        seed,
        bits=options.bits,
        clean=options.clean or seed % 10 == 9,
        past_the_stop=options.past_the_stop,
    )
    if not options.kind:
        return found
    first = bench_of(circuit, 0)
    way = -1 if options.turned_about and seed == options.seeds - 1 else 1
    senses = (way * first.senses[0], way * first.senses[1])
    return replace(found, senses=senses, swapped=first.swapped)


def trial(circuit: str, seed: int, options: argparse.Namespace, room: Path) -> Trial:
    """Trim one unit in a folder of its own under `room`."""
    found = bench(circuit, seed, options)
    more = ("--kind", circuit, "--book", str(room / f"{circuit}.db")) if options.kind else ()
    folder = room / f"{circuit}-{seed}"
    folder.mkdir()
    return Trial(optimum(found.unit), trim_by_the_command(found, folder, *more))


def main() -> int:
    """Run the trials and print what came of each; status 1 where one did not reach its best."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("seeds", type=int, nargs="?", default=10, help="units of each circuit")
    parser.add_argument("--kind", action="store_true", help="units of a circuit share a memory")
    parser.add_argument("--turned-about", action="store_true", help="the last of a kind is")
    parser.add_argument("--past-the-stop", action="store_true", help="units that end at a stop")
    parser.add_argument("--bits", type=int, default=8, help="of the captures (8)")
    parser.add_argument("--clean", action="store_true", help="captures without noise")
    parser.add_argument("--circuit", choices=CIRCUITS, action="append", help="only this one")
    options = parser.parse_args()
    names = options.circuit or (PAST_THE_STOP if options.past_the_stop else CIRCUITS)
    trials = []
    with tempfile.TemporaryDirectory(prefix="closed-loop-") as room:
        for circuit in names:
            for seed in range(options.seeds):
                trials.append(trial(circuit, seed, options, Path(room)))
                print(trials[-1].told(circuit, seed), flush=True)
    turns = [one.outcome.turns for one in trials]
    failed = sum(not one.good for one in trials)
    print(
        f"{len(trials)} trials, {failed} not reached; turns until done: median"
        f" {np.median(turns):g}, 95th percentile {np.percentile(turns, 95):g}, most {max(turns)}"
    )
    return 1 if failed else 0


if __name__ == "__main__":
    raise SystemExit(main())
