"""Text from instruments, files, units and exceptions can do nothing but be shown."""

from __future__ import annotations

from dataclasses import replace

import pytest

from tests.screen.driving import driven, rows, shown, text, until
from tests.screen.scripted import (
    FEW_CODES,
    FINISHED,
    OPENED,
    Scripted,
    advised,
    followed,
    measured,
)
from trimmer.guidance.advice import Cause
from trimmer.reports import Awaiting, Failed
from trimmer.screen.sheet import SheetScreen

HOSTILE = (
    "x [/] y",
    "[bold red]loud[/bold red]",
    "[@click=app.leave]here[/]",
    "[@click=screen.say('quit')]",
    "$error [link=file:///etc]",
    "{0} %s \\[a]",
    "[",
    "漢字かな 👩‍🔧 e\u0301",
    "a" * 500,
)


@pytest.mark.parametrize("words", HOSTILE)
async def test_hostile_words_are_shown_wherever_they_come_from(words: str) -> None:
    opened = replace(OPENED, source=words, identity=words, unit=words, kind=words, sheet=words)
    flag = replace(FEW_CODES, message=words, remedy=words)
    advice = replace(advised(), advice=replace(advised().advice, reason=words, notice=words))
    first = replace(measured(0, 0.2, 0.1, (flag,)), source=words, notes=(words,))
    session = Scripted(
        (opened, first, advice, followed(0.3), Awaiting(words, words, words), followed(0.4))
    )
    async with driven(session) as pilot:
        await shown(pilot, session)
        assert words[:6] in text(pilot)
        for y in (0, 4, 12, 13, 14, 21, 22):
            await pilot.click(offset=(4, y))
        assert session.heard == []
        assert pilot.app.return_value is None


@pytest.mark.parametrize("words", HOSTILE)
async def test_hostile_words_are_shown_on_the_sheet(words: str) -> None:
    done = replace(
        FINISHED.done, reason=words, remainder=(Cause(words, 0.001, words),), net_turns={}
    )
    session = Scripted((OPENED, replace(FINISHED, done=done, sheet=words)), holds=False)
    async with driven(session) as pilot:
        await until(pilot, lambda: isinstance(pilot.app.screen, SheetScreen))
        assert words[:6] in text(pilot)


@pytest.mark.parametrize("words", HOSTILE)
async def test_hostile_words_of_a_failure_are_shown(words: str) -> None:
    session = Scripted((OPENED, Failed(4, words, words)), holds=False)
    async with driven(session) as pilot:
        await until(pilot, lambda: isinstance(pilot.app.screen, SheetScreen))
        assert words[:6] in text(pilot)


async def test_control_characters_never_reach_the_terminal() -> None:
    words = "a\x1b[2Jb\x07c\x9bd\r\ne\tf\x7f"
    session = Scripted((replace(OPENED, unit=words), Awaiting("signal", words, words)))
    async with driven(session) as pilot:
        await shown(pilot, session)
        for row in rows(pilot):
            assert all(glyph >= " " and not "\x7f" <= glyph < "\xa0" for glyph in row), repr(row)
