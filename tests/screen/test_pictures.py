"""Pictures are pure functions: sizes, meanings, and what must differ without colour."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from rich.cells import cell_len

from trimmer.guidance.advice import Sense, Trim
from trimmer.screen.pictures.bar import bar, cell_of
from trimmer.screen.pictures.letters import LOW, SIZES, TALL, letters
from trimmer.screen.pictures.raster import Canvas, Dots, told
from trimmer.screen.pictures.runs import Picture, fitted, longest, plain, wrapped
from trimmer.screen.pictures.signs import sign
from trimmer.screen.pictures.words import Ground, setting, words

SENSES: tuple[Sense, ...] = ("clockwise", "counter-clockwise")
SIGNS = ("turn", "slow", "stop", "wrong-trim", "wrong-way", "wait", "lost", "done", "ended")
GROUNDS: tuple[Ground, ...] = ("bare", "bars", "solid", "checks", "slants")


def fills(picture: Picture, width: int, height: int) -> bool:
    """Whether a picture is exactly as wide and as high as its space."""
    lines = plain(picture)
    return len(lines) == height and all(len(line) == width for line in lines)


def test_every_pixel_of_a_mask_is_told_once() -> None:
    mask = np.random.default_rng(3).random((12, 20)) < 0.4
    for dots in Dots:
        wide, high = dots.value
        lines = told(mask, dots)
        assert (len(lines), len(lines[0])) == (12 // high, 20 // wide)
    ink = sum(bin(ord(glyph) - 0x2800).count("1") for line in told(mask, Dots.BRAILLE)
              for glyph in line if glyph != " ")  # fmt: skip
    assert ink == mask.sum()


def test_a_disc_covers_as_much_as_geometry_says() -> None:
    canvas = Canvas(40, 20, fine=4)
    pixels = canvas.ink(canvas.disc(canvas.middle, 15.0))
    area = pixels.sum() * (40 / pixels.shape[1]) * (40 / pixels.shape[0])
    assert area == pytest.approx(math.pi * 15.0**2, rel=0.01)


def test_all_letters_of_an_alphabet_have_its_height_and_differ() -> None:
    for alphabet, height in ((TALL, 7), (LOW, 5)):
        assert {glyph.shape[0] for glyph in alphabet.values()} == {height}
        drawn = {name: glyph.tobytes() + bytes(glyph.shape) for name, glyph in alphabet.items()}
        alike = {name for name in drawn if list(drawn.values()).count(drawn[name]) > 1}
        assert alike <= {"0", "O"}


def test_all_that_is_ever_said_in_large_letters_can_be_spelt() -> None:
    said = (
        "UPPER LOWER CLOCKWISE COUNTER- 0123456789.° TURNS SLOW STOP WRONG TRIM WAY BACK HANDS OFF"
    )
    assert set(said) <= set(TALL)
    assert set(TALL) == set(LOW)


@pytest.mark.parametrize("size", SIZES)
def test_letters_take_the_rows_and_the_width_they_say(size: object) -> None:
    for text in ("UPPER 22°", "COUNTER-", "1.4 TURNS"):
        lines = letters(text, size)  # type: ignore[arg-type]
        assert len(lines) == size.rows  # type: ignore[attr-defined]
        assert {len(line) for line in lines} == {size.width(text)}  # type: ignore[attr-defined]


@given(st.integers(1, 220), st.integers(1, 40), st.sampled_from(GROUNDS))
def test_large_words_fill_any_space_exactly(width: int, height: int, ground: Ground) -> None:
    ways = (("UPPER 22°", "CLOCKWISE"), ("UPPER", "22°", "CLOCKWISE"))
    assert fills(words(ways, "a little more", width, height, ground), width, height)


@given(st.integers(58, 220), st.integers(9, 40))
def test_large_words_grow_with_their_space(width: int, height: int) -> None:
    ways = (("STOP",),)
    here, wider = setting(ways, width, height), setting(ways, width + 20, height + 4)
    assert here
    assert wider[0][1].rows >= here[0][1].rows >= 7


def test_large_words_can_be_read_from_a_metre_away_on_80_columns() -> None:
    # A letter of 1/200 of the distance is read with effort, 1/100 with ease (value from memory):
    # 5 to 10 mm at one metre. A row of a terminal is some 4.5 mm high.
    for ways in ((("UPPER 22°", "COUNTER-", "CLOCKWISE"),), (("WRONG TRIM", "UPPER"),)):
        chosen = setting(ways, 58, 10)
        assert chosen
        assert (
            min(size.down * (7 if size.alphabet == "tall" else 5) / 2 for _, size in chosen) >= 2.5
        )


def test_the_grounds_differ_without_colour() -> None:
    drawn = {ground: tuple(plain(words((("STOP",),), "", 58, 9, ground))) for ground in GROUNDS}
    assert len(set(drawn.values())) == len(GROUNDS)
    ink = {ground: sum(line.count("█") for line in lines) for ground, lines in drawn.items()}
    assert ink["solid"] > 2 * ink["bare"]


@pytest.mark.parametrize("kind", SIGNS)
@pytest.mark.parametrize("size", [(8, 4), (18, 9), (20, 10), (30, 15), (48, 24)])
def test_a_sign_fills_its_space_and_is_no_smudge(kind: str, size: tuple[int, int]) -> None:
    lines = sign(kind, *size, "upper", "clockwise")  # type: ignore[arg-type]
    assert len(lines) == size[1]
    assert {len(line) for line in lines} == {size[0]}
    ink = sum(glyph != " " for line in lines for glyph in line) / (size[0] * size[1])
    assert 0.05 < ink < 0.98


@pytest.mark.parametrize("size", [(18, 9), (20, 10), (30, 15)])
def test_signs_differ_in_at_least_a_quarter_of_their_cells(size: tuple[int, int]) -> None:
    drawn = {kind: "".join(sign(kind, *size, "upper", "clockwise")) for kind in SIGNS}  # type: ignore[arg-type]
    for one in SIGNS:
        for other in SIGNS:
            if one < other:
                apart = sum(a != b for a, b in zip(drawn[one], drawn[other], strict=True))
                assert apart / len(drawn[one]) > 0.25, (one, other)


@pytest.mark.parametrize("kind", ["turn", "wrong-way"])
def test_the_other_sense_is_the_mirror_image(kind: str) -> None:
    mirror = str.maketrans("▘▝▖▗▌▐▞▚▛▜▙▟", "▝▘▗▖▐▌▚▞▜▛▟▙")
    here = sign(kind, 20, 10, "upper", "clockwise")  # type: ignore[arg-type]
    there = sign(kind, 20, 10, "upper", "counter-clockwise")  # type: ignore[arg-type]
    assert here != there
    assert there == [line[::-1].translate(mirror) for line in here]


def test_the_arrowhead_of_a_clockwise_turn_is_on_the_right() -> None:
    lines = sign("turn", 20, 10, "upper", "clockwise")
    left = sum(glyph != " " for line in lines for glyph in line[:5])
    right = sum(glyph != " " for line in lines for glyph in line[15:])
    assert right > left


@pytest.mark.parametrize("trim", ["upper", "lower"])
def test_the_cross_is_on_the_trim_that_was_not_asked_for(trim: Trim) -> None:
    lines = sign("wrong-trim", 20, 10, trim, "clockwise")
    upper, lower = "".join(lines[:5]), "".join(lines[5:])
    arrow_at = upper if trim == "upper" else lower
    cross_at = lower if trim == "upper" else upper
    assert sum(glyph != " " for glyph in arrow_at) > sum(glyph != " " for glyph in cross_at)


def test_the_slot_turns_with_the_screw() -> None:
    upright = sign("turn", 30, 15, "upper", "clockwise", 0.0)
    turned = sign("turn", 30, 15, "upper", "clockwise", math.pi / 2)
    assert upright[7][14:16] == "  "
    assert turned[7][14:16] != "██" or turned[4][14:16] == "██"
    assert upright != turned


@given(st.floats(-3, 3), st.integers(12, 200), st.integers(1, 5), st.sampled_from(SENSES))
def test_the_bar_fills_its_space_whatever_the_share(
    share: float, width: int, rows: int, sense: Sense
) -> None:
    assert fills(bar(share, width, rows, sense), width, rows)


@given(st.floats(0, 1), st.floats(0, 1))
def test_the_bar_grows_with_the_share(one: float, other: float) -> None:
    few, many = sorted((one, other))
    lines = [plain(bar(share, 78, 1))[0] for share in (few, many)]
    ink = [2 * line.count("█") + line.count("▌") for line in lines]
    assert ink[0] <= ink[1]


def test_the_bar_is_as_full_as_the_share_says() -> None:
    line = plain(bar(0.5, 160, 1))[0]
    track = cell_of(1.0, 160) - cell_of(0.0, 160)
    assert line.count("█") - 1 == pytest.approx(track / 2, abs=1)


@given(st.floats(-0.4, 1.5))
def test_the_bar_of_the_other_sense_is_the_mirror_image(share: float) -> None:
    here = plain(bar(share, 78, 1, "clockwise"))[0]
    there = plain(bar(share, 78, 1, "counter-clockwise"))[0]
    assert there == here[::-1].replace("▌", "▐")


def test_too_far_the_wrong_way_and_not_known_differ_without_colour() -> None:
    assert "▚" in plain(bar(1.2, 78, 1))[0]
    assert "╳" in plain(bar(-0.1, 78, 1))[0]
    assert "╌" in plain(bar(None, 78, 1))[0]
    assert not {"▚", "╳", "╌"} & set(plain(bar(0.7, 78, 1))[0])


@given(st.text(), st.integers(0, 40))
def test_a_fitted_text_has_its_width(text: str, width: int) -> None:
    assert cell_len(fitted(text, width)) == width


@given(st.text(alphabet="ab c", max_size=200), st.integers(5, 40), st.integers(1, 4))
def test_a_wrapped_text_keeps_to_its_rows(text: str, width: int, most: int) -> None:
    lines = wrapped(text, width, most)
    assert len(lines) <= most
    assert all(len(line) <= width for line in lines)


def test_the_longest_wording_that_fits_is_taken() -> None:
    assert longest(10, "far too long a text", "fits here", "x") == "fits here"
    assert longest(1, "no", "nor") == "nor"
