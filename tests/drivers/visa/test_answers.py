"""What instruments answer: numbers with units, echoes of headers, keywords, keys."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.visa import answers


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("+1.5E+00", 1.5),
        ("500mV", 0.5),
        ("5.00E-04S", 5e-4),
        ("1.00GSa/s", 1e9),
        ("1.25MSa/s", 1.25e6),
        ("250kSa/s", 250e3),
        ("500 us", 5e-4),
        ("3.3\N{MICRO SIGN}s", 3.3e-6),
        ("1.4Mpts", 1.4e6),
        ("2V/div", 2.0),
        (".5", 0.5),
        ("7.", 7.0),
        ("9.9E37", 9.9e37),
    ],
)
def test_a_number_is_read_with_its_unit(text, value) -> None:
    assert answers.number(text) == pytest.approx(value, rel=1e-15)


@pytest.mark.parametrize(
    "text", ["", "DC", "V", "1.5 parsec", "1.5 xV", "--", "1,5", "0x10", "nan"]
)
def test_what_is_no_number_is_refused(text) -> None:
    with pytest.raises(answers.AnswerError):
        answers.number(text)


@pytest.mark.parametrize(
    ("text", "query", "rest"),
    [
        (":WAVEFORM:PREAMBLE 0,1", ":WAVeform:PREamble?", "0,1"),
        (":WAV:PRE 0,1", ":WAVeform:PREamble?", "0,1"),
        ("C1:VDIV 5.00E-01V", "C1:VDIV?", "5.00E-01V"),
        ("VDIV 5.00E-01V", "C1:VDIV?", "5.00E-01V"),
        ("*IDN EXAMPLE WORKS,A,1,2", "*IDN?", "EXAMPLE WORKS,A,1,2"),
        ("EXAMPLE WORKS,A,1,2", "*IDN?", "EXAMPLE WORKS,A,1,2"),
        ("DC 50", ":CHANnel1:COUPling?", "DC 50"),
        (":WFMPRE:BYT_NR 1;BIT_NR 8", "WFMPre?", ":WFMPRE:BYT_NR 1;BIT_NR 8"),
        ("*OPC 1", "TRMD SINGLE;WAIT;*OPC?", "1"),
    ],
)
def test_only_an_echo_of_the_question_is_dropped(text, query, rest) -> None:
    assert answers.without_header(text, query) == rest


def test_keywords_are_read_in_any_order_and_not_inside_quotes() -> None:
    read = answers.keywords(':WFMO:YMULT 2;BYT_NR 1;WFID "Ch1; DC; 1 V/div";PT_FMT Y')
    assert read == {"YMULT": "2", "BYT_NR": "1", "WFID": '"Ch1; DC; 1 V/div"', "PT_FMT": "Y"}


def test_values_without_keywords_give_none() -> None:
    assert answers.keywords('1;8;BIN;RI;MSB;2500;"Ch1, DC coupling";Y;1.0E-6') == {}


def test_keyed_values_are_read_whatever_their_case() -> None:
    read = answers.keyed("Format,1.0;Vertical Scale,2.0E-1;Note,a,b;Waveform Data;")
    assert read == {"format": "1.0", "vertical scale": "2.0E-1", "note": "a,b"}


@pytest.mark.parametrize(
    ("word", "yes"),
    [
        ("YMU", True),
        ("YMUL", True),
        ("ymult", True),
        ("YM", False),
        ("YMULTI", False),
        ("YOF", False),
    ],
)
def test_a_word_is_a_form_of_another_between_short_and_long(word, yes) -> None:
    assert answers.matches_form(word, "YMUlt") is yes


@given(st.text(max_size=60))
def test_any_answer_is_a_field(text: str) -> None:
    value = answers.field(text)
    assert isinstance(value, float | str)
    answers.keywords(text)
    answers.keyed(text)
    answers.without_header(text, ":WAVeform:PREamble?")
