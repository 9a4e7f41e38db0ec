"""Readings, advice and ends as JSON-able documents, and back without loss.

Measurement and guidance are loaded when a reading is, so that a list of sheets waits for neither.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import asdict, fields
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from trimmer.guidance.advice import Advice, Cause
    from trimmer.measurement.reading import Reading


def finite(value: float | None) -> float | None:
    """Give a float for a column of its own; None where it cannot be had."""
    return float(value) if value is not None and math.isfinite(value) else None


def reading_document(reading: Reading) -> dict[str, Any]:
    """Give every figure of a reading, bit for bit."""
    from trimmer.measurement import packing

    return packing.document(reading)


def from_document(document: Mapping[str, Any]) -> Reading:
    """Give back the reading that `reading_document` wrote; what a newer program added is left out.

    Raises
    ------
    ValueError
        The document does not hold a reading.
    """
    from trimmer.measurement import packing

    try:
        return packing.from_document(dict(document))
    except (AttributeError, OverflowError, IndexError) as error:
        raise ValueError(f"not a reading: {error}") from error


def advice_document(advice: Advice) -> dict[str, Any]:
    """Give every field of an advice."""
    return asdict(advice)


def advice_from(document: Mapping[str, Any]) -> Advice:
    """Give back the advice that `advice_document` wrote; what a newer program added is left out."""
    from trimmer.guidance.advice import Advice

    return Advice(**_known(Advice, document))


def _known(kind: type[Any], document: Mapping[str, Any]) -> dict[str, Any]:
    names = {each.name for each in fields(kind)}
    return {name: value for name, value in document.items() if name in names}


def causes_document(causes: tuple[Cause, ...]) -> list[dict[str, Any]]:
    """Give every field of a remainder's causes."""
    return [asdict(cause) for cause in causes]


def causes_from(documents: list[Mapping[str, Any]]) -> tuple[Cause, ...]:
    """Give back the causes that `causes_document` wrote."""
    from trimmer.guidance.advice import Cause

    return tuple(Cause(**_known(Cause, document)) for document in documents)
