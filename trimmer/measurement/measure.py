"""One capture in, one reading out."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from trimmer.measurement.crest import CrestFrame, crest_frame
from trimmer.measurement.digitiser import (
    Digitised,
    check_full_scale,
    check_rails,
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
from trimmer.measurement.finding import check_reach, find, kept_orders
from trimmer.measurement.fit import Fit, fit
from trimmer.measurement.hum import candidates, certain_lines, hum_report
from trimmer.measurement.judging import check_signal, fit_flags
from trimmer.measurement.leftover import block_residuals, noise_colour
from trimmer.measurement.model import Lines
from trimmer.measurement.projection import Record
from trimmer.measurement.reading import Digitiser, Flag, Reading
from trimmer.measurement.reference import Reference, apply_reference
from trimmer.measurement.screening import (
    as_samples,
    check_times,
    record_of,
    stale_flag,
)
from trimmer.measurement.thd import Disturbance, thd_of


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
        The least-squares fit of the record, with its flags. `extra` holds, as ratios to the
        fundamental, ``hum_ratio`` (``mains_ratio`` and ``sideband_ratio`` together, where there is
        any, with ``mains_hz``) and ``slow_ratio``; ``flat_upper`` and ``flat_lower``, the time near
        each crest over a sine's; ``piled_upper`` and ``piled_lower``, the share of the samples
        piled up in the outermost code.

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
    check_rails(values, digitiser)
    digitised = look_at(record, digitiser)
    check_full_scale(digitised)
    found = find(record, float(interval_s), orders, hint_hz)
    foreign = candidates(record, found, float(interval_s), mains_hz)
    foreign = certain_lines(record, found, foreign)
    if len(foreign) > found.lines.fixed.size:
        fixed = np.array([line.w for line in foreign])
        found = fit(record, Lines(found.lines.orders, fixed), found.w)
        check_reach(record, found.w, slack=1e-3)
    check_signal(found)
    left = block_residuals(found, min(kept_orders(orders, found.w), found.lines.orders))
    frame = crest_frame(found, left.shape[0], noise_colour(found, left))
    extra, flags = hum_report(found, foreign)
    stale = stale_flag(values, previous_samples)
    flags = [
        *([stale] if stale else []),
        *flags,
        *fit_flags(found, left, orders, interval_s, digitiser),
    ]
    reading = _reading(record, found, frame, float(interval_s), digitiser, digitised, extra, flags)
    return apply_reference(reading, reference) if reference else reading


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
