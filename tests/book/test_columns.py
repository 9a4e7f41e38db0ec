"""Column types: what both databases agree on."""

from __future__ import annotations

import json
import math
from datetime import UTC, datetime, timedelta, timezone

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from trimmer.book.columns import dumps, loads, plain, stamp

zones = st.integers(-14 * 60, 14 * 60).map(lambda m: timezone(timedelta(minutes=m)))
instants = st.datetimes(datetime(1970, 1, 2), datetime(2200, 1, 1), timezones=zones)  # noqa: DTZ001


@given(instants, instants)
def test_the_order_of_stamps_is_the_order_of_instants(one: datetime, other: datetime) -> None:
    assert (stamp(one) < stamp(other)) == (one < other)
    assert len(stamp(one)) == 32
    assert datetime.fromisoformat(stamp(one)) == one


def test_an_instant_without_a_zone_is_refused() -> None:
    with pytest.raises(ValueError, match="time zone"):
        stamp(datetime(2031, 1, 1))  # noqa: DTZ001
    assert stamp(datetime(2031, 1, 1, tzinfo=UTC)) == "2031-01-01T00:00:00.000000+00:00"


@given(st.text(alphabet=st.characters(min_codepoint=0, max_codepoint=0x10FFFF, categories=None)))
def test_any_text_becomes_fit_for_any_database(text: str) -> None:
    fit = plain(text)
    fit.encode("utf-8")
    assert "\0" not in fit
    assert "\x1b" not in fit
    assert plain(fit) == fit


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_number_keeps_its_every_bit_in_json(value: float) -> None:
    assert float(dumps(value)).hex() == value.hex()


def test_what_is_not_finite_comes_back_from_strict_json() -> None:
    document = {"x": [math.nan, math.inf, -math.inf, -0.0], "y": {"not_finite": "text"}, "z": "nan"}
    text = dumps(document)
    json.loads(text, parse_constant=lambda word: pytest.fail(f"{word} is not strict JSON"))
    assert repr(loads(text)) == repr(document)
    assert repr(loads(text.encode())) == repr(document)


def test_numbers_of_the_numeric_library_are_taken_as_they_are() -> None:
    document = {
        "n": np.int64(3),
        "x": np.float64(0.1),
        "a": np.array([[1.5, np.inf]]),
        "t": np.True_,
    }
    assert loads(dumps(document)) == {"n": 3, "x": 0.1, "a": [[1.5, math.inf]], "t": True}
    with pytest.raises(TypeError, match="cannot stand in a document"):
        dumps({"x": object()})
