"""One trial: a unit, a hand, a digitiser and a guide, until the guide is done."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tests.fleet.hands import BLIND, FOLLOWED, start
from tests.fleet.readings import Scope
from tests.fleet.units import Unit
from trimmer.guidance import Guide, KindPrior, Learned
from trimmer.guidance.advice import Advice, Confirm, Done

MOST_TURNS = 25


@dataclass(frozen=True, slots=True)
class Trial:
    """How a trial went."""

    reached: int | None
    """Turns made when THD was first within max(5 %, 0.02 points) of the best; None for never."""
    done: int | None
    """Turns made when the guide was done; None where it was not."""
    best: float
    """Least THD inside the travel, ratio."""
    last: float
    """True THD at the end, ratio."""
    verdict: str
    """The guide's verdict."""
    floors: tuple[tuple[int, float, float], ...]
    """Turn, stated floor and its sigma, for each advice or end that stated one."""
    thds: tuple[float, ...]
    """True THD after each turn, the start first."""
    learned: Learned | None = None
    """What the guide learned."""


def tolerance(best: float) -> float:
    """Give the THD that counts as reached."""
    return best + max(0.05 * best, 0.0002)


def run(
    unit: Unit,
    seed: int,
    *,
    followed: bool = False,
    prior: KindPrior | None = None,
    feels_stop: bool = True,
    nonlinearity_codes: float = 0.05,
) -> Trial:
    """Run a guide on a unit from a random start."""
    rng = np.random.default_rng(seed)
    trims = start(unit, rng)
    scope = Scope(rng, nonlinearity_codes=nonlinearity_codes)
    errors = FOLLOWED if followed else BLIND
    guide = Guide(travel_turns=unit.travel_turns, followed=followed, prior=prior)
    _, best = unit.best()
    thds = [unit.thd(trims.at)]
    floors: list[tuple[int, float, float]] = []
    answer = guide.observe(scope.read(unit.parts(trims.at)))
    turns = 0
    while not isinstance(answer, Done) and turns < MOST_TURNS:
        if isinstance(answer, Confirm):
            answer = guide.observe(scope.read(unit.parts(trims.at), longer=True), longer=True)
        else:
            assert isinstance(answer, Advice)
            sense = 1.0 if answer.sense == "clockwise" else -1.0
            share = errors.made(sense * answer.turns / unit.travel_turns, unit.travel_turns, rng)
            met = trims.turn(0 if answer.trim == "upper" else 1, share)
            turns += 1
            thds.append(unit.thd(trims.at))
            reading = scope.read(unit.parts(trims.at))
            answer = guide.at_stop(reading) if met and feels_stop else guide.observe(reading)
        floor = guide.floor
        if floor is not None:
            floors.append((turns, *floor))
    goal = tolerance(best)
    within = [i for i, thd in enumerate(thds) if thd <= goal]
    return Trial(
        reached=within[0] if within else None,
        done=turns if isinstance(answer, Done) else None,
        best=best,
        last=thds[-1],
        verdict=answer.verdict if isinstance(answer, Done) else "",
        floors=tuple(floors),
        thds=tuple(thds),
        learned=guide.learned(),
    )
