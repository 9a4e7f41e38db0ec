"""Readings as plain dictionaries for storage: lossless, JSON-able, no NaN."""

from __future__ import annotations

import math
from dataclasses import asdict, fields
from typing import Any

import numpy as np

from trimmer.measurement.reading import Crests, Flag, Interval, Matrix, Reading

_ARRAYS = ("parts", "covariance", "systematic")
_NESTED = ("thd", "crests", "flags")


def pack_symmetric(matrix: Matrix) -> list[float]:
    """Give the upper triangle of a symmetric matrix, row by row."""
    triangle: list[float] = matrix[np.triu_indices(matrix.shape[0])].tolist()
    return triangle


def unpack_symmetric(triangle: list[float]) -> Matrix:
    """Rebuild a symmetric matrix from its upper triangle.

    Raises
    ------
    ValueError
        The length is no triangle's.
    """
    size = (math.isqrt(8 * len(triangle) + 1) - 1) // 2
    if size * (size + 1) // 2 != len(triangle):
        raise ValueError(f"{len(triangle)} numbers make no triangle")
    matrix = np.zeros((size, size))
    rows, columns = np.triu_indices(size)
    matrix[rows, columns] = triangle
    matrix[columns, rows] = triangle
    return matrix


def document(reading: Reading) -> dict[str, Any]:
    """Give a reading as a plain dictionary: numbers, strings, lists; infinity as None."""
    plain: dict[str, Any] = {
        item.name: getattr(reading, item.name)
        for item in fields(reading)
        if item.name not in (*_ARRAYS, *_NESTED)
    }
    plain["freedom"] = None if math.isinf(reading.freedom) else reading.freedom
    plain["extra"] = dict(reading.extra)
    plain["parts"] = reading.parts.tolist()
    plain["covariance"] = pack_symmetric(reading.covariance)
    plain["systematic"] = pack_symmetric(reading.systematic)
    plain["thd"] = asdict(reading.thd)
    plain["crests"] = asdict(reading.crests)
    plain["flags"] = [asdict(flag) for flag in reading.flags]
    return plain


def from_document(plain: dict[str, Any]) -> Reading:
    """Take a reading back from its dictionary. Fields unknown to this version are left aside.

    Raises
    ------
    ValueError
        The dictionary is no reading.
    """
    known = {item.name for item in fields(Reading)}
    try:
        values = {name: value for name, value in plain.items() if name in known}
        values["parts"] = np.array(plain["parts"], dtype=np.float64)
        values["covariance"] = unpack_symmetric(plain["covariance"])
        values["systematic"] = unpack_symmetric(plain.get("systematic", []))
        values["thd"] = Interval(**plain["thd"])
        values["crests"] = Crests(**plain["crests"])
        values["flags"] = tuple(Flag(**flag) for flag in plain["flags"])
        values["extra"] = dict(plain.get("extra", {}))
        freedom = plain.get("freedom")
        values["freedom"] = math.inf if freedom is None else freedom
        return Reading(**values)
    except (KeyError, TypeError, ValueError) as error:
        raise ValueError(f"not a reading: {error}") from error
