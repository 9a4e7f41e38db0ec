"""One capture in, one reading out."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from trimmer.measurement.crest import CrestFrame, crest_frame
from trimmer.measurement.figures import crests_of, rise_share_of, thd_plus_noise_of
from trimmer.measurement.fit import Fit, fit
from trimmer.measurement.model import Lines
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
"""Orders fitted where the sample rate allows, whatever is reported: see `fitted_orders`."""
ORDER_LIMIT = 200
FEWEST_CYCLES = 3.0
_NYQUIST_SHARE = 0.45


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
    values = as_samples(samples)
    digitiser = digitiser or Digitiser()
    record = record_of(values, interval_s)
    check_times(times_s, values.size, interval_s)
    check_clipping(values, digitiser)
    w = coarse_fundamental(record)
    if w <= 0.0:
        raise no_signal("the spectrum shows no line.")
    kept = min(orders, int(_NYQUIST_SHARE * 2.0 * math.pi / w))
    if kept < 3:
        raise MeasurementError("too-few-orders", "x", "y")
    most = min(max(MOST_ORDERS, kept), int(_NYQUIST_SHARE * 2.0 * math.pi / w))
    found = fit(record, Lines(most, np.empty(0)), w)
    cycles = found.w * values.size / (2.0 * math.pi)
    if cycles < FEWEST_CYCLES - 1e-3:
        raise MeasurementError("too-few-cycles", f"{cycles:.2f} cycles", "Slow the time base.")
    flags = [flag for flag in (stale_flag(values, previous_samples),) if flag]
    reading = _reading(
        record, found, crest_frame(found, kept), interval_s, digitiser, tuple(flags)
    )
    return apply_reference(reading, reference) if reference else reading


def _reading(
    record: Record,
    found: Fit,
    frame: CrestFrame,
    interval_s: float,
    digitiser: Digitiser,
    flags: tuple[Flag, ...],
) -> Reading:
    hz = 1.0 / (2.0 * math.pi * interval_s)
    share, share_sigma = rise_share_of(frame.parts, frame.covariance)
    middle = 0.5 * (record.count - 1) * found.w
    return Reading(
        fundamental_hz=found.w * hz,
        fundamental_sigma_hz=math.sqrt(found.variance / found.stiffness) * hz,
        amplitude=frame.amplitude * record.scale,
        amplitude_sigma=math.sqrt(frame.amplitude_variance) * record.scale,
        offset=record.mean + float(found.cosines[0]) * record.scale,
        offset_sigma=math.sqrt(found.variance * float(found.even_inverse[0, 0])) * record.scale,
        orders=frame.parts.size // 2 + 1,
        parts=frame.parts,
        covariance=frame.covariance,
        noise=math.sqrt(found.variance) * record.scale,
        thd=thd_of(
            frame.parts,
            frame.covariance,
            Disturbance(frame.noise_power, freedom=found.freedom),
        ),
        thd_plus_noise=thd_plus_noise_of(found),
        crests=crests_of(frame.parts, frame.covariance),
        rise_share=share,
        rise_share_sigma=share_sigma,
        flags=flags,
        samples=record.count,
        interval_s=interval_s,
        cycles=found.w * record.count / (2.0 * math.pi),
        bits=digitiser.bits,
        has_volts=digitiser.has_volts,
        ac_coupled=digitiser.ac_coupled,
        noise_power=frame.noise_power,
        freedom=float(found.freedom),
        phase=math.remainder(frame.phase - middle, 2.0 * math.pi),
    )
