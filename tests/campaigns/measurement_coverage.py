"""Whether stated uncertainties hold, and how near they are to the Cramer-Rao bound.

Run ``python -m tests.campaigns.measurement_coverage [records]`` (10 000 by default) for the table;
the tests run the same code with fewer records.
"""

from __future__ import annotations

import math
import sys
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tests.campaigns.measurement_belt import acceptance
from tests.measurement.waves import Wave, fisher_bound, parts_of
from trimmer.measurement import Digitiser, measure

Array = NDArray[np.float64]

SHAPED = parts_of(
    k2=0.004 - 0.002j,
    k3=-0.006 + 0.001j,
    k4=0.002 - 0.0007j,
    k5=0.003,
    k7=-0.0015,
    k9=0.0007j,
    k15=0.0004,
)
"""A sine shaper's wave, invented, THD 0.9 %."""
COARSE = parts_of(k2=0.05 - 0.03j, k3=-0.1 + 0.02j, k5=0.05, k7=-0.03 + 0.04j, k11=0.02)
"""A badly trimmed wave, invented, THD 14 %."""
CLEAN = np.zeros(28)
FAINT = parts_of(k2=3e-4, k3=2e-4j)
"""A wave, invented, whose THD is three times the standard deviation of one part."""


@dataclass(frozen=True, eq=False)
class Case:
    """A kind of record."""

    name: str
    parts: Array
    cycles: float
    samples: int
    sigma: float
    """Noise over the fundamental's peak."""
    bits: int | None = None
    """Rounded to so many bits over 1.1 times the peak; None for none."""


CASES = (
    Case("5 cycles", SHAPED, 5.37, 2000, 0.005),
    Case("8 cycles", SHAPED, 8.31, 10000, 0.003),
    Case("30 cycles", SHAPED, 30.73, 4000, 0.01),
    Case("250 cycles", SHAPED, 250.61, 10000, 0.02),
    Case("coarse wave", COARSE, 6.62, 3000, 0.005),
    Case("near zero", CLEAN, 10.4, 4000, 0.005),
    Case("faint", FAINT, 9.6, 4000, 0.005),
    Case("8 bits", SHAPED, 10.37, 10000, 0.5 * 2.2 / 256, 8),
    Case("8 bits, 5 cycles", COARSE, 5.21, 5000, 0.6 * 2.2 / 256, 8),
    Case("8 bits, near zero", CLEAN, 12.7, 10000, 0.5 * 2.2 / 256, 8),
)


@dataclass(frozen=True)
class Outcome:
    """What came of many records of one kind."""

    name: str
    spread_parts: float
    """Root mean square, over the parts, of standard deviation over bound."""
    worst_spread: float
    """Largest of those."""
    spread_w: float
    bias: float
    """Largest mean error of a part, or of the frequency, over its standard deviation."""
    cover_parts: float
    """Share of the 95 % intervals that hold the true part, over all parts."""
    cover_least: float
    cover_most: float
    """Least and largest share over the parts."""
    cover_w: float
    cover_thd: float
    width_thd: float
    """Median half width of THD's interval over the exact one of the same construction."""


def run(case: Case, records: int, seed: int) -> Outcome:
    """Take many records of one kind and compare what is stated with what is."""
    rng = np.random.default_rng(seed)
    size = 28
    truth = np.zeros(size)
    truth[: case.parts.size] = case.parts
    w = 2.0 * math.pi * case.cycles / case.samples
    parts, sigmas = np.empty((records, size)), np.empty((records, size))
    frequency, thd = np.empty((records, 2)), np.empty((records, 4))
    code = 2.2 / 2**case.bits if case.bits else 0.0
    digitiser = Digitiser(case.bits, code, nonlinearity_codes=0.0) if case.bits else None
    clean: Array = np.empty(0)
    for i in range(records):
        wave = Wave(case.parts, w, phase=float(rng.uniform(0, 2 * math.pi)), offset=0.01)
        clean = wave.samples(case.samples)
        x = clean + case.sigma * rng.standard_normal(case.samples)
        if case.bits:
            x = (np.floor(x / code) + 0.5) * code
        reading = measure(x, 1.0, digitiser=digitiser)
        parts[i], sigmas[i] = reading.parts, np.sqrt(np.diag(reading.covariance))
        frequency[i] = reading.fundamental_hz, reading.fundamental_sigma_hz
        thd[i] = reading.thd.value, reading.thd.low, reading.thd.high, float(parts[i] @ parts[i])
    noise = math.hypot(case.sigma, code / math.sqrt(12.0))
    bound, bound_w = _bound(case, w, noise)
    bounds = np.sqrt(np.diag(bound))
    error = parts - truth
    error_w = 2 * math.pi * frequency[:, 0] - w
    spread = error.std(axis=0, ddof=1)
    held = np.abs(error) <= 1.96 * sigmas
    true_thd = float(np.linalg.norm(case.parts))
    spread_w = float(error_w.std(ddof=1))
    bias = max(
        float(np.abs(error.mean(axis=0) / spread).max()), abs(float(error_w.mean())) / spread_w
    )
    return Outcome(
        name=case.name,
        spread_parts=float(np.sqrt(np.mean((spread / bounds) ** 2))),
        worst_spread=float((spread / bounds).max()),
        spread_w=spread_w / bound_w,
        bias=bias,
        cover_parts=float(held.mean()),
        cover_least=float(held.mean(axis=0).min()),
        cover_most=float(held.mean(axis=0).max()),
        cover_w=float(np.mean(np.abs(error_w) <= 1.96 * 2 * math.pi * frequency[:, 1])),
        cover_thd=float(np.mean((thd[:, 1] <= true_thd) & (true_thd <= thd[:, 2]))),
        width_thd=float(
            np.median(0.5 * (thd[:, 2] - thd[:, 1])) / exact_half_width(thd[:, 3], truth, bound)
        ),
    )


def _bound(case: Case, w: float, noise: float) -> tuple[Array, float]:
    """Mean over the phase of the inverse Fisher matrix: at few periods it depends on the phase."""
    phases = 2.0 * math.pi * (np.arange(12) + 0.3) / 12.0
    bounds = [
        fisher_bound(Wave(case.parts, w, float(p), 1.0, 0.01), case.samples, 15, noise)
        for p in phases
    ]
    mean: Array = np.mean([covariance for covariance, _ in bounds], axis=0)
    return mean, float(np.sqrt(np.mean([sigma**2 for _, sigma in bounds])))


def exact_half_width(squares: Array, truth: Array, bound: Array) -> float:
    """Median half width that the same observations allow with the noise known exactly.

    The noncentral chi-square of 28 equal variances near zero; far from it the bound's own variance
    along the parts.
    """
    length = float(np.linalg.norm(truth))
    each = float(np.trace(bound)) / truth.size
    along = float(truth @ bound @ truth) / length**2 if length else each
    if length > 20.0 * math.sqrt(each):
        return 1.96 * math.sqrt(along)
    lengths = tuple(np.arange(0.0, 45.0, 0.25))
    ends = acceptance(float(truth.size), lengths)
    root = np.sqrt(squares / each)
    zero = int(np.count_nonzero(ends[:, 0] <= 0.0)) - 1
    high = np.interp(root, ends[zero:, 0], lengths[zero:])
    low = np.interp(root, ends[:, 1], lengths)
    return float(np.median(0.5 * (high - low))) * math.sqrt(each)


HEADING = (
    f"{'case':18s} {'spread/bound':>12s} {'worst':>6s} {'f0':>6s} {'bias':>6s} "
    f"{'cover':>6s} {'least':>6s} {'most':>6s} {'f0':>6s} {'THD':>6s} {'width':>6s}"
)


def line(o: Outcome) -> str:
    """One row of the table."""
    return (
        f"{o.name:18s} {o.spread_parts:12.4f} {o.worst_spread:6.3f} {o.spread_w:6.3f} {o.bias:6.3f} "
        f"{o.cover_parts:6.4f} {o.cover_least:6.3f} {o.cover_most:6.3f} {o.cover_w:6.3f} "
        f"{o.cover_thd:6.4f} {o.width_thd:6.3f}"
    )


if __name__ == "__main__":
    wanted = int(sys.argv[1]) if len(sys.argv) > 1 else 10_000
    print(
        f"{wanted} records a case; 95 % intervals; spread of a standard deviation "
        f"{100 / math.sqrt(2 * wanted):.1f} %, of a coverage {100 * math.sqrt(0.0475 / wanted):.1f} points"
    )
    print(HEADING)
    for number, case in enumerate(CASES):
        print(line(run(case, wanted, seed=100 + number)), flush=True)
