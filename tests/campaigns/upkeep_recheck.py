"""Whether rechecks call what changed, leave what did not, and advise the turns that set it right.

Run ``nice python -m tests.campaigns.upkeep_recheck [rechecks] [units]`` (2000 and 60 by default). The
first half plays readings of one unit through one input, unchanged and changed by four standard
uncertainties of the change of THD, in turn along each of several ways a wave can change. The second half
trims simulated circuits, lets them age or be disturbed, and makes the turns that are advised. The tests
run the same code with fewer.
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from drivers.bench.parts import Parts, draw
from drivers.bench.unit import best, crest_frame, period
from tests.fleet.readings import Scope
from trimmer.guidance import Learned
from trimmer.guidance.field import FEATURES
from trimmer.measurement import Reading, combine
from trimmer.measurement.combine import with_parts
from trimmer.upkeep.changes import changes, is_called, is_doubtful
from trimmer.upkeep.recheck import Verdict, rechecked

Array = NDArray[np.float64]
HERTZ = 1000.0
FIRST, MORE = 4, 24
"""Captures of the command's first and longer reading."""
LOGGED = 12
"""Captures of a sheet's final reading."""


def read(scope: Scope, true: Array, frames: int) -> Reading:
    """Combine so many captures, all figures made from their parts."""
    taken = []
    for _ in range(frames):
        one = scope.read(true)
        power = float(np.trace(one.random_covariance))
        one = replace(one, noise_power=power)
        taken.append(with_parts(one, one.parts, one.covariance, one.systematic))
    return combine(taken)


def recheck_called(scope: Scope, logged: Reading, true: Array) -> bool:
    """Recheck as the command does: longer where it is doubtful."""
    now = read(scope, true, FIRST)
    found = changes(now, logged, same_input=True)
    if is_doubtful(found):
        now = combine([now, read(scope, true, MORE)])
        found = changes(now, logged, same_input=True)
    return is_called(found)


@dataclass(frozen=True, slots=True)
class Calls:
    """How many of so many rechecks called a change."""

    called: int
    """Called."""
    rechecks: int
    """Of so many."""

    @property
    def share(self) -> float:
        """Called, share."""
        return self.called / self.rechecks


def thd_change(true: Array, size: float, way: Array) -> Array:
    """Change the parts along `way` until THD has risen by `size`."""
    unit = way / np.linalg.norm(way)
    along = float(true @ unit)
    wanted = (float(np.linalg.norm(true)) + size) ** 2 - float(true @ true)
    return true + (np.sqrt(along**2 + wanted) - along) * unit


def ways(rng: np.random.Generator, true: Array) -> Array:
    """Give a way in which a wave may change: as a trim does, as warming does, or as it is."""
    k = np.repeat(np.arange(2, 16), 2)
    crest = np.where(np.arange(28) % 2 == 0, (2.0 / k) ** 1.5, 0.05 * (2.0 / k) ** 1.5)
    way = crest * rng.standard_normal(28)
    way = way if rng.random() < 0.7 else true
    return np.asarray(way * (1.0 if float(way @ true) >= 0.0 else -1.0))


def trials(rechecks: int, sigmas: float, logged_frames: int = LOGGED) -> Calls:
    """Recheck so often, changed by so many standard uncertainties of the change of THD."""
    called = 0
    for seed in range(rechecks):
        rng = np.random.default_rng((seed, 71))
        scope = Scope(rng)
        k = np.repeat(np.arange(2, 16), 2)
        true = 0.004 * rng.standard_normal(28) * (2.0 / k) * np.where(np.arange(28) % 2, 0.2, 1.0)
        logged = read(scope, true, logged_frames)
        if sigmas:
            usual = changes(read(scope, true, FIRST), logged, same_input=True)[0].sigma
            called += recheck_called(
                scope, logged, thd_change(true, sigmas * usual, ways(rng, true))
            )
        else:
            called += recheck_called(scope, logged, true)
    return Calls(called, rechecks)


# -- the turns that are advised --------------------------------------------------------------------


def parts_of(parts: Parts, wipers: Array, warm_c: float = 42.0) -> Array:
    """Give crest and skew parts of a circuit at a setting, without noise; shape (28,)."""
    z = crest_frame(period(parts, (float(wipers[0]), float(wipers[1])), HERTZ, warm_c))
    return np.column_stack((z.real, -z.imag)).ravel()


def taught(parts: Parts, at: Array, rng: np.random.Generator) -> Learned:
    """Give what a unit taught around a setting: its field with a hand's errors of scale."""
    step = 0.02
    h = parts_of(parts, at)
    e = np.eye(2) * step
    plus = [parts_of(parts, at + e[i]) for i in (0, 1)]
    minus = [parts_of(parts, at - e[i]) for i in (0, 1)]
    both = parts_of(parts, at + e[0] + e[1])
    weights = np.zeros((28, FEATURES))
    weights[:, 0] = h
    weights[:, 1] = (plus[0] - minus[0]) / (2 * step)
    weights[:, 2] = (plus[1] - minus[1]) / (2 * step)
    weights[:, 3] = (plus[0] - 2 * h + minus[0]) / step**2
    weights[:, 5] = (plus[1] - 2 * h + minus[1]) / step**2
    weights[:, 4] = (both - plus[0] - plus[1] + h) / step**2
    scales = 1.0 + 0.05 * rng.standard_normal(2)  # how far the hand really turned is never known
    weights[:, 1:3] *= scales
    weights[:, 3:6] *= np.array((scales[0] ** 2, scales[0] * scales[1], scales[1] ** 2))
    sigma = np.full(weights.shape, 1e-4)
    return Learned(15, weights, sigma, np.full((2, 28), 1e-3), 0.75, HERTZ)


def aged(parts: Parts, rng: np.random.Generator) -> Parts:
    """Let a unit's parts age: resistors by a fraction of a percent, junctions by a millivolt or so."""
    return replace(
        parts,
        triangle_v=parts.triangle_v * (1.0 + 0.006 * float(rng.standard_normal())),
        offset_v=parts.offset_v + 0.008 * float(rng.standard_normal()),
        knees_v=tuple(v + 0.002 * float(rng.standard_normal()) for v in parts.knees_v),
        branches_ohm=tuple(
            r * (1 + 0.003 * float(rng.standard_normal())) for r in parts.branches_ohm
        ),
    )


@dataclass(frozen=True, slots=True)
class Retrimmed:
    """One unit, changed and rechecked."""

    verdict: Verdict
    """What was said."""
    before: float
    """True THD before the turns."""
    after: float
    """True THD after them."""
    best: float
    """True best."""
    turns: int
    """Turns advised."""

    @property
    def reached(self) -> bool:
        """Within max(5 %, 0.02 points) of the best."""
        return self.after <= self.best + max(0.05 * self.best, 2e-4)


Disturb = Callable[[Parts, Array, np.random.Generator], tuple[Parts, Array]]


def by_hand(parts: Parts, at: Array, rng: np.random.Generator) -> tuple[Parts, Array]:
    """Let somebody turn one trim or both by up to a tenth of the travel."""
    return parts, np.clip(at + rng.uniform(-0.1, 0.1, 2) * (rng.random(2) < 0.7), 0.02, 0.98)


def by_age(parts: Parts, at: Array, rng: np.random.Generator) -> tuple[Parts, Array]:
    """Let the unit age."""
    return aged(parts, rng), at


def retrimmed(seed: int, disturb: Disturb) -> Retrimmed:
    """Trim a unit, change it, recheck it and make the turns that are advised, exactly."""
    rng = np.random.default_rng((seed, 72))
    scope = Scope(rng)
    parts = draw(seed)
    at = np.array(best(parts, HERTZ).wipers)
    logged = read(scope, parts_of(parts, at), LOGGED)
    learned = taught(parts, at, rng)
    parts, at = disturb(parts, at, rng)
    now = read(scope, parts_of(parts, at), FIRST)
    found = rechecked(now, logged, same_input=True, learned=learned)
    before = float(np.linalg.norm(parts_of(parts, at)))
    for turn in found.advice:
        share = turn.turns / 0.75 * (1.0 if turn.sense == "clockwise" else -1.0)
        at = at + share * np.array((turn.trim == "upper", turn.trim == "lower"))
    after = float(np.linalg.norm(parts_of(parts, np.clip(at, 0.0, 1.0))))
    return Retrimmed(found.verdict, before, after, best(parts, HERTZ).thd, len(found.advice))


def main() -> int:
    """Print the figures."""
    rechecks = int(sys.argv[1]) if len(sys.argv) > 1 else 2000
    units = int(sys.argv[2]) if len(sys.argv) > 2 else 60
    for frames in (8, LOGGED, 32):
        still = trials(rechecks, 0.0, frames)
        moved = trials(rechecks, 4.0, frames)
        print(
            f"sheet of {frames} captures: nothing changed, called {100 * still.share:.2f} %; changed "
            f"by 4 standard uncertainties, called {100 * moved.share:.2f} % of {rechecks}",
            flush=True,
        )
    for name, disturb in (("turned by hand", by_hand), ("aged", by_age)):
        found = [retrimmed(seed, disturb) for seed in range(units)]
        said = {v: sum(each.verdict == v for each in found) for v in ("holds", "drifted", "retrim")}
        advised = [each for each in found if each.verdict == "retrim"]
        left = [each for each in found if each.verdict != "retrim"]
        print(
            f"{name}: {said}; reached after the turns {sum(e.reached for e in advised)} of "
            f"{len(advised)}, by {max((e.turns for e in advised), default=0)} turns at most; left alone "
            f"and within reach {sum(e.reached for e in left)} of {len(left)}",
            flush=True,
        )
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
