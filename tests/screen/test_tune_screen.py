"""The tuning screen driven by keys, by mouse, by its palette and by the reports of a session."""

from __future__ import annotations

import threading
import time
from collections.abc import Callable, Iterator
from dataclasses import replace

import pytest
from textual.command import CommandList, CommandPalette
from textual.events import Key
from textual.pilot import Pilot
from textual.widgets import Input

from tests.screen.driving import QUIET, driven, rows, screen_of, shown, text, until
from tests.screen.scripted import (
    CONFIRMING,
    FINISHED,
    NO_SIGNAL,
    OPENED,
    SOURCE_LOST,
    STATES,
    Scripted,
    Turned,
    advised,
    followed,
    measured,
)
from trimmer.reports import Failed, Report
from trimmer.screen.app import TuneApp
from trimmer.screen.cautions import CautionsScreen
from trimmer.screen.commands import deeds
from trimmer.screen.help import DeedsWidget, HelpScreen
from trimmer.screen.pictures.raster import Dots
from trimmer.screen.sheet import SheetScreen
from trimmer.screen.widgets.keys import KeysWidget

SAID_BY_KEY = {"enter": "moved", "space": "moved", "b": "back", "e": "at-stop", "o": "skip"}
SAID_BY_CAP = {"Enter": "moved", "b": "back", "e": "at-stop", "o": "skip"}
SAID_BY_NAME = {
    "I have turned it": "moved",
    "Take the last turn back": "back",
    "The trim is at its end": "at-stop",
    "Ask for another way": "skip",
}


async def click_key(pilot: Pilot[int], cap: str) -> None:
    """Click the key with this on it."""
    widget = pilot.app.screen.query_one(KeysWidget)
    line = "".join(segment.text for segment in widget.render_line(0))
    assert await pilot.click(KeysWidget, offset=(line.index(f" {cap} ") + 1, 0))


async def test_every_word_can_be_said_by_key() -> None:
    session = Scripted(STATES["file"])
    async with driven(session) as pilot:
        await shown(pilot, session)
        await pilot.press(*SAID_BY_KEY)
        assert session.heard == list(SAID_BY_KEY.values())


async def test_every_word_can_be_said_by_mouse() -> None:
    session = Scripted(STATES["file"])
    async with driven(session, size=(120, 40)) as pilot:
        await shown(pilot, session)
        for cap in SAID_BY_CAP:
            await click_key(pilot, cap)
        assert session.heard == list(SAID_BY_CAP.values())


async def test_every_word_can_be_said_in_the_palette() -> None:
    session = Scripted(STATES["file"])
    async with driven(session) as pilot:
        await shown(pilot, session)
        for count, name in enumerate(SAID_BY_NAME, 1):
            await pilot.press("ctrl+p")
            await until(pilot, lambda: isinstance(pilot.app.screen, CommandPalette))
            pilot.app.screen.query_one(Input).value = name
            options = pilot.app.screen.query_one(CommandList)
            await until(pilot, lambda options=options, name=name: first_of(options) == name)  # type: ignore[misc]
            await pilot.press("enter")
            await until(pilot, lambda count=count: len(session.heard) == count)  # type: ignore[misc]
        assert session.heard == list(SAID_BY_NAME.values())


def first_of(options: CommandList) -> str:
    """Give the name of the first entry of the palette."""
    return str(options.get_option_at_index(0).prompt).splitlines()[0] if options.options else ""


async def test_every_action_that_has_a_key_is_in_the_palette_and_in_the_help() -> None:
    session = Scripted(STATES["file"])
    async with driven(session, replace(QUIET, hand=Turned())) as pilot:
        screen = await shown(pilot, session)
        app = pilot.app
        assert isinstance(app, TuneApp)
        bound = {binding.action for _, binding in screen._bindings if binding.description}
        ours = {action for action in bound if hasattr(screen, f"action_{action.partition('(')[0]}")}
        listed = {deed.action.removeprefix("screen.") for deed in deeds(app, screen)}
        inherited = {"app.focus_next", "app.focus_previous", "screen.copy_text", "copy_text"}
        assert ours - inherited - {"minimize"} <= listed
        names = {command.title for command in app.get_system_commands(screen)}
        assert names == {deed.name for deed in deeds(app, screen)}
        await pilot.press("question_mark")
        await until(pilot, lambda: isinstance(app.screen, HelpScreen))
        assert {deed.name for deed in app.screen.query_one(DeedsWidget).deeds} == names


async def test_a_line_of_the_help_does_what_it_says_when_it_is_clicked() -> None:
    session = Scripted(STATES["file"])
    async with driven(session, size=(120, 60)) as pilot:
        await shown(pilot, session)
        await pilot.press("f1")
        await until(pilot, lambda: isinstance(pilot.app.screen, HelpScreen))
        listed = pilot.app.screen.query_one(DeedsWidget).deeds
        at = next(at for at, deed in enumerate(listed) if deed.action == "screen.say('skip')")
        await pilot.click(DeedsWidget, offset=(30, at))
        await until(pilot, lambda: session.heard == ["skip"])
        assert not isinstance(pilot.app.screen, HelpScreen)


async def test_the_help_scrolls_and_closes_by_key_and_by_mouse() -> None:
    session = Scripted(STATES["advice"])
    async with driven(session) as pilot:
        await shown(pilot, session)
        await click_key(pilot, "?")
        await until(pilot, lambda: isinstance(pilot.app.screen, HelpScreen))
        before = rows(pilot)
        await click_key(pilot, "↓")
        await until(pilot, lambda: rows(pilot) != before)
        await click_key(pilot, "Esc")
        await until(pilot, lambda: not isinstance(pilot.app.screen, HelpScreen))
        await pilot.press("question_mark")
        await pilot.press("escape")
        await until(pilot, lambda: not isinstance(pilot.app.screen, HelpScreen))


async def test_arrows_turn_the_trim_the_screwdriver_is_on() -> None:
    session, turned = Scripted(STATES["advice"]), Turned()
    async with driven(session, replace(QUIET, hand=turned, travel=0.9)) as pilot:
        await shown(pilot, session)
        await pilot.press(
            "right", "left", "full_stop", "comma", "down", "right", "up", "shift+left"
        )
        assert turned.turns == [
            ("upper", pytest.approx(0.01)),
            ("upper", pytest.approx(-0.01)),
            ("upper", pytest.approx(0.0025)),
            ("upper", pytest.approx(-0.0025)),
            ("lower", pytest.approx(0.01)),
            ("upper", pytest.approx(-0.0025)),
        ]


async def test_the_simulated_trims_turn_by_mouse_too() -> None:
    session, turned = Scripted(STATES["advice"]), Turned()
    async with driven(session, replace(QUIET, hand=turned)) as pilot:
        await shown(pilot, session)
        for cap in ("→", "←", "↑↓", ".", ","):
            await click_key(pilot, cap)
        assert [trim for trim, _ in turned.turns] == ["upper", "upper", "lower", "lower"]
        assert [turns > 0 for _, turns in turned.turns] == [True, False, True, False]


async def test_without_a_simulated_unit_arrows_turn_nothing() -> None:
    session = Scripted(STATES["advice"])
    async with driven(session) as pilot:
        screen = await shown(pilot, session)
        await pilot.press("right", "left", "down")
        assert screen.hand is None
        assert session.heard == []
        assert "→" not in rows(pilot)[-1]


async def test_a_whole_session_goes_from_the_first_reading_to_the_sheet_without_a_key() -> None:
    session = Scripted(
        (OPENED, measured(0, 0.2, 0.1), advised(0), followed(0.5, turn=0), followed(0.9, "slow", 0),
         followed(1.0, "stop", 0), followed(1.0, "stop", 0, still=True), measured(1, 0.0, 0.1),
         advised(1, "lower"), 0.1, measured(2, 0, 0), CONFIRMING, 0.1, measured(2, 0, 0), FINISHED),
        holds=False,
    )  # fmt: skip
    async with driven(session) as pilot:
        await until(pilot, lambda: isinstance(pilot.app.screen, SheetScreen))
        said = text(pilot)
        assert "THD 0.440 ±0.004 %, floor 0.42 ±0.03 %" in said
        assert "Set rise and fall even, then trim once more." in said
        assert "Sheet 12 with 3 readings is in the book" in said
        await pilot.press("enter")
        await until(pilot, lambda: pilot.app.return_value == 0)


@pytest.mark.parametrize("status", [3, 4, 5])
async def test_a_failure_is_shown_with_its_remedy_and_gives_its_status(status: int) -> None:
    failed = Failed(status, "What happened, with 3 numbers.", "Do this.")
    session = Scripted((OPENED, measured(0, 0.2, 0.1), failed), holds=False)
    async with driven(session) as pilot:
        await until(pilot, lambda: isinstance(pilot.app.screen, SheetScreen))
        assert "What happened, with 3 numbers. Do this." in text(pilot)
        await click_key(pilot, "Enter")
        await until(pilot, lambda: pilot.app.return_value == status)


async def test_a_session_that_falls_over_is_shown_and_not_a_traceback() -> None:
    class Falls(Scripted):
        def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
            yield OPENED
            raise RuntimeError("of all things")

    async with driven(Falls(())) as pilot:
        await until(pilot, lambda: isinstance(pilot.app.screen, SheetScreen))
        assert "RuntimeError: of all things" in text(pilot)
        await pilot.press("q")
        await until(pilot, lambda: pilot.app.return_value == 1)


async def test_the_sheet_need_not_be_waited_at() -> None:
    session = Scripted((OPENED, measured(0, 0, 0), FINISHED), holds=False)
    async with driven(session, replace(QUIET, wait_to_close=False)) as pilot:
        await until(pilot, lambda: pilot.app.return_value == 0)


@pytest.mark.parametrize("key", ["q", "ctrl+c", "ctrl+q"])
async def test_leaving_before_the_end_tells_the_session_and_gives_130(key: str) -> None:
    session = Scripted(STATES["half-way"])
    async with driven(session) as pilot:
        await shown(pilot, session)
        await pilot.press(key)
        await until(pilot, lambda: pilot.app.return_value == 130)
        assert session.heard == ["quit"]
        assert session.ended


@pytest.mark.parametrize("over", ["question_mark", "c", "ctrl+p"])
async def test_an_interrupt_is_answered_whatever_lies_over_the_session(over: str) -> None:
    session = Scripted(STATES["half-way"])
    async with driven(session) as pilot:
        screen = await shown(pilot, session)
        await pilot.press(over)
        await until(pilot, lambda: pilot.app.screen is not screen)
        await pilot.press("ctrl+c")
        await until(pilot, lambda: pilot.app.return_value == 130)


async def test_a_sheet_that_is_closed_because_of_leaving_gives_130_too() -> None:
    session = Scripted((*STATES["half-way"], "quit", FINISHED), holds=False)
    async with driven(session) as pilot:
        await until(pilot, lambda: screen_of(pilot).view.word is not None)
        await pilot.press("q")
        await until(pilot, lambda: pilot.app.return_value == 130)


async def test_a_session_that_does_not_let_go_is_left_after_a_while(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr("trimmer.screen.app.GRACE_S", 0.2)

    let_go = threading.Event()

    class Clings(Scripted):
        def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
            yield OPENED
            let_go.wait(30.0)
            self.ended = True

    session = Clings(())
    async with driven(session) as pilot:
        await until(pilot, lambda: screen_of(pilot).view.opened is not None)
        await pilot.press("q")
        await until(pilot, lambda: pilot.app.return_value == 130)
        assert not session.ended
        let_go.set()


async def test_cautions_come_first_and_nothing_is_read_before_they_are() -> None:
    session = Scripted(STATES["advice"])
    async with driven(session, replace(QUIET, cautions=True)) as pilot:
        await pilot.pause(0.1)
        assert isinstance(pilot.app.screen, CautionsScreen)
        assert not session.said
        said = text(pilot)
        for words in ("Mains kills.", "qualified people", "Your local rules, the maker's papers"):
            assert words in said
        await pilot.press("enter")
        await shown(pilot, session)


async def test_cautions_can_be_accepted_by_mouse_or_left_alone() -> None:
    session = Scripted(STATES["advice"])
    async with driven(session, replace(QUIET, cautions=True)) as pilot:
        await click_key(pilot, "Enter")
        await shown(pilot, session)
    unread = Scripted(STATES["advice"])
    async with driven(unread, replace(QUIET, cautions=True)) as pilot:
        await pilot.press("q")
        await until(pilot, lambda: pilot.app.return_value == 130)
        assert not unread.said


async def test_on_the_simulated_unit_the_cautions_stand_beside_the_session() -> None:
    session = Scripted(STATES["advice"])
    async with driven(session, replace(QUIET, cautions=True, hand=Turned())) as pilot:
        await shown(pilot, session)
        assert "Simulated, nothing is live." in text(pilot)
        await pilot.press("c")
        await until(pilot, lambda: isinstance(pilot.app.screen, CautionsScreen))
        await pilot.press("escape")
        await until(pilot, lambda: not isinstance(pilot.app.screen, CautionsScreen))


@pytest.mark.parametrize(
    ("reports", "strokes"),
    [
        ((followed(0.5), followed(0.9, "slow")), 1),
        ((followed(0.5), followed(1.0, "stop")), 2),
        ((followed(0.1, "wrong-trim"),), 3),
        ((followed(-0.1, "wrong-way"),), 3),
        ((followed(0.9, "slow"), 0.1, followed(0.92, "slow"), 0.1, followed(0.94, "slow")), 1),
    ],
)
async def test_the_bell_counts(
    reports: tuple[Report | float, ...], strokes: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    rung: list[float] = []
    monkeypatch.setattr(TuneApp, "bell", lambda self: rung.append(time.monotonic()))
    session = Scripted((*STATES["advice"], *reports))
    async with driven(session, replace(QUIET, bell=True)) as pilot:
        await shown(pilot, session)
        await until(pilot, lambda: len(rung) >= strokes)
        await pilot.pause(0.5)
        assert len(rung) == strokes


async def test_the_bell_is_silent_on_request(monkeypatch: pytest.MonkeyPatch) -> None:
    rung: list[float] = []
    monkeypatch.setattr(TuneApp, "bell", lambda self: rung.append(time.monotonic()))
    session = Scripted((*STATES["advice"], "moved", followed(1.0, "stop")))
    async with driven(session, replace(QUIET, bell=True)) as pilot:
        await until(pilot, lambda: screen_of(pilot).view.advice is not None)
        await pilot.press("m", "enter")
        await shown(pilot, session)
        await pilot.pause(0.4)
        assert rung == []


@pytest.mark.parametrize(
    ("lost", "words"),
    [(SOURCE_LOST, "waits for the source"), (NO_SIGNAL, "waits for a signal")],
)
async def test_what_is_lost_is_said_with_its_remedy_and_it_goes_on_by_itself(
    lost: Report, words: str
) -> None:
    session = Scripted((*STATES["half-way"], lost, "moved", followed(0.6)))
    async with driven(session) as pilot:
        await until(pilot, lambda: words in text(pilot))
        assert lost.message in text(pilot)  # type: ignore[union-attr]
        assert lost.remedy in text(pilot)  # type: ignore[union-attr]
        await pilot.press("enter")
        await shown(pilot, session)
        assert "waits for the hand" in text(pilot)


async def test_the_status_line_always_says_source_age_and_book() -> None:
    for name in ("advice", "half-way", "wrong-trim", "source-lost", "confirming"):
        session = Scripted(STATES[name])
        async with driven(session) as pilot:
            await shown(pilot, session)
            line = rows(pilot)[-2]
            assert "waits for" in line
            assert "read" in line
            assert "bench, inv" in line
            assert "book has" in line


async def test_readings_that_stop_coming_are_seen_to_be_old(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    session = Scripted(STATES["half-way"])
    async with driven(session) as pilot:
        screen = await shown(pilot, session)
        assert not screen.query_one("#status").has_class("-stale")
        later = time.monotonic() + 5.0
        monkeypatch.setattr("trimmer.screen.tune.monotonic", lambda: later)
        screen.display_view()
        await pilot.pause()
        assert screen.query_one("#status").has_class("-stale")
        assert "read 5 s ago" in text(pilot)


async def test_keys_are_answered_while_frames_pour_in() -> None:
    """Each within the patience of `until`; how soon is printed (`pytest -s`)."""

    class Pours(Scripted):
        def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
            yield from STATES["advice"]  # type: ignore[misc]
            number = 0
            while not stop():
                number += 1
                yield followed((number % 100) / 100)
                time.sleep(0.004)

    session, turned = Pours(()), Turned()
    async with driven(session, replace(QUIET, hand=turned), (120, 40)) as pilot:
        await until(pilot, lambda: screen_of(pilot).view.word is not None)
        waits = []
        for count in range(1, 11):
            begun = time.monotonic()
            pilot.app.post_message(Key("right", None))
            await until(pilot, lambda count=count: len(turned.turns) == count)  # type: ignore[misc]
            waits.append(turned.made_at[-1] - begun)
        print(f"a key is answered after {1e3 * sorted(waits)[5]:.0f} ms, median of ten")
        await pilot.press("q")


async def test_it_can_be_resized_at_any_time_down_to_nothing() -> None:
    session = Scripted(STATES["half-way"])
    async with driven(session, size=(80, 24)) as pilot:
        await shown(pilot, session)
        for size in (
            (120, 40),
            (200, 60),
            (60, 20),
            (40, 12),
            (20, 6),
            (5, 2),
            (300, 90),
            (80, 24),
        ):
            await pilot.resize_terminal(*size)
            await pilot.pause(0.02)
            assert len(rows(pilot)) == size[1]
        assert "waits for the hand" in text(pilot)


async def test_light_dark_and_plain_curves_change_while_it_runs() -> None:
    session = Scripted(STATES["half-way"])
    async with driven(session, size=(120, 40)) as pilot:
        screen = await shown(pilot, session)
        before = pilot.app.theme
        await pilot.press("t")
        assert pilot.app.theme != before
        assert any("\u2800" <= glyph < "\u2900" for row in rows(pilot) for glyph in row)
        await pilot.press("g")
        await until(pilot, lambda: screen.dots is Dots.BLOCK)
        assert not any("\u2800" <= glyph < "\u2900" for row in rows(pilot) for glyph in row)


@pytest.mark.parametrize("name", ["slow", "stop", "wrong-trim", "wrong-way", "half-way"])
async def test_without_colour_the_same_glyphs_say_the_same(
    name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    session = Scripted(STATES[name])
    async with driven(session) as pilot:
        await shown(pilot, session)
        coloured = rows(pilot)[:-2]
    monkeypatch.setenv("NO_COLOR", "1")
    session = Scripted(STATES[name])
    async with driven(session) as pilot:
        await shown(pilot, session)
        assert rows(pilot)[:-2] == coloured
        strips = pilot.app.screen._compositor.render_strips(pilot.app.size)
        colours = {segment.style.color.triplet for strip in strips for segment in strip
                   if segment.style is not None and segment.style.color is not None}  # fmt: skip
        assert all(c is None or max(c) - min(c) <= 1 for c in colours)
