"""From a record to its fit: the fundamental found, with or without a hint, then all orders."""

from __future__ import annotations

import math

import numpy as np

from trimmer.measurement.fit import Fit, approach, fit, slow_line
from trimmer.measurement.model import Lines
from trimmer.measurement.projection import Record
from trimmer.measurement.reading import MeasurementError
from trimmer.measurement.screening import no_signal
from trimmer.measurement.search import coarse_fundamental

MOST_ORDERS = 64
"""Orders fitted where the sample rate allows, whatever is reported: an order left out leaks into the
others when the frame is not a whole number of periods, and passes for noise."""
ORDER_LIMIT = 200
"""Most orders that can be asked for."""
FEWEST_ORDERS = 3
FEWEST_CYCLES = 3.0
_NYQUIST_SHARE = 0.45
"""Highest order counted, as a share of the sample rate."""
_WANDERS = 0.05
"""An offset that wanders by this share of the fundamental is fitted along from the start."""


def kept_orders(orders: int, w: float) -> int:
    """Give K: the orders asked, cut to those the sample rate shows."""
    return min(orders, int(_NYQUIST_SHARE * 2.0 * math.pi / w + 1e-9))


def find(record: Record, interval_s: float, orders: int, hint_hz: float | None) -> Fit:
    """Find the fundamental and fit all orders."""
    if orders < FEWEST_ORDERS or orders > ORDER_LIMIT:
        raise MeasurementError(
            "too-few-orders" if orders < FEWEST_ORDERS else "too-many-orders",
            f"{orders} orders were asked for.",
            f"Ask for {FEWEST_ORDERS} to {ORDER_LIMIT} orders with `--orders`.",
        )
    if hint_hz and math.isfinite(hint_hz):
        w = 2.0 * math.pi * hint_hz * interval_s
        if (
            2.0 * math.pi * FEWEST_CYCLES <= w * record.count
            and kept_orders(orders, w) >= FEWEST_ORDERS
        ):
            found = _fit_from(record, w, orders)
            if found and _is_plausible(found):
                return found
    w, unsure = coarse_fundamental(record)
    if w <= 0.0:
        raise no_signal("no line stands out of the spectrum.")
    check_reach(record, w, slack=0.2)
    found = _fit_from(record, w, orders, unsure)
    if found is None:
        raise no_signal("what stands out does not repeat.")
    check_reach(record, found.w, slack=1e-3)
    return found


def _fit_from(record: Record, w: float, orders: int, unsure: float = 0.0) -> Fit | None:
    """Fit all orders from a coarse frequency; None where that leads nowhere."""
    most = kept_orders(max(MOST_ORDERS, orders), w)
    # a few samples: leave something over to tell the noise by
    most = min(most, (record.count - 4) // 3)
    if most < FEWEST_ORDERS:
        return None
    near = approach(record, most, w, unsure)
    if near.w <= 0.0:
        return None
    wanted = min(most, max(kept_orders(max(MOST_ORDERS, orders), near.w), FEWEST_ORDERS))
    slow = [slow_line(record.count)] if near.wander > _WANDERS else []
    start = near.projections if near.projections.lines.orders == wanted else None
    found = fit(record, Lines(wanted, np.array(slow)), near.w, start)
    usable = 0.0 < found.w * wanted < math.pi and bool(np.isfinite(found.phasors).all())
    firm = 1e-6 * abs(complex(found.phasors[1])) ** 2 * record.count**3 / 24.0
    return found if usable and found.stiffness > firm else None


def _is_plausible(found: Fit) -> bool:
    """Say whether a fit from a hint is the fundamental's: strongest line, most of the power."""
    sizes = np.abs(found.phasors[1:])
    return bool(sizes[0] >= sizes.max()) and found.residual_power < 0.1 * found.power


def check_reach(record: Record, w: float, slack: float) -> None:
    cycles = w * record.count / (2.0 * math.pi)
    if cycles < FEWEST_CYCLES - slack:
        raise MeasurementError(
            "too-few-cycles",
            f"The capture holds {cycles:.2f} periods; at least {FEWEST_CYCLES:g} are needed.",
            "Make the time base slower until three or more periods are on the screen.",
        )
    if int(_NYQUIST_SHARE * 2.0 * math.pi / w * (1.0 + 0.05 * slack)) < FEWEST_ORDERS:
        raise MeasurementError(
            "too-few-orders",
            f"There are {2.0 * math.pi / w:.1f} samples in a period, too few for order 3.",
            "Make the time base faster, or the sample rate at least 7 times the frequency.",
        )
