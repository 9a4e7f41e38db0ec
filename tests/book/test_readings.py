"""Readings and advice as documents: every bit comes back."""

from __future__ import annotations

import math
from dataclasses import fields, replace
from typing import Any

import numpy as np
import pytest

from tests.book.samples import advice, reading
from trimmer.book.columns import dumps, loads
from trimmer.book.readings import (
    advice_document,
    advice_from,
    causes_document,
    causes_from,
    from_document,
    reading_document,
)
from trimmer.guidance.advice import Cause
from trimmer.measurement.reading import Interval, Reading


def same(one: Reading, other: Reading) -> bool:
    """Compare two readings bit for bit."""
    for each in fields(Reading):
        a, b = getattr(one, each.name), getattr(other, each.name)
        if isinstance(a, np.ndarray):
            if a.tobytes() != b.tobytes():
                return False
        elif repr(a) != repr(b):
            return False
    return True


def through_json(value: Reading) -> Reading:
    return from_document(loads(dumps(reading_document(value))))


@pytest.mark.parametrize("orders", [2, 3, 15, 40])
def test_a_reading_comes_back_bit_for_bit(orders: int) -> None:
    value = reading(seed=orders, orders=orders)
    assert same(through_json(value), value)
    assert not same(through_json(value), reading(seed=orders + 1, orders=orders))


def test_figures_that_are_not_finite_stay_what_they_are_in_strict_json() -> None:
    value = replace(
        reading(),
        thd=Interval(math.nan, math.inf, -math.inf, -0.0),
        bits=None,
        extra={"x": math.nan},
    )
    text = dumps(reading_document(value))
    assert "NaN" not in text
    assert "Infinity" not in text
    assert same(through_json(value), value)


def test_what_a_newer_program_added_is_left_out() -> None:
    document = reading_document(reading()) | {"something_new": [1, 2]}
    assert same(from_document(document), reading())
    assert advice_from(advice_document(advice(2)) | {"something_new": 1}) == advice(2)


@pytest.mark.parametrize(
    "wrong",
    [
        {"covariance": [1.0, 2.0]},
        {"thd": {"value": 1.0}},
        {"thd": 3},
        {"crests": "none"},
        {"flags": [{"code": "x"}]},
        {"extra": [1]},
    ],
)
def test_what_is_not_a_reading_is_refused(wrong: dict[str, Any]) -> None:
    with pytest.raises(ValueError, match=r"."):
        from_document(reading_document(reading()) | wrong)


def test_advice_and_causes_come_back() -> None:
    assert advice_from(loads(dumps(advice_document(advice(2))))) == advice(2)
    causes = (Cause("hum", 0.001, "Move the lead."), Cause("shaper", 0.003, "Leave it.", 0.0002))
    assert causes_from(loads(dumps(causes_document(causes)))) == causes
