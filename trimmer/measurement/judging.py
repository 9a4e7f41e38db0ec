"""What a fit is refused for, and what it is flagged for."""

from __future__ import annotations

import math

from trimmer.measurement.finding import kept_orders
from trimmer.measurement.fit import Fit
from trimmer.measurement.leftover import frequency_drift
from trimmer.measurement.model import Complex
from trimmer.measurement.reading import Digitiser, Flag
from trimmer.measurement.screening import no_signal

_BURIED = 0.7
"""A residual of more than this share of the fundamental (both rms) is no signal."""
_CHANCE = 14.0
"""Logarithm of the odds against noise passing for a fundamental."""
_AC_COUPLED_BELOW_HZ = 100.0
"""Ten times the corner of a usual AC-coupled input (common practice, no source)."""


def check_signal(found: Fit) -> None:
    """Refuse what noise alone would show, and what is buried in it."""
    size = abs(complex(found.phasors[1]))
    residual = math.sqrt(found.residual_power / found.samples)
    chance = size * size * found.samples / (4.0 * found.variance)
    if chance < math.log(found.samples) + _CHANCE or residual > _BURIED * size / math.sqrt(2.0):
        raise no_signal(
            f"what does not repeat is {100 * residual * math.sqrt(2.0) / max(size, 1e-9):.0f} % of "
            "the strongest line."
        )


def fit_flags(
    found: Fit, left: Complex, orders: int, interval_s: float, digitiser: Digitiser
) -> list[Flag]:
    """Flags of the fit itself."""
    flags = []
    hz = found.w / (2.0 * math.pi * interval_s)
    kept = min(kept_orders(orders, found.w), found.lines.orders)
    if kept < orders:
        flags.append(
            Flag(
                "orders-cut",
                f"Only {kept} of {orders} orders lie below 0.45 of the sample rate.",
                "Make the time base faster to see more orders.",
            )
        )
    drift = frequency_drift(found, left)
    if drift.seen:
        change = abs(drift.change / found.w)
        flags.append(
            Flag(
                "drifting",
                f"The frequency moves by {1e6 * change:.3g} parts in a million within the capture.",
                "Let the unit settle, leave its dial alone, or take a shorter capture.",
            )
        )
    if digitiser.ac_coupled and hz < _AC_COUPLED_BELOW_HZ:
        flags.append(
            Flag(
                "ac-coupled",
                f"The input blocks DC, which bends waves as slow as {hz:.3g} Hz.",
                "Use a DC-coupled input, or measure at a higher frequency.",
            )
        )
    if not found.converged:
        flags.append(
            Flag(
                "not-settled",
                "The fit of the frequency did not settle to the last digit.",
                "Take another capture, with more periods.",
            )
        )
    return flags
