"""Messages taken apart, headers matched, errors queued."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.bench.scpi import Block, Call, Commands, ScpiError, Status, real, split, take_apart


def known(*headers: str) -> Commands:
    commands = Commands()
    for header in headers:
        commands.add(header, lambda call, header=header: f"{header} {call.suffixes}")  # type: ignore[misc]
    return commands


@pytest.mark.parametrize(
    ("came", "meant"),
    [
        # short and long forms, and nothing in between (SCPI-1999 volume 1, 6.2.1)
        ("WAV:POIN", True), ("waveform:points", True), (":Wav:Points", True),
        ("WAVE:POIN", False), ("WAVEF:POINTS", False), ("WAV:POI", False), ("WAV", False),
        ("WAV:POIN?", False), ("WAV:POIN:MODE", False),
    ],
)  # fmt: skip
def test_a_header_is_known_in_its_short_and_its_long_form_only(came: str, meant: bool) -> None:
    assert (known("WAVeform:POINts").find(came) is not None) is meant


@pytest.mark.parametrize(
    "came", ["SWE:POIN", "SENS:SWE:POIN", "sense:sweep:points", ":SENSE:SWE:POIN"]
)
def test_an_optional_node_may_be_left_out(came: str) -> None:
    assert known("[SENSe:]SWEep:POINts").find(came)


@pytest.mark.parametrize("came", ["VOLT:RANG", "SENS:VOLT:DC:RANG:UPP", "VOLT:DC:RANGE"])
def test_optional_nodes_may_stand_in_the_middle_and_at_the_end(came: str) -> None:
    assert known("[SENSe:]VOLTage[:DC]:RANGe[:UPPer]").find(came)


@pytest.mark.parametrize(
    ("came", "number"), [("CHAN2:SCAL", 2), ("channel:scale", 1), ("CHAN12:SCAL", 12)]
)
def test_a_number_in_a_header_is_read_and_is_one_where_there_is_none(
    came: str, number: int
) -> None:
    found = known("CHANnel<n>:SCALe").find(came)
    assert found is not None
    assert found[1] == (number,)


def test_a_query_is_not_its_command() -> None:
    commands = known("WAVeform:FORMat", "WAVeform:FORMat?")
    command, query = commands.find("WAV:FORM"), commands.find("WAV:FORM?")
    assert command is not None
    assert query is not None
    assert command[0] is not query[0]


def test_what_is_taught_later_takes_the_place_of_what_was_there() -> None:
    commands = known("*CLS")
    commands.add("*CLS", lambda _: "later")
    found = commands.find("*cls")
    assert found is not None
    assert found[0](Call((), ())) == "later"


def test_marks_in_quotes_do_not_split() -> None:
    assert split('A "x;y";B', ";") == ['A "x;y"', "B"]
    assert take_apart("  WFSU SP,0 , NP,10 ") == ("WFSU", ("SP", "0", "NP", "10"))
    assert take_apart("*IDN?") == ("*IDN?", ())


@pytest.mark.parametrize(
    ("payload", "digits", "wire"),
    [
        # IEEE 488.2, 8.7.9: definite length arbitrary block response data
        (b"", 1, b"#10"), (b"ABCDE", 1, b"#15ABCDE"), (b"ABCDE", 2, b"#205ABCDE"),
        (b"ABCDE", 8, b"#800000005ABCDE"), (b"ABCDE", 9, b"#9000000005ABCDE"),
        (b"#\n,;", 1, b"#14#\n,;"),
    ],
)  # fmt: skip
def test_a_block_is_as_the_standard_has_it(payload: bytes, digits: int, wire: bytes) -> None:
    assert bytes(Block(payload, digits=digits)) == wire


@pytest.mark.parametrize(
    ("text", "value"),
    [("1e-3", 1e-3), ("-2.5", -2.5), (".5", 0.5), ("5 mV", 5e-3), ("2us", 2e-6), ("1 V", 1.0),
     ("10k", 1e4), ("3.", 3.0), ("1.2E+3", 1200.0)],
)  # fmt: skip
def test_numbers_are_read_with_their_units(text: str, value: float) -> None:
    assert Call((text,), ()).number(-1e9, 1e9) == pytest.approx(value, rel=1e-15)


@pytest.mark.parametrize(
    ("arguments", "code"),
    [
        (("abc",), -104),
        ((), -109),
        (("1", "2"), -108),
        (("11",), -222),
        (("nan",), -104),
        (("",), -109),
    ],
)
def test_numbers_that_are_none_or_too_large_are_refused(
    arguments: tuple[str, ...], code: int
) -> None:
    with pytest.raises(ScpiError) as caught:
        Call(arguments, ()).number(0.0, 10.0)
    assert caught.value.code == code


@pytest.mark.parametrize(
    ("text", "meant"), [("lsbf", "LSBF"), ("MSBFirst", "MSBF"), ('"LSBF"', "LSBF")]
)
def test_words_are_read_in_both_forms(text: str, meant: str) -> None:
    assert Call((text,), ()).word("LSBFirst", "MSBFirst") == meant
    with pytest.raises(ScpiError, match="-224"):
        Call(("LSBFI",), ()).word("LSBFirst", "MSBFirst")


def test_errors_come_out_first_in_first_out_and_overflow_says_so() -> None:
    status = Status()
    for _ in range(20):
        status.fail(-113)
    status.fail(-222)
    codes = [status.next_error() for _ in range(17)]
    assert codes == [-113] * 15 + [-350, 0]


@pytest.mark.parametrize(("code", "bit"), [(-113, 32), (-222, 16), (-310, 8), (-410, 4)])
def test_each_hundred_of_errors_sets_its_bit(code: int, bit: int) -> None:
    status = Status()
    assert status.read_events() == 128  # switched on
    status.fail(code)
    assert status.read_events() == bit
    assert status.read_events() == 0


def test_clearing_empties_queue_and_register() -> None:
    status = Status()
    status.fail(-113)
    status.clear()
    assert (status.next_error(), status.read_events()) == (0, 0)


@given(st.floats(1e-12, 1e12))
def test_numbers_are_printed_to_twelve_digits(value: float) -> None:
    assert float(real(value)) == pytest.approx(value, rel=1e-11)
    assert float(real(-value)) == pytest.approx(-value, rel=1e-11)


def test_a_negative_zero_is_printed_as_zero() -> None:
    assert real(-0.0) == "+0.000000e+00"
