"""Readings, advice and ends as JSON-able documents, and back without loss."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import asdict, fields
from typing import Any

import numpy as np

from trimmer.guidance.advice import Advice, Cause
from trimmer.measurement.reading import Crests, Flag, Interval, Reading

_MATRIX = "covariance"
_ODD = {"nan": math.nan, "inf": math.inf, "-inf": -math.inf}


def number(value: float | None) -> float | str | None:
    """Give a float as strict JSON can carry it: those that are not finite by name."""
    if value is None or math.isfinite(value):
        return None if value is None else float(value)
    return "nan" if math.isnan(value) else ("inf" if value > 0 else "-inf")


def from_number(value: Any) -> float:
    """Undo `number`."""
    return _ODD[value] if isinstance(value, str) else float(value)


def finite(value: float | None) -> float | None:
    """Give a float for a column of its own; None where it cannot be had."""
    return float(value) if value is not None and math.isfinite(value) else None


def reading_document(reading: Reading) -> dict[str, Any]:
    """Give every figure of a reading, bit for bit.

    The covariance is symmetric, so that its lower triangle by rows says it all: a matrix that is not
    exactly symmetric is given whole.
    """
    plain: dict[str, Any] = {}
    for each in fields(reading):
        value = getattr(reading, each.name)
        plain[each.name] = _written(value)
    plain[_MATRIX] = _matrix(reading.covariance)
    return plain


def _written(value: Any) -> Any:
    if isinstance(value, float):
        return number(value)
    if isinstance(value, np.ndarray):
        return [number(v) for v in value.ravel().tolist()]
    if isinstance(value, Interval | Crests | Flag):
        return {key: _written(v) for key, v in asdict(value).items()}
    if isinstance(value, tuple):
        return [_written(v) for v in value]
    if isinstance(value, Mapping):
        return {key: _written(v) for key, v in value.items()}
    if isinstance(value, np.generic):
        return _written(value.item())
    return value


def _matrix(matrix: np.ndarray[Any, np.dtype[np.float64]]) -> list[Any]:
    same = np.array_equal(matrix, matrix.T, equal_nan=True)
    kept = matrix[np.tril_indices(matrix.shape[0])] if same else matrix
    return [number(v) for v in kept.ravel().tolist()]


def from_document(document: Mapping[str, Any]) -> Reading:
    """Give back the reading that `reading_document` wrote; what a newer program added is left out.

    Raises
    ------
    ValueError
        The document does not hold a reading.
    """
    try:
        return _read(dict(document))
    except (KeyError, TypeError, AttributeError, OverflowError) as error:
        raise ValueError(f"this is not a reading: {type(error).__name__} {error}") from error


def _read(given: dict[str, Any]) -> Reading:
    known = {each.name for each in fields(Reading)}
    given = {name: value for name, value in given.items() if name in known}
    parts = _floats(given.pop("parts"))
    size = parts.size
    if size != 2 * (int(given["orders"]) - 1):
        raise ValueError(f"a reading of {given['orders']} orders cannot have {size} parts")
    return Reading(
        parts=parts,
        covariance=_square(_floats(given.pop(_MATRIX)), size),
        thd=Interval(**_all_floats(given.pop("thd"))),
        crests=Crests(**_all_floats(given.pop("crests"))),
        flags=tuple(Flag(**{k: str(v) for k, v in flag.items()}) for flag in given.pop("flags")),
        extra=_all_floats(given.pop("extra", {})),
        **{name: _plain(name, value) for name, value in given.items()},
    )


_WHOLE = {"orders", "samples", "frames", "bits"}
_TRUTHS = {"has_volts", "ac_coupled"}


def _plain(name: str, value: Any) -> Any:
    if name in _TRUTHS:
        return bool(value)
    if name in _WHOLE:
        return None if value is None else int(value)
    return from_number(value)


def _all_floats(given: Mapping[str, Any]) -> dict[str, float]:
    return {key: from_number(value) for key, value in given.items()}


def _floats(values: list[Any]) -> np.ndarray[Any, np.dtype[np.float64]]:
    return np.array([from_number(v) for v in values], dtype=np.float64)


def _square(
    values: np.ndarray[Any, np.dtype[np.float64]], size: int
) -> np.ndarray[Any, np.dtype[np.float64]]:
    if values.size == size * size:
        return values.reshape(size, size)
    if values.size != size * (size + 1) // 2:
        raise ValueError(f"the covariance of {size} parts cannot have {values.size} entries")
    whole = np.zeros((size, size))
    rows, columns = np.tril_indices(size)
    whole[rows, columns] = values
    whole[columns, rows] = values
    return whole


def advice_document(advice: Advice) -> dict[str, Any]:
    """Give every field of an advice."""
    return {key: _written(value) for key, value in asdict(advice).items()}


def advice_from(document: Mapping[str, Any]) -> Advice:
    """Give back the advice that `advice_document` wrote; what a newer program added is left out."""
    return Advice(**_known(Advice, document))


def _known(kind: type[Any], document: Mapping[str, Any]) -> dict[str, Any]:
    names = {each.name for each in fields(kind)}
    return {name: value for name, value in document.items() if name in names}


def causes_document(causes: tuple[Cause, ...]) -> list[dict[str, Any]]:
    """Give every field of a remainder's causes."""
    return [{key: _written(value) for key, value in asdict(cause).items()} for cause in causes]


def causes_from(documents: list[Mapping[str, Any]]) -> tuple[Cause, ...]:
    """Give back the causes that `causes_document` wrote."""
    return tuple(Cause(**_known(Cause, document)) for document in documents)
