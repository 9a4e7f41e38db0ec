"""One capture in, one reading out."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from trimmer.measurement.crest import CrestFrame, crest_frame
from trimmer.measurement.digitiser import (
    Digitised,
    digitiser_flags,
    look_at,
    systematic_variances,
)
from trimmer.measurement.figures import (
    crests_of,
    flatness_of,
    rise_share_of,
    thd_plus_noise_of,
)
from trimmer.measurement.fit import Fit, approach, fit, slow_line
from trimmer.measurement.hum import candidates, certain_lines, hum_report
from trimmer.measurement.leftover import block_residuals, frequency_drift, noise_colour
from trimmer.measurement.model import Complex, Lines
from trimmer.measurement.projection import Record
from trimmer.measurement.reading import Digitiser, Flag, MeasurementError, Reading
from trimmer.measurement.reference import Reference, apply_reference
from trimmer.measurement.screening import (
    as_samples,
    check_clipping,
    check_times,
    no_signal,
    record_of,
    stale_flag,
)
from trimmer.measurement.search import coarse_fundamental
from trimmer.measurement.thd import Disturbance, thd_of

MOST_ORDERS = 64
"""Orders fitted where the sample rate allows, whatever is reported: an order left out leaks into the
others when the frame is not a whole number of periods, and passes for noise."""
ORDER_LIMIT = 200
"""Most orders that can be asked for."""
FEWEST_ORDERS = 3
FEWEST_CYCLES = 3.0
_NYQUIST_SHARE = 0.45
"""Highest order counted, as a share of the sample rate."""
_BURIED = 0.7
"""A residual of more than this share of the fundamental (both rms) is no signal."""
_CHANCE = 14.0
"""Logarithm of the odds against noise passing for a fundamental."""
_WANDERS = 0.05
"""An offset that wanders by this share of the fundamental is fitted along from the start."""
_AC_COUPLED_BELOW_HZ = 100.0


def measure(
    samples: ArrayLike,
    interval_s: float,
    *,
    orders: int = 15,
    digitiser: Digitiser | None = None,
    hint_hz: float | None = None,
    times_s: ArrayLike | None = None,
    mains_hz: float | None = None,
    previous_samples: ArrayLike | bytes | None = None,
    reference: Reference | None = None,
) -> Reading:
    """Read a capture: fundamental, harmonics in the crest frame, THD, all with uncertainties.

    Parameters
    ----------
    samples
        Shape (N,), evenly spaced in time.
    interval_s
        Seconds between samples.
    orders
        Highest order reported, 3 to 200; cut to what the sample rate shows (0.45 of it).
    digitiser
        What is known of the digitiser.
    hint_hz
        The fundamental as last seen; only makes the search quicker.
    times_s
        Shape (N,), the capture's own time column, checked for even steps.
    mains_hz
        Mains frequency; None looks for 50 and 60 Hz.
    previous_samples
        The last capture, or its `digest`, to notice a stale one.
    reference
        A clean source seen through the same input, taken into account.

    Returns
    -------
    Reading
        The least-squares fit of the record, with its flags.

    Raises
    ------
    MeasurementError
        The record cannot answer: ``not-a-number``, ``uneven-time``, ``clipped``, ``no-signal``,
        ``too-few-cycles``, ``too-few-orders``.
    """
    values = as_samples(samples)
    digitiser = digitiser or Digitiser()
    record = record_of(values, interval_s)
    check_times(times_s, values.size, interval_s)
    check_clipping(values, digitiser)
    found = _fitted(record, float(interval_s), orders, hint_hz)
    foreign = candidates(record, found, float(interval_s), _known_mains(mains_hz))
    foreign = certain_lines(record, found, foreign)
    if len(foreign) > found.lines.fixed.size:
        fixed = np.array([line.w for line in foreign])
        found = fit(record, Lines(found.lines.orders, fixed), found.w)
        _check_reach(record, found.w, slack=1e-3)
    _check_signal(found)
    left = block_residuals(found, _kept(orders, found.w))
    frame = crest_frame(found, left.shape[1], noise_colour(found, left))
    extra, flags = hum_report(found, foreign)
    stale = stale_flag(values, previous_samples)
    flags = [
        *([stale] if stale else []),
        *flags,
        *_flags(found, left, orders, interval_s, digitiser),
    ]
    digitised = look_at(record, digitiser)
    reading = _reading(record, found, frame, float(interval_s), digitiser, digitised, extra, flags)
    return apply_reference(reading, reference) if reference else reading


def _known_mains(mains_hz: float | None) -> float | None:
    """Leave out a mains frequency that is none."""
    return mains_hz if mains_hz and math.isfinite(mains_hz) and mains_hz > 0.0 else None


def _kept(orders: int, w: float) -> int:
    """K: the orders asked, cut to those the sample rate shows."""
    return min(orders, int(_NYQUIST_SHARE * 2.0 * math.pi / w + 1e-9))


def _fitted(record: Record, interval_s: float, orders: int, hint_hz: float | None) -> Fit:
    """Find the fundamental and fit all orders."""
    if orders < FEWEST_ORDERS or orders > ORDER_LIMIT:
        raise MeasurementError(
            "too-few-orders" if orders < FEWEST_ORDERS else "too-many-orders",
            f"{orders} orders were asked for.",
            f"Ask for {FEWEST_ORDERS} to {ORDER_LIMIT} orders with `--orders`.",
        )
    if hint_hz and math.isfinite(hint_hz):
        w = 2.0 * math.pi * hint_hz * interval_s
        if 2.0 * math.pi * FEWEST_CYCLES <= w * record.count and _kept(orders, w) >= FEWEST_ORDERS:
            found = _fit_from(record, w, orders)
            if found and _is_plausible(found):
                return found
    w = coarse_fundamental(record)
    if w <= 0.0:
        raise no_signal("no line stands out of the spectrum.")
    _check_reach(record, w, slack=0.2)
    found = _fit_from(record, w, orders)
    if found is None:
        raise no_signal("what stands out does not repeat.")
    _check_reach(record, found.w, slack=1e-3)
    return found


def _fit_from(record: Record, w: float, orders: int) -> Fit | None:
    """Fit all orders from a coarse frequency; None where that leads nowhere."""
    most = _kept(max(MOST_ORDERS, orders), w)
    # a few samples: leave something over to tell the noise by
    most = min(most, (record.count - 4) // 3)
    if most < FEWEST_ORDERS:
        return None
    near, wander = approach(record, most, w)
    if near <= 0.0:
        return None
    most = min(most, max(_kept(max(MOST_ORDERS, orders), near), FEWEST_ORDERS))
    slow = [slow_line(record.count)] if wander > _WANDERS else []
    found = fit(record, Lines(most, np.array(slow)), near)
    usable = 0.0 < found.w * most < math.pi and bool(np.isfinite(found.phasors).all())
    firm = 1e-6 * abs(complex(found.phasors[1])) ** 2 * record.count**3 / 24.0
    return found if usable and found.stiffness > firm else None


def _is_plausible(found: Fit) -> bool:
    """Say whether a fit from a hint is the fundamental's: strongest line, most of the power."""
    sizes = np.abs(found.phasors[1:])
    return bool(sizes[0] >= sizes.max()) and found.residual_power < 0.1 * found.power


def _check_reach(record: Record, w: float, slack: float) -> None:
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


def _check_signal(found: Fit) -> None:
    """Refuse what noise alone would show, and what is buried in it."""
    size = abs(complex(found.phasors[1]))
    residual = math.sqrt(found.residual_power / found.samples)
    chance = size * size * found.samples / (4.0 * found.variance)
    if chance < math.log(found.samples) + _CHANCE or residual > _BURIED * size / math.sqrt(2.0):
        raise no_signal(
            f"what does not repeat is {100 * residual * math.sqrt(2.0) / max(size, 1e-9):.0f} % of "
            "the strongest line."
        )


def _flags(
    found: Fit, left: Complex, orders: int, interval_s: float, digitiser: Digitiser
) -> list[Flag]:
    """Flags of the fit itself."""
    flags = []
    hz = found.w / (2.0 * math.pi * interval_s)
    if _kept(orders, found.w) < orders:
        flags.append(
            Flag(
                "orders-cut",
                f"Only {_kept(orders, found.w)} of {orders} orders lie below 0.45 of the sample rate.",
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


def _reading(
    record: Record,
    found: Fit,
    frame: CrestFrame,
    interval_s: float,
    digitiser: Digitiser,
    digitised: Digitised,
    extra: dict[str, float],
    flags: list[Flag],
) -> Reading:
    hz = 1.0 / (2.0 * math.pi * interval_s)
    amplitude, noise = frame.amplitude * record.scale, math.sqrt(found.variance) * record.scale
    chain = systematic_variances(frame.parts.size, amplitude, noise, digitised, digitiser)
    systematic = np.diag(chain)
    covariance = frame.covariance + systematic
    disturbance = Disturbance(frame.noise_power, tuple(chain.tolist()), found.freedom)
    thd = thd_of(frame.parts, covariance, disturbance)
    share, share_sigma = rise_share_of(frame.parts, covariance)
    upper, lower = flatness_of(found)
    known = {
        **extra,
        "flat_upper": upper,
        "flat_lower": lower,
        "piled_upper": digitised.piled_high,
        "piled_lower": digitised.piled_low,
    }
    middle = 0.5 * (record.count - 1) * found.w
    offset_variance = found.variance * float(found.inverse[0, 0, 0])
    chain_thd = math.sqrt(float(chain.sum()))
    return Reading(
        fundamental_hz=found.w * hz,
        fundamental_sigma_hz=math.sqrt(found.variance / found.stiffness) * hz,
        amplitude=amplitude,
        amplitude_sigma=math.sqrt(frame.amplitude_variance) * record.scale,
        offset=record.mean + float(found.cosines[0]) * record.scale,
        offset_sigma=math.sqrt(offset_variance) * record.scale,
        orders=frame.parts.size // 2 + 1,
        parts=frame.parts,
        covariance=covariance,
        noise=noise,
        thd=thd,
        thd_plus_noise=thd_plus_noise_of(found),
        crests=crests_of(frame.parts, covariance),
        rise_share=share,
        rise_share_sigma=share_sigma,
        flags=(*flags, *digitiser_flags(digitised, chain_thd, thd.value)),
        samples=record.count,
        interval_s=interval_s,
        cycles=found.w * record.count / (2.0 * math.pi),
        bits=digitiser.bits,
        has_volts=digitiser.has_volts,
        ac_coupled=digitiser.ac_coupled,
        phase=math.remainder(frame.phase - middle, 2.0 * math.pi),
        extra=known,
        systematic=systematic if chain.any() else np.zeros((0, 0)),
        noise_power=frame.noise_power,
        freedom=float(found.freedom),
    )
