"""The rendered screen of each state, kept as text: run with ``UPDATE_GOLDEN=1`` to write it anew."""

from __future__ import annotations

import os
from dataclasses import replace
from pathlib import Path

import pytest

from tests.screen.driving import QUIET, driven, rows, shown, until
from tests.screen.scripted import STATES, Scripted, Turned
from trimmer.screen.app import TuneApp
from trimmer.screen.cautions import CautionsScreen
from trimmer.screen.help import HelpScreen
from trimmer.screen.pictures.raster import Dots
from trimmer.screen.sheet import SheetScreen

GOLDEN = Path(__file__).parent / "golden"
SIZES = ((80, 24), (120, 40), (200, 60))
LARGE = (
    "advice",
    "advice-lower",
    "half-way",
    "slow",
    "stop",
    "wrong-trim",
    "wrong-way",
    "finished",
)


@pytest.fixture(autouse=True)
def _still_clock(monkeypatch: pytest.MonkeyPatch) -> None:
    """Readings do not age while a picture is taken."""
    monkeypatch.setattr("trimmer.screen.tune.monotonic", lambda: 1000.0)


def compare(name: str, drawn: list[str]) -> None:
    """Hold what was drawn against what is kept, or keep it."""
    path = GOLDEN / f"{name}.txt"
    fresh = "\n".join(drawn) + "\n"
    if os.environ.get("UPDATE_GOLDEN"):
        path.write_text(fresh, encoding="utf-8")
    assert fresh == path.read_text(encoding="utf-8"), f"{name} looks different"


@pytest.mark.parametrize(
    ("state", "size"),
    [(state, size) for size in SIZES for state in (STATES if size == SIZES[0] else LARGE)],
)
async def test_a_state_looks_as_it_did(state: str, size: tuple[int, int]) -> None:
    session = Scripted(STATES[state])
    async with driven(session, replace(QUIET, hand=Turned()), size) as pilot:
        await shown(pilot, session)
        if state in ("finished", "failed"):
            await until(pilot, lambda: isinstance(pilot.app.screen, SheetScreen))
        compare(f"{state}-{size[0]}x{size[1]}", rows(pilot))


async def test_a_real_hand_sees_other_keys() -> None:
    session = Scripted(STATES["file"])
    async with driven(session) as pilot:
        await shown(pilot, session)
        compare("real-hand-80x24", rows(pilot))


async def test_without_braille_it_looks_as_it_did() -> None:
    session = Scripted(STATES["half-way"])
    async with driven(session, replace(QUIET, dots=Dots.BLOCK), (120, 40)) as pilot:
        await shown(pilot, session)
        drawn = rows(pilot)
        assert not any("\u2800" <= glyph < "\u2900" for row in drawn for glyph in row)
        compare("blocks-120x40", drawn)


@pytest.mark.parametrize("size", SIZES, ids=lambda size: f"{size[0]}x{size[1]}")
async def test_cautions_and_help_look_as_they_did(size: tuple[int, int]) -> None:
    app = TuneApp(Scripted(STATES["advice"]), replace(QUIET, cautions=True))
    async with app.run_test(size=size, notifications=True) as pilot:
        await until(pilot, lambda: isinstance(app.screen, CautionsScreen))
        compare(f"cautions-{size[0]}x{size[1]}", rows(pilot))
        await pilot.press("enter")
        await pilot.press("question_mark")
        await until(pilot, lambda: isinstance(app.screen, HelpScreen))
        compare(f"help-{size[0]}x{size[1]}", [row for row in rows(pilot) if row.startswith("    ")])
