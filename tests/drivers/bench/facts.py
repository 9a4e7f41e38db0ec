"""What a unit of the bench does, figure by figure, and what such shapers were seen to do.

The wanted figures are what a circuit simulator showed for sine shapers of other make-up (networks
of breakpoints, of diodes, a differential pair), except where a closed form is named. They are
aims for the bench's median unit; `allowed` is what the test lets through.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from itertools import product

import numpy as np
from numpy.typing import NDArray

from drivers.bench.parts import WARM_C, Parts, draw
from drivers.bench.unit import best, crest_frame, period, thd

HZ = 1000.0
Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Fact:
    """One figure of a unit."""

    name: str
    """What it is, with its unit."""
    aim: str
    """What is wanted, in words."""
    allowed: tuple[float, float]
    """Where the fleet's median must lie."""
    extremes: tuple[float, float]
    """Where every unit's figure must lie."""


SIMULATED = "a circuit simulator, sine shapers of our own"
FACTS = (
    Fact("best THD, %", "0.2 to 0.7", (0.2, 0.7), (0.1, 0.8)),
    Fact("THD with both trims at half travel, %", "0.3 to 2.5", (0.3, 2.5), (0.2, 2.6)),
    Fact("THD in the worst corner, %", "6 to 8", (6.0, 8.0), (5.8, 8.2)),
    Fact("wiper at the best, upper", "inside", (0.35, 0.7), (0.15, 0.85)),
    Fact("wiper at the best, lower", "inside", (0.35, 0.7), (0.15, 0.85)),
    Fact("angle between the columns, degrees", "120", (118.0, 122.0), (117.0, 123.0)),
    Fact("condition number of the columns", "1.75", (1.7, 1.8), (1.65, 1.85)),
    Fact("skew over crest part of a column, %", "0.02 to 0.2", (0.02, 0.2), (0.0, 0.25)),
    Fact("c2 per 1 % of travel, 1e-4", "5.4", (4.9, 5.9), (4.5, 6.3)),
    Fact("c3 per 1 % of travel, 1e-4", "3.1", (2.8, 3.4), (2.5, 3.7)),
    Fact("c4 per 1 % of travel, 1e-4", "1.8", (1.6, 2.0), (1.4, 2.2)),
    Fact("c5 per 1 % of travel, 1e-4", "1.0", (0.85, 1.15), (0.75, 1.3)),
    Fact("c6 per 1 % of travel, 1e-4", "0.7", (0.55, 0.8), (0.5, 0.9)),
    Fact("c7 per 1 % of travel, 1e-4", "0.5", (0.4, 0.6), (0.35, 0.7)),
    Fact("linear model's error after 5 % of travel, %", "2 to 6", (2.0, 6.0), (1.0, 6.0)),
    Fact("linear model's error after 10 % of travel, %", "4 to 11", (4.0, 11.0), (2.5, 11.0)),
    Fact("linear model's error after 25 % of travel, %", "9 to 26", (9.0, 26.0), (6.0, 26.0)),
    Fact("upper trim on the lower half, DC-coupled, %", "2 to 5", (2.0, 5.2), (2.0, 5.6)),
    Fact("the same once normalised, %", "36 to 39", (28.0, 40.0), (25.0, 45.0)),
    Fact("triangle +1 %: optimum, upper, % of travel", "4 to 5", (3.6, 5.0), (3.2, 5.5)),
    Fact("triangle +1 %: optimum, lower, % of travel", "4 to 5", (3.6, 5.0), (3.2, 5.5)),
    Fact("offset 20 mV: optimum, upper, % of travel", "2.6", (2.3, 3.2), (2.0, 3.6)),
    Fact("offset 20 mV: optimum, lower, % of travel", "-2.6", (-3.2, -2.3), (-3.6, -2.0)),
    Fact("+10 K: optimum, upper, % of travel", "0 to 4", (0.5, 4.0), (0.0, 4.0)),
    Fact("+10 K: optimum, lower, % of travel", "0 to 4", (0.5, 4.0), (0.0, 4.0)),
    Fact("+10 K: c3, 1e-4", "up to 17", (5.0, 17.0), (2.0, 17.0)),
    Fact("+10 K: all other parts, 1e-4", "less than c3", (0.0, 6.0), (0.0, 8.0)),
    Fact("s3 at 100 Hz, 1e-4", "-0.3", (-0.4, -0.2), (-0.5, -0.1)),
    Fact("s3 at 1 kHz, 1e-4", "-2.9", (-3.2, -2.5), (-3.8, -1.8)),
    Fact("s3 at 10 kHz, 1e-4", "-30", (-37.0, -27.0), (-42.0, -22.0)),
    Fact("s3 at 18 kHz, 1e-4", "-140 to -220", (-220.0, -140.0), (-235.0, -140.0)),
    Fact("c3 at 18 kHz, 1e-4", "up to 292", (50.0, 292.0), (20.0, 330.0)),
    Fact("THD at 18 kHz, %", "1.9 to 3.9", (1.9, 3.9), (1.6, 4.3)),
    Fact("best at 18 kHz less best at 1 kHz, %", "no trim cures it", (1.0, 4.0), (0.8, 4.5)),
    Fact(
        "blind minimiser at 18 kHz moves the trims by, %", "to the stops", (12.0, 60.0), (5.0, 70.0)
    ),
    # Closed form: s_2k = (4 / pi) delta 8k / (4 k^2 - 1)^2, Fourier series of a leaning sine.
    Fact("s2 per duty error", "1.132", (1.125, 1.135), (1.12, 1.14)),
    # That holds for a pure sine; here c3 and c5 of some 15e-4 lean as well and reach into s4.
    Fact("s4 per duty error", "0.0905", (0.080, 0.106), (0.070, 0.115)),
    Fact("best at 49.5/50.5, %", "0.65 to 0.75", (0.57, 0.80), (0.55, 0.85)),
    Fact("best at 48/52, %", "2.3", (2.2, 2.4), (2.2, 2.4)),
)


def seen(parts: Parts) -> dict[str, float]:
    """Measure one unit, without noise.

    Parameters
    ----------
    parts
        The unit.

    Returns
    -------
    dict
        The figures of `FACTS`, by name.
    """
    optimum = best(parts, HZ)
    figures = _levels(parts) | _columns(parts, optimum.wipers)
    figures["best THD, %"] = 100.0 * optimum.thd
    figures["wiper at the best, upper"], figures["wiper at the best, lower"] = optimum.wipers
    return (
        figures
        | _coupling(parts, optimum.wipers)
        | _drifts(parts, optimum.wipers)
        | _frequencies(parts, optimum.wipers, optimum.thd)
        | _duty(parts, optimum.wipers)
    )


def fleet(seeds: Iterable[int]) -> dict[str, Array]:
    """Measure a fleet: each figure over the units."""
    units = [seen(draw(seed)) for seed in seeds]
    return {fact.name: np.array([unit[fact.name] for unit in units]) for fact in FACTS}


def _vector(parts: Parts, wipers: tuple[float, float], hz: float = HZ) -> Array:
    z = crest_frame(period(parts, wipers, hz))
    return np.concatenate([z.real, -z.imag])


def _levels(parts: Parts) -> dict[str, float]:
    corners = [thd(period(parts, wipers, HZ)) for wipers in product((0.0, 1.0), repeat=2)]
    half = thd(period(parts, (0.5, 0.5), HZ))
    return {
        "THD with both trims at half travel, %": 100.0 * half,
        "THD in the worst corner, %": 100.0 * max(corners),
    }


def _columns(parts: Parts, at: tuple[float, float]) -> dict[str, float]:
    """The two columns at the best setting, and how far a straight line through it holds."""
    step = 0.005
    columns = []
    for axis in range(2):
        ahead, behind = list(at), list(at)
        ahead[axis] += step
        behind[axis] -= step
        rise = _vector(parts, (ahead[0], ahead[1])) - _vector(parts, (behind[0], behind[1]))
        columns.append(rise / (2.0 * step))
    jacobian = np.array(columns).T
    lengths = np.linalg.norm(jacobian, axis=0)
    singular = np.linalg.svd(jacobian / lengths, compute_uv=False)
    cosine = jacobian[:, 0] @ jacobian[:, 1] / np.prod(lengths)
    orders = jacobian.shape[0] // 2
    even = _even_column(parts, at, step)
    figures = {
        "angle between the columns, degrees": float(np.degrees(np.arccos(cosine))),
        "condition number of the columns": float(singular[0] / singular[1]),
        "skew over crest part of a column, %": 100.0 * even,
    }
    for k in range(2, 8):
        size = abs(jacobian[k - 2, 0]) * 0.01 * 1e4
        figures[f"c{k} per 1 % of travel, 1e-4"] = float(size)
    assert orders >= 6
    here = _vector(parts, at)
    for share in (0.05, 0.10, 0.25):
        errors = []
        for move in ((share, 0.0), (-share, 0.0), (0.0, share), (0.0, -share)):
            true = _vector(parts, (at[0] + move[0], at[1] + move[1])) - here
            errors.append(np.linalg.norm(true - jacobian @ move) / np.linalg.norm(true))
        name = f"linear model's error after {100 * share:.0f} % of travel, %"
        figures[name] = 100.0 * float(np.median(errors))
    return figures


def _even_column(parts: Parts, at: tuple[float, float], step: float) -> float:
    """Skew over crest part of the upper trim's column, at even duty."""
    even = replace(parts, rise_share=0.5)
    ahead = crest_frame(period(even, (at[0] + step, at[1]), HZ))
    column = ahead - crest_frame(period(even, (at[0] - step, at[1]), HZ))
    return float(np.linalg.norm(column.imag) / np.linalg.norm(column.real))


def _coupling(parts: Parts, at: tuple[float, float]) -> dict[str, float]:
    """How much the upper trim moves of the lower half wave, over what it moves of the upper."""
    before, after = period(parts, at, HZ), period(parts, (at[0] + 0.02, at[1]), HZ)

    def across(change: Array) -> float:
        upper = before > 0.0
        return 100.0 * float(np.abs(change[~upper]).max() / np.abs(change[upper]).max())

    def normal(wave: Array) -> Array:
        fundamental = 2.0 * abs(np.fft.rfft(wave)[1]) / wave.size
        return (wave - wave.mean()) / fundamental

    return {
        "upper trim on the lower half, DC-coupled, %": across(after - before),
        "the same once normalised, %": across(normal(after) - normal(before)),
    }


def _drifts(parts: Parts, at: tuple[float, float]) -> dict[str, float]:
    """Where the best setting goes, in the sense that lets the crests grow less pointed (plus)."""

    def moved(other: Parts, temperature_c: float = WARM_C) -> Array:
        return 100.0 * (np.array(best(other, HZ, temperature_c).wipers) - at)

    larger = -moved(replace(parts, triangle_v=1.01 * parts.triangle_v))
    shifted = -moved(replace(parts, offset_v=parts.offset_v + 0.020))
    hotter = -moved(parts, WARM_C + 10.0)
    change = crest_frame(period(parts, at, HZ, WARM_C + 10.0)) - crest_frame(period(parts, at, HZ))
    return {
        "triangle +1 %: optimum, upper, % of travel": float(larger[0]),
        "triangle +1 %: optimum, lower, % of travel": float(larger[1]),
        "offset 20 mV: optimum, upper, % of travel": float(shifted[0]),
        "offset 20 mV: optimum, lower, % of travel": float(shifted[1]),
        "+10 K: optimum, upper, % of travel": float(hotter[0]),
        "+10 K: optimum, lower, % of travel": float(hotter[1]),
        "+10 K: c3, 1e-4": 1e4 * float(abs(change[1].real)),
        "+10 K: all other parts, 1e-4": 1e4 * float(np.linalg.norm(np.delete(change, 1))),
    }


def _frequencies(parts: Parts, at: tuple[float, float], best_thd: float) -> dict[str, float]:
    figures = {}
    for hertz, name in ((1e2, "100 Hz"), (1e3, "1 kHz"), (1e4, "10 kHz"), (18e3, "18 kHz")):
        z = crest_frame(period(parts, at, hertz))
        figures[f"s3 at {name}, 1e-4"] = -1e4 * float(z[1].imag)
    fast = best(parts, 18e3)
    return figures | {
        "c3 at 18 kHz, 1e-4": 1e4 * float(z[1].real),
        "THD at 18 kHz, %": 100.0 * float(np.linalg.norm(z)),
        "best at 18 kHz less best at 1 kHz, %": 100.0 * (fast.thd - best_thd),
        "blind minimiser at 18 kHz moves the trims by, %": 100.0
        * float(np.mean(np.array(fast.wipers) - at)),
    }


def _duty(parts: Parts, at: tuple[float, float]) -> dict[str, float]:
    delta = 0.005
    wave: Callable[[float], Array] = lambda rise: period(  # noqa: E731
        replace(parts, rise_share=rise), at, HZ
    )
    slope = -(crest_frame(wave(0.5 + delta)) - crest_frame(wave(0.5 - delta))).imag / (2.0 * delta)
    return {
        "s2 per duty error": float(slope[0]),
        "s4 per duty error": float(slope[2]),
        "best at 49.5/50.5, %": 100.0 * best(replace(parts, rise_share=0.495), HZ).thd,
        "best at 48/52, %": 100.0 * best(replace(parts, rise_share=0.48), HZ).thd,
    }
