"""From bytes and a preamble to volts: pure arithmetic on what the instrument sent."""

from __future__ import annotations

import contextlib
import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from drivers.contract import SourceRefused, UnusableCapture
from drivers.visa.dialect import Codes, Dialect
from drivers.visa.formula import Formula, FormulaError

Fields = Mapping[str, Any]

_SENTINEL_SHARE = 1e-5
"""Two values that mark out of range are the same within this; they travel as 32-bit floats."""


@dataclass(frozen=True, slots=True)
class Reading:
    """How the bytes of a frame are read as numbers."""

    signed: bool | None = None
    """Two's complement; None as the dialect says."""
    big_endian: bool | None = None
    """Most significant byte first; None as the dialect says."""


@dataclass(frozen=True, slots=True, eq=False)
class Converted:
    """A frame in volts."""

    volts: NDArray[np.float64]
    """Shape (N,)."""
    interval_s: float
    """Seconds between samples."""
    bits: int | None
    """Bits of the codes."""
    code: float | None
    """Volts a code."""
    low_rail: float | None
    """Volts of the lowest code."""
    high_rail: float | None
    """Volts of the highest code."""
    clipped: int
    """Samples at a rail or marked as out of range."""
    averaged: int
    """Frames averaged."""
    remarks: tuple[str, ...] = ()
    """What the dialect wants said."""


def convert(dialect: Dialect, fields: Fields, payload: bytes, reading: Reading) -> Converted:
    """Turn a frame into volts.

    Parameters
    ----------
    dialect
        Whose formulas apply.
    fields
        The preamble.
    payload
        The bytes of the samples.
    reading
        What was settled about sign and byte order.

    Raises
    ------
    UnusableCapture
        It is no plain waveform: peak detect, holes, all out of range.
    SourceRefused
        Preamble and data do not fit together.
    """
    try:
        return _convert(dialect, fields, payload, reading)
    except FormulaError as error:
        raise SourceRefused(f"the preamble cannot be used: {error}") from error


def values_of(codes: Codes, fields: Fields, payload: bytes, reading: Reading) -> NDArray[Any]:
    """Read bytes as codes or values.

    Returns
    -------
    ndarray
        Shape (N,), in the type they were sent in.

    Raises
    ------
    SourceRefused
        The count of bytes does not fit the count of points.
    """
    width = int(codes.width.number(fields))
    kinds = ("f4", "f8") if codes.kind == "float" else ("i1", "i2", "i4")
    if f"i{width}" not in kinds and f"f{width}" not in kinds:
        raise SourceRefused(f"the preamble speaks of values of {width} bytes")
    if codes.points is not None:
        points = int(codes.points.number(fields))
        if points * width != len(payload):
            raise SourceRefused(
                f"the preamble speaks of {points} points of {width} bytes, but "
                f"{len(payload)} bytes came"
            )
    elif len(payload) % width:
        raise SourceRefused(f"{len(payload)} bytes are no whole number of {width}-byte values")
    if not payload:
        raise UnusableCapture(
            "the instrument sent no samples", "Check that the channel is on and the trigger runs."
        )
    big = reading.big_endian
    order = ">" if (bool(codes.big_endian(fields)) if big is None else big) else "<"
    if codes.kind == "float":
        letter = "f"
    else:
        signed = bool(codes.signed(fields)) if reading.signed is None else reading.signed
        letter = "i" if signed else "u"
    return np.frombuffer(payload, dtype=np.dtype(f"{order}{letter}{width}"))


def _convert(dialect: Dialect, fields: Fields, payload: bytes, reading: Reading) -> Converted:
    for refuse in dialect.refuse:
        if refuse.when(fields):
            raise UnusableCapture(refuse.why, refuse.remedy)
    values = values_of(dialect.codes, fields, payload, reading)
    known = {**fields, "points_read": float(values.size)}
    interval_s = dialect.scale.interval_s.number(known)
    if interval_s <= 0.0:
        raise SourceRefused(f"the preamble gives {interval_s:g} s between samples")
    averaged = max(1, int(dialect.scale.averaged.number(known)))
    scaled = _floats if dialect.codes.kind == "float" else _integers
    converted = scaled(dialect, known, values, interval_s, averaged)
    return replace(converted, remarks=_remarks(dialect, known))


def _remarks(dialect: Dialect, fields: Fields) -> tuple[str, ...]:
    said = []
    for remark in dialect.remark:
        with contextlib.suppress(FormulaError):
            if remark.when(fields):
                said.append(remark.say)
    return tuple(said)


def _integers(
    dialect: Dialect, fields: Fields, codes: NDArray[Any], interval_s: float, averaged: int
) -> Converted:
    low, high = _limits(dialect.codes, fields, codes)
    hole = _whole(dialect.codes.hole, fields)
    if hole is not None:
        _refuse_holes(int(np.count_nonzero(codes == hole)), codes.size)
    inside = codes if low is None or high is None else codes[(codes > low) & (codes < high)]
    step = code_step(inside)
    bits = _bits(dialect, fields, codes, step)
    volts = volts_of(dialect, fields, codes)
    if not np.isfinite(volts).all():
        raise SourceRefused("the preamble gives no finite volts")
    one = abs(_volts(dialect, fields, step or 1) - _volts(dialect, fields, 0))
    if low is None or high is None:
        return Converted(volts, interval_s, bits, one, None, None, 0, averaged)
    # Where 8 bits were shifted into 16, the highest code that occurs is 0xFF00.
    top = high // step * step if step else high
    bottom = -(-low // step) * step if step else low
    clipped = int(np.count_nonzero(codes >= top) + np.count_nonzero(codes <= bottom))
    low_v, high_v = sorted(_volts(dialect, fields, code) for code in (bottom, top))
    return Converted(volts, interval_s, bits, one, low_v, high_v, clipped, averaged)


def _limits(
    codes: Codes, fields: Fields, values: NDArray[Any]
) -> tuple[int, int] | tuple[None, None]:
    """Give the lowest and the highest code, where they are known and hold."""
    kind = np.iinfo(values.dtype)
    low = int(kind.min) if codes.low is None else _whole(codes.low, fields)
    high = int(kind.max) if codes.high is None else _whole(codes.high, fields)
    if low is None or high is None or values.min() < min(low, 0 if codes.hole else low):
        return None, None
    return (None, None) if values.max() > high else (low, high)


def _floats(
    dialect: Dialect, fields: Fields, values: NDArray[Any], interval_s: float, averaged: int
) -> Converted:
    volts = np.array(values, dtype=np.float64)
    over = _marked(volts, dialect.codes.high, fields) | np.isposinf(volts)
    under = _marked(volts, dialect.codes.low, fields) | np.isneginf(volts)
    holes = (_marked(volts, dialect.codes.hole, fields) & ~over) | np.isnan(volts)
    _refuse_holes(int(np.count_nonzero(holes)), volts.size)
    good = ~(over | under)
    if not good.any():
        raise UnusableCapture(
            "every sample is out of range", "Choose a larger range, then measure again."
        )
    volts[over], volts[under] = volts[good].max(), volts[good].min()
    volts = volts_of(dialect, fields, volts)
    if not np.isfinite(volts).all():
        raise SourceRefused("the preamble gives no finite volts")
    code = _known(dialect.scale.code, fields)
    bits = _bits(dialect, fields, None, 0)
    clipped = int(np.count_nonzero(over) + np.count_nonzero(under))
    low_v, high_v = _known(dialect.scale.low_rail, fields), _known(dialect.scale.high_rail, fields)
    near = 0.5 * abs(code or 0.0)
    if low_v is None or high_v is None or volts.min() < low_v - near or volts.max() > high_v + near:
        return Converted(volts, interval_s, bits, code, None, None, clipped, averaged)
    if not clipped:
        clipped = int(np.count_nonzero((volts <= low_v + near) | (volts >= high_v - near)))
    return Converted(volts, interval_s, bits, code, low_v, high_v, clipped, averaged)


def code_step(codes: NDArray[Any]) -> int:
    """Find the step between codes: 256 where 8 bits were shifted into 16.

    Parameters
    ----------
    codes
        Shape (N,), integers, without marks.

    Returns
    -------
    int
        The largest power of two that divides all differences; 0 where all codes are equal.
    """
    if codes.size == 0:
        return 0
    unsigned = codes.astype(np.int64)
    differing = int(np.bitwise_or.reduce(unsigned ^ unsigned[0]))
    return differing & -differing


def _bits(dialect: Dialect, fields: Fields, codes: NDArray[Any] | None, step: int) -> int | None:
    """Give the bits of the codes: those told, or fewer where the codes show that they are."""
    told = _whole(dialect.codes.bits, fields)
    if codes is None:
        return told
    width = 8 * codes.dtype.itemsize
    seen = width - int(math.log2(step)) if step else width
    return seen if told is None else min(told, seen)


def volts_of(dialect: Dialect, fields: Fields, codes: NDArray[Any]) -> NDArray[np.float64]:
    """Work out the volts of codes, shape (N,); not finite where the scales are absurd."""
    with np.errstate(over="ignore", invalid="ignore"):
        volts = dialect.scale.volts({**fields, "code": codes.astype(np.float64)})
    return np.broadcast_to(np.asarray(volts, dtype=np.float64), codes.shape)


def _volts(dialect: Dialect, fields: Fields, code: float) -> float:
    return dialect.scale.volts.number({**fields, "code": float(code)})


def _known(formula: Formula | None, fields: Fields) -> float | None:
    """Work out a number, None where its fields are not known."""
    if formula is None:
        return None
    try:
        return formula.number(fields)
    except FormulaError:
        return None


def _whole(formula: Formula | None, fields: Fields) -> int | None:
    """Work out a whole number, None where its fields are not known."""
    value = _known(formula, fields)
    return None if value is None else round(value)


def _marked(values: NDArray[np.float64], mark: Formula | None, fields: Fields) -> NDArray[np.bool_]:
    if mark is None:
        return np.zeros(values.shape, dtype=np.bool_)
    value = mark.number(fields)
    return np.asarray(np.abs(values - value) <= _SENTINEL_SHARE * abs(value))


def _refuse_holes(holes: int, samples: int) -> None:
    if holes:
        raise UnusableCapture(
            f"{holes} of {samples} samples are marked as missing",
            "Set a plain real-time acquisition and a range that holds the signal, then measure again.",
        )
