"""What a digitiser does to a reading: few codes, rounding, non-linearity, rails.

Rounding of a wave that carries noise of half a code or more is one more noise, ``code^2 / 12``,
and the fit's residual holds it already. With less noise it distorts, always in the same way, as
non-linearity does. Both bend the wave as a function of its value only, so both act on the crest
parts and leave the skew parts alone.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from trimmer.measurement.kernels import Array
from trimmer.measurement.projection import Record
from trimmer.measurement.reading import Digitiser, Flag, MeasurementError

FEW_CODES = 64
"""A wave that spans fewer codes is flagged."""
CLIPPED_SHARE = 0.001
"""More samples than this share at a rail, and the record is refused."""
_SAMPLE = 1024
"""Samples looked at to find the step of the codes where it is not stated."""
_PILED = 4.0
"""So many times more samples in the outermost code than in the next one are a flat top without
noise. The outermost code of a rounded sine without noise holds at most 2.5 times as many."""
_PILED_SHARE = 1e-3


@dataclass(frozen=True, slots=True)
class Digitised:
    """How a record was digitised, as stated or as seen in it."""

    code: float | None
    """Size of a code in the unit of the samples; None where the samples show no steps."""
    low: float
    """Least sample."""
    high: float
    """Largest sample."""
    piled_low: float
    """Share of the samples in the lowest code, where they pile up; else 0."""
    piled_high: float
    """Share of the samples in the highest code, where they pile up; else 0."""

    @property
    def codes(self) -> float:
        """Codes the record spans."""
        return (self.high - self.low) / self.code + 1.0 if self.code else math.inf


def look_at(record: Record, digitiser: Digitiser) -> Digitised:
    """See how a record was digitised."""
    values = record.samples
    low, high = record.low, record.high
    code = _stated_code(digitiser)
    if code is None or not 0.0 < code <= 0.5 * (high - low):  # a code larger than the wave is none
        code = _seen_code(values)
    step = code if code else 0.0
    return Digitised(
        code=code,
        low=low,
        high=high,
        piled_low=_piled(values, low, step, -1.0),
        piled_high=_piled(values, high, step, 1.0),
    )


def _stated_code(digitiser: Digitiser) -> float | None:
    if digitiser.code is not None and math.isfinite(digitiser.code):
        return float(digitiser.code)
    low, high, bits = digitiser.low_rail, digitiser.high_rail, digitiser.bits
    if (
        low is None
        or high is None
        or not bits
        or not 0 < bits <= 60
        or not 0.0 < high - low < math.inf
    ):
        return None
    return (high - low) / (2.0**bits - 1.0)


def _seen_code(values: Array) -> float | None:
    """Find the common step of the sample values, None where there is none."""
    some = values[:: max(1, values.size // _SAMPLE)][:_SAMPLE]
    levels = np.unique(some)
    if levels.size < 2 or levels.size > some.size // 2:
        return None
    steps = np.diff(levels)
    grain = 1e-6 * float(levels[-1] - levels[0])
    steps = steps[steps > grain]  # two spellings of one code, from rounding in the file
    if not steps.size:
        return None
    code = float(steps.min())
    whole = steps / code
    return code if bool(np.all(np.abs(whole - np.round(whole)) < 0.05 * np.sqrt(whole))) else None


def _piled(values: Array, extreme: float, code: float, sign: float) -> float:
    """Share of the samples in the outermost code, 0 unless they pile up there."""

    def within(codes: float) -> int:
        edge = extreme - sign * codes * code
        return int(np.count_nonzero(values >= edge if sign > 0.0 else values <= edge))

    outer = within(0.5)
    if outer <= max(2.0, _PILED_SHARE * values.size):
        return 0.0
    second = within(1.5) - outer
    return outer / values.size if outer > _PILED * second else 0.0


def default_nonlinearity(bits: int, averaged: int = 1) -> float:
    """Give a cautious peak non-linearity, in codes, where none is stated.

    A tenth of a code at 8 bits, doubling every 2 bits: the last bits of a finer converter are less
    exact (common practice, no source). Bits gained by averaging frames gain no linearity.
    """
    real = max(4.0, min(bits, 24) - 0.5 * math.log2(max(averaged, 1)))
    return 0.1 * float(2.0 ** (0.5 * (real - 8.0) + min(bits, 24) - real))


def systematic_variances(
    size: int, amplitude: float, noise: float, digitised: Digitised, digitiser: Digitiser
) -> Array:
    """Variances of the parts that averaging does not lower.

    Parameters
    ----------
    size
        2 (K - 1), number of parts.
    amplitude
        Peak of the fundamental, unit of the samples.
    noise
        Standard deviation of the residual of one sample, unit of the samples.
    digitised, digitiser
        How it was digitised.

    Returns
    -------
    Array
        Shape (size,); the skew parts' are 0.

    Notes
    -----
    *Non-linearity* of peak P codes: standard uncertainty ``P / (2 k)`` codes in order k. A bow of
    peak P makes P/2 in order 2, an S one of 0.65 P in order 3.

    *Rounding* without enough noise: the mean of a rounded value is off by ``(code / pi)
    exp(-2 pi^2 s^2 / code^2) sin(2 pi x / code)`` (Widrow, Kollar, *Quantization Noise*, 2008, from
    memory), of which order k of a wave of amplitude A holds a Bessel function ``J_k(2 pi A / code)``
    with mean square ``code / (2 pi^2 A)``.
    """
    variances = np.zeros(size)
    code = digitised.code
    if not code:
        return variances
    k = np.arange(2, size // 2 + 2)
    peak = digitiser.nonlinearity_codes
    if peak is None:
        known = digitiser.bits is not None and digitiser.bits > 0
        peak = default_nonlinearity(digitiser.bits or 0, digitiser.averaged) if known else 0.0
    peak = min(abs(peak), 2.0**24) if math.isfinite(peak) else 0.0
    bend = (0.5 * peak * code / amplitude / k) ** 2
    dither = max((noise / code) ** 2 - 1.0 / 12.0, 0.0)
    rounding = (code / amplitude) ** 3 / math.pi**4 * math.exp(-4.0 * math.pi**2 * dither)
    variances[0::2] = bend + rounding
    return variances


def check_full_scale(digitised: Digitised) -> None:
    """Refuse a record that piles up at both ends of a whole power of two of codes: its rails.

    Raises
    ------
    MeasurementError
        ``clipped``.
    """
    if not digitised.code or not (digitised.piled_low and digitised.piled_high):
        return
    bits = math.log2(digitised.codes)
    if bits < 5.5 or abs(digitised.codes - 2.0 ** round(bits)) > 0.25:
        return
    raise clipped(
        digitised.piled_low + digitised.piled_high, f"the {round(digitised.codes)} codes' ends"
    )


def clipped(share: float, where: str) -> MeasurementError:
    """Refuse a record of which so large a share is at a rail."""
    return MeasurementError(
        "clipped",
        f"{100.0 * share:.2g} % of the samples are at {where}.",
        "Widen the range or lower the input until both crests are inside the screen.",
    )


def check_rails(values: Array, digitiser: Digitiser) -> None:
    """Refuse a record with more than 0.1 % of its samples at a rail of the digitiser.

    Raises
    ------
    MeasurementError
        ``clipped``.
    """
    code = digitiser.code
    margin = 0.5 * code if code is not None and 0.0 < code < math.inf else 0.0
    at_rail = 0
    if digitiser.high_rail is not None:
        at_rail += int(np.count_nonzero(values >= digitiser.high_rail - margin))
    if digitiser.low_rail is not None:
        at_rail += int(np.count_nonzero(values <= digitiser.low_rail + margin))
    share = max(at_rail, int(digitiser.clipped)) / values.size
    if share > CLIPPED_SHARE:
        raise clipped(share, "the digitiser's rail")


def digitiser_flags(digitised: Digitised, chain: float, thd: float) -> list[Flag]:
    """Flag few codes, piled-up extremes, and a THD that the digitiser alone could make."""
    flags = []
    if digitised.codes < FEW_CODES:
        flags.append(
            Flag(
                "few-codes",
                f"The wave spans {digitised.codes:.0f} codes of the digitiser.",
                "Make the range smaller until the wave fills most of the screen.",
            )
        )
    sides = [
        name
        for name, share in (("top", digitised.piled_high), ("bottom", digitised.piled_low))
        if share > 0.0
    ]
    if sides:
        share = max(digitised.piled_high, digitised.piled_low)
        flags.append(
            Flag(
                "flat-without-noise",
                f"{100 * share:.2g} % of the samples share one value at the {' and '.join(sides)}: "
                "cut off in the digitiser, not in the unit.",
                "Widen the range or lower the input until both crests are inside the screen.",
            )
        )
    if chain > 0.0 and thd <= 2.0 * chain:
        flags.append(
            Flag(
                "chain-floor",
                f"The {100 * thd:.2g} % seen are no more than the digitiser's own non-linearity "
                f"could make ({100 * chain:.2g} %).",
                "Use more of the range, a finer digitiser, or store a reference of a clean source.",
            )
        )
    return flags
