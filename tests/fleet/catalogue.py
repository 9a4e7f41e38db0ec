"""Every fleet the guidance is tried on: our own solvers, a circuit simulator's units, the bench's.

Only the first one was looked at while the guidance was made; the simulator's units are held out, and so
are the bench's. Units to learn from (`fold` 1) are never units to be tried on (`fold` 2).
"""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.random import Generator

from drivers.bench import parts as bench_parts
from drivers.bench.unit import best as bench_best
from drivers.bench.unit import crest_frame as bench_frame
from drivers.bench.unit import period
from tests.circuits.maps import Map, load_maps
from tests.circuits.netlist import CIRCUITS
from tests.fleet.trials import Trial, run
from tests.fleet.units import KINDS, Unit, draw, pot
from tests.fleet.waves import Vector
from trimmer.guidance import KindPrior

OWN = tuple(KINDS)
SIMULATED = tuple(CIRCUITS)
BENCH = ("bench",)
FLEETS = {"own": OWN, "simulator": SIMULATED, "bench": BENCH}
FIXED_SENSES = (1, -1)
"""How the trims of a kind are wired; without a kind either way."""
LEARNED_FROM = 6
"""Units a kind is learned from."""
BENCH_POINTS = 1024


def unit(kind: str, number: int, *, fold: int = 2, wired: bool = False) -> Unit:
    """Give a unit of a kind.

    Parameters
    ----------
    kind
        A name of one of `FLEETS`.
    number
        Which one: the same unit for the same number.
    fold
        1 for units to learn from, 2 for units to be tried.
    wired
        Whether its trims are wired as all of its kind are.
    """
    senses = FIXED_SENSES if wired else None
    if kind in OWN:
        return draw(kind, np.random.default_rng([fold, number, OWN.index(kind)]), senses)
    rng = np.random.default_rng([fold, number, 77])
    if kind in SIMULATED:
        maps = _maps(kind)
        half = len(maps) // 2
        chosen = maps[:half] if fold == 1 else maps[half:]
        return from_simulator(chosen[number % len(chosen)], rng, senses)
    return from_bench(1000 * fold + number, rng, senses)


@cache
def _maps(kind: str) -> tuple[Map, ...]:
    return load_maps((kind,))


def from_simulator(source: Map, rng: Generator, senses: tuple[int, int] | None) -> Unit:
    """Put trims of our drawing on a unit whose harmonics a circuit simulator computed."""
    best = source.best()
    return Unit(
        kind=source.circuit,
        respond=source.parts,
        pots=(pot(rng, senses and senses[0]), pot(rng, senses and senses[1])),
        known_best=((best.u, best.l), best.thd),
    )


def from_bench(
    seed: int, rng: Generator, senses: tuple[int, int] | None, frequency_hz: float = 1000.0
) -> Unit:
    """Put trims of our drawing on a unit of the simulated bench, warm."""
    drawn = bench_parts.draw(seed)
    best = bench_best(drawn, frequency_hz)

    def respond(upper: float, lower: float) -> Vector:
        wave = period(drawn, (upper, lower), frequency_hz, points=BENCH_POINTS)
        z = bench_frame(wave)
        return np.column_stack((z.real, -z.imag)).ravel()

    return Unit(
        kind="bench",
        respond=respond,
        pots=(pot(rng, senses and senses[0]), pot(rng, senses and senses[1])),
        known_best=(best.wipers, best.thd),
    )


@cache
def prior(kind: str, *, followed: bool = False, units: int = LEARNED_FROM) -> KindPrior:
    """Give what the first units of a kind taught, each trimmed by a hand of the same sort."""
    trials = [learn_from(kind, number, followed) for number in range(units)]
    return KindPrior.from_units([t.learned for t in trials if t.learned is not None])


def learn_from(kind: str, number: int, followed: bool) -> Trial:
    """Trim a unit to learn from."""
    return run(unit(kind, number, fold=1, wired=True), 10_000 + number, followed=followed)
