"""Compute the table behind the intervals of THD: the confidence belt of a noncentral chi-square.

Construction by likelihood ratio (Feldman, Cousins, *Unified approach to the classical statistical
analysis of small signals*, Phys. Rev. D 57 (1998) 3873): for each true length ``mu`` the region of
``y`` with the largest ratio ``p(y | mu) / max_m p(y | m)`` that holds 95 %.

Run ``python -m tests.campaigns.measurement_belt`` to write ``trimmer/measurement/belt_table.py``.
"""

from __future__ import annotations

import math
import textwrap
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import chndtr, gammaln, ive

Array = NDArray[np.float64]

FREEDOMS = (1, 2, 3, 4, 6, 8, 12, 16, 22, 28, 40, 56, 80, 126, 200, 400)
LENGTHS = (
    *np.arange(0.0, 7.0, 0.25),
    *np.arange(7.0, 12.0, 0.5),
    12.0,
    14.0,
    17.0,
    20.0,
    26.0,
    40.0,
)
COVERAGE = 0.95


def log_bessel(order: float, z: Array) -> Array:
    """Logarithm of the modified Bessel function, safe where it underflows.

    Above order 12 the uniform expansion of DLMF 10.41.3 with four terms (error below 1e-8).
    """
    z = np.maximum(np.asarray(z, dtype=float), 1e-12)
    if order < 12.0:
        return np.log(ive(order, z)) + z
    r = z / order
    root = np.sqrt(1.0 + r * r)
    p = 1.0 / root
    eta = root + np.log(r / (1.0 + root))
    series = (
        1.0
        + (3 * p - 5 * p**3) / 24 / order
        + (81 * p**2 - 462 * p**4 + 385 * p**6) / 1152 / order**2
        + (30375 * p**3 - 369603 * p**5 + 765765 * p**7 - 425425 * p**9) / 414720 / order**3
    )
    return order * eta - 0.5 * np.log(2 * math.pi * order * root) + np.log(series)


def log_density(y: Array, length: Array | float, freedom: float) -> Array:
    """Logarithm of the noncentral chi-square density with noncentrality ``length ** 2``."""
    length = np.asarray(length, dtype=float)
    order = 0.5 * freedom - 1.0
    far = np.maximum(length, 1e-6)
    z = far * np.sqrt(y)
    general = (
        -0.5 * (y + far**2)
        + 0.5 * order * (np.log(y) - 2 * np.log(far))
        + log_bessel(order, z)
        - math.log(2.0)
    )
    central = order * np.log(y) - 0.5 * y - 0.5 * freedom * math.log(2.0) - gammaln(0.5 * freedom)
    return np.where(length < 1e-5, central, general)


def best_lengths(y: Array, freedom: float) -> Array:
    """Most likely length for each `y`, by golden section on the logarithm of the density."""
    low, high = np.zeros_like(y), np.sqrt(y) + 1.0
    ratio = 0.5 * (math.sqrt(5.0) - 1.0)
    for _ in range(70):
        a, b = high - ratio * (high - low), low + ratio * (high - low)
        left = log_density(y, a, freedom) > log_density(y, b, freedom)
        low, high = np.where(left, low, a), np.where(left, b, high)
    middle = 0.5 * (low + high)
    # y <= freedom: the density falls from 0 on
    return np.where(log_density(y, middle, freedom) > log_density(y, 0.0, freedom), middle, 0.0)


def acceptance(freedom: float, lengths: tuple[float, ...] = LENGTHS) -> Array:
    """Shape (len(lengths), 2): square roots of both ends of the accepted region of ``y``."""
    root = np.linspace(0.01, math.sqrt(freedom) + lengths[-1] + 8.0, 6000)
    y = root**2
    best = log_density(y, best_lengths(y, freedom), freedom)
    rows = []
    for length in lengths:
        ratio = log_density(y, length, freedom) - best
        top = int(np.argmax(ratio))

        def ends(level: float, ratio: Array = ratio, top: int = top) -> tuple[float, float]:
            rising = np.maximum.accumulate(ratio[: top + 1])
            low = 0.0 if ratio[0] >= level else float(np.interp(level, rising, root[: top + 1]))
            falling = np.maximum.accumulate(-ratio[top:])
            return low, float(np.interp(-level, falling, root[top:]))

        def surplus(level: float, length: float = length, ends=ends) -> float:  # type: ignore[no-untyped-def]
            low, high = ends(level)
            held = chndtr(high**2, freedom, length**2) - chndtr(low**2, freedom, length**2)
            return float(held) - COVERAGE

        rows.append(ends(brentq(surplus, -12.0, -1e-9, xtol=1e-10)))
    return np.array(rows)


def table() -> dict[int, Array]:
    """Ends of the accepted region for all tabulated degrees of freedom."""
    return {freedom: acceptance(float(freedom)) for freedom in FREEDOMS}


HEAD = '''"""The confidence belt behind the intervals of THD.

The numbers are made by `tests.campaigns.measurement_belt`. For each number of degrees of freedom and
each true length they are the square roots of the least and of the largest ``y`` accepted at 95 %, in
units of the standard deviation of one part.
"""

from __future__ import annotations

# fmt: off
'''


def _row(values: Array, form: str) -> str:
    return textwrap.fill(
        ", ".join(format(v, form) for v in values),
        width=100,
        initial_indent="    ",
        subsequent_indent="    ",
    )


def render(values: dict[int, Array]) -> str:
    """Write the table as a module."""
    freedoms = _row(np.array(list(values)), "d")
    lines = [HEAD, f"FREEDOMS = (\n{freedoms},\n)\n"]
    lines.append(f"LENGTHS = (\n{_row(np.array(LENGTHS), 'g')},\n)\n")
    for name, column in (("LEAST", 0), ("LARGEST", 1)):
        rows = (f"    (\n{_row(rows[:, column], '.4f')},\n    ),\n" for rows in values.values())
        lines.append(f"{name} = (\n{''.join(rows)})\n")
    lines.append("# fmt: on\n")
    return "".join(lines)


if __name__ == "__main__":
    place = Path(__file__).parents[2] / "trimmer" / "measurement" / "belt_table.py"
    place.write_text(render(table()), encoding="utf-8")
