"""Dialect files: the shipped ones, a person's own, and every fault with its place."""

from __future__ import annotations

from pathlib import Path

import pytest

from drivers.contract import SourceRefused
from drivers.visa import dialect_names
from drivers.visa.shelf import DialectFault, chosen, read_dialect, shelf

NAMES = {
    "format-trace",
    "ten-field",
    "ten-field-code",
    "ten-field-signed",
    "keyword-curve",
    "descriptor",
    "vdiv-text",
    "data-header",
    "memory-header",
}

SOUND = """\
name = "mine"
about = "An instrument of my own"
data = "DATA?"

[find]
rank = 5
ask = ["SCALES?"]
numbers = 2

[[acquire]]
send = ["GO"]
finish = "*OPC?"

[[preamble]]
shape = "numbers"
ask = "SCALES?"
fields = ["volts_a_code", "interval"]

[codes]
width = 1

[scale]
volts = "code * volts_a_code"
interval_s = "interval"
"""

FORBIDDEN_WHILE_ASKING = ("*RST", "AUTO", "RUN", "STOP", "SING", "ARM", "TRMD", "DIG", "INIT")


def faults_of(text: str) -> str:
    with pytest.raises(DialectFault) as caught:
        read_dialect(text, "mine.toml")
    assert caught.value.remedy
    return str(caught.value)


def test_the_shipped_dialects_are_sound_and_have_their_names() -> None:
    assert set(dialect_names()) == NAMES


@pytest.mark.parametrize("name", sorted(NAMES))
def test_what_a_dialect_asks_to_be_found_is_a_harmless_query(name) -> None:
    find = shelf()[0][name].find
    assert find is not None
    for query in [*find.ask, *(query for confirm in find.confirm for query in confirm.ask)]:
        assert query.split()[0].endswith("?")
        assert ";" not in query
        assert not any(word in query.upper() for word in FORBIDDEN_WHILE_ASKING)


@pytest.mark.parametrize("name", sorted(NAMES))
def test_no_dialect_resets_or_sets_up_by_itself(name) -> None:
    text = (Path("drivers/visa/dialects") / f"{name}.toml").read_text(encoding="utf-8")
    assert "*RST" not in text
    assert "AUToscale" not in text
    assert "AUTOSet" not in text.replace("AutoSet", "AUTOSet")


def test_a_sound_file_of_a_person_is_read(tmp_path) -> None:
    (tmp_path / "dialects").mkdir()
    (tmp_path / "dialects" / "mine.toml").write_text(SOUND, encoding="utf-8")
    assert set(dialect_names(tmp_path)) == NAMES | {"mine"}
    assert chosen("mine", tmp_path).about == "An instrument of my own"


def test_a_persons_file_takes_the_place_of_a_shipped_one(tmp_path) -> None:
    (tmp_path / "dialects").mkdir()
    mine = SOUND.replace('name = "mine"', 'name = "vdiv-text"')
    (tmp_path / "dialects" / "x.toml").write_text(mine, encoding="utf-8")
    assert chosen("vdiv-text", tmp_path).about == "An instrument of my own"


def test_a_broken_file_does_not_hide_the_others_but_is_told(tmp_path) -> None:
    (tmp_path / "dialects").mkdir()
    (tmp_path / "dialects" / "mine.toml").write_text("name = ", encoding="utf-8")
    dialects, faults = shelf(tmp_path)
    assert set(dialects) == NAMES
    assert "mine.toml" in str(faults[0])
    assert chosen("ten-field", tmp_path).name == "ten-field"
    with pytest.raises(DialectFault, match=r"mine\.toml"):
        chosen("mine", tmp_path)


def test_a_name_that_is_none_is_told_with_those_there_are() -> None:
    with pytest.raises(SourceRefused, match="no dialect") as caught:
        chosen("klingon\x1b[31m")
    assert "ten-field" in caught.value.remedy
    assert "\x1b" not in str(caught.value)


def test_every_fault_is_told_at_once_with_its_line_and_key() -> None:
    text = SOUND.replace('name = "mine"', 'name = "Mine"').replace("rank = 5", 'rank = "first"')
    text = text.replace("width = 1", 'width = "os.remove(1)"').replace('send = ["GO"]', "sent = 1")
    told = faults_of(text)
    assert "line 1, name" in told
    assert "line 6, find.rank" in told
    assert "line 11, acquire[0].sent" in told
    assert "line 20, codes.width: 'os.remove(1)' is not admitted" in told


def test_a_file_that_is_no_toml_is_told_with_line_and_column() -> None:
    assert "line 2, column" in faults_of('name = "x"\nabout = = 3\n')


@pytest.mark.parametrize(
    ("sound", "broken", "told"),
    [
        ('volts = "code * volts_a_code"', 'volts = "code * gain"', "no field 'gain'"),
        ('volts = "code * volts_a_code"', 'volts = "volts_a_code"', "does not use 'code'"),
        ('finish = "*OPC?"', "", "needs `finish` or `poll`"),
        ('finish = "*OPC?"', 'poll = "STATE?"', "`poll` needs one of"),
        ("numbers = 2", "", "needs `numbers`, `matches` or `carries_preamble`"),
        ('interval_s = "interval"', "interval_s = inf", "finite number"),
        ('interval_s = "interval"', "interval_s = nan", "finite number"),
        ('ask = ["SCALES?"]', 'ask = ["SCALES?\\nFORMAT"]', "one line"),
        ('ask = ["SCALES?"]', 'ask = ["SC{volume}?"]', "cannot be filled in"),
        ('ask = ["SCALES?"]', 'ask = ["SC{?"]', "braces"),
        ("numbers = 2", 'matches = "("', "no regular expression"),
        ('shape = "numbers"', 'shape = "cube"', "preamble"),
        ("rank = 5", "rank = 5.5", "find.rank"),
        ("rank = 5", "rank = true", "find.rank"),
        ("[codes]", "[colours]", "colours"),
        ('data = "DATA?"', "", "data"),
    ],
)
def test_a_fault_is_told(sound, broken, told) -> None:
    assert sound in SOUND
    assert told in faults_of(SOUND.replace(sound, broken))


def test_a_file_that_is_too_large_or_no_text_is_refused(tmp_path) -> None:
    folder = tmp_path / "dialects"
    folder.mkdir()
    (folder / "large.toml").write_bytes(b"#" * (1 << 19))
    (folder / "binary.toml").write_bytes(b"\xff\xfe\x00\x01")
    told = [str(fault) for fault in shelf(tmp_path)[1]]
    assert any("larger than" in fault for fault in told)
    assert any("binary.toml" in fault for fault in told)
