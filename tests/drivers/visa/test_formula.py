"""Formulas of dialect files: what they work out, and what they cannot be made to do."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.visa.formula import Formula, FormulaError, same_word


@pytest.mark.parametrize(
    ("text", "fields", "value"),
    [
        ("(code - r) * y + o", {"code": 200.0, "r": 127.0, "y": 0.5, "o": 1.0}, 37.5),
        ("2 if format == 1 else 1", {"format": 1.0}, 2),
        ("-offset", {"offset": 0.25}, -0.25),
        ("a % 1 == 0", {"a": 50.0}, True),
        ("a % 1 == 0 and not b > 2", {"a": 50.5, "b": 1.0}, False),
        ("word == 'AVERAGE'", {"word": "AVER"}, True),
        ("word != 'AVERAGE'", {"word": "SAMPLE"}, True),
        ("word == 'PEAK'", {"word": None}, False),
        ("rate > 3", {"rate": None}, False),
        ("True", {}, True),
    ],
)
def test_a_formula_is_worked_out_as_it_reads(text, fields, value) -> None:
    assert Formula(text)(fields) == value


def test_a_formula_takes_a_whole_frame_at_once() -> None:
    codes = np.arange(5.0)
    assert np.array_equal(Formula("(code - 2) * 0.5")({"code": codes}), (codes - 2) * 0.5)


@pytest.mark.parametrize(
    "text",
    [
        "__import__('os').system('true')",
        "open('x')",
        "code.real",
        "code[0]",
        "[code]",
        "(lambda: 1)()",
        "code ** 9999999",
        "code << 9999",
        "{}",
        "f'{code}'",
        "code := 1",
        "1 < code < 3",
        "code is None",
        "code in (1, 2)",
        "",
        "code +",
        "x" * 400,
        "1e999",
        "(" * 200 + "1" + ")" * 200,
    ],
)
def test_a_formula_can_do_no_more_than_arithmetic(text) -> None:
    with pytest.raises(FormulaError):
        Formula(text)


@pytest.mark.parametrize(
    ("text", "fields"),
    [
        ("a / b", {"a": 1.0, "b": 0.0}),
        ("a * 2", {"a": None}),
        ("a - 1", {"a": "word"}),
        ("missing", {}),
    ],
)
def test_what_cannot_be_worked_out_is_said(text, fields) -> None:
    with pytest.raises(FormulaError):
        Formula(text)(fields)


@pytest.mark.parametrize("value", ["word", None, float("inf"), float("nan")])
def test_a_number_is_finite_or_refused(value) -> None:
    with pytest.raises(FormulaError):
        Formula("a").number({"a": value})


def test_words_compare_by_short_and_long_form() -> None:
    assert same_word("aver", "AVERage")
    assert same_word("RI", "ri")
    assert not same_word("AV", "AVERAGE")
    assert not same_word("RI", "RIBINARY")
    assert not same_word("AVERAGES", "AVEN")


@given(st.text(max_size=40))
def test_any_text_is_a_formula_or_a_formula_error(text: str) -> None:
    try:
        formula = Formula(text)
    except FormulaError:
        return
    assert isinstance(formula.names, frozenset)
