"""Reports taken up one after another; what is said of them; the mailbox they come through."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator
from dataclasses import replace

import numpy as np
import pytest

from drivers import SourceLost
from tests.screen.scripted import (
    CONFIRMING,
    FAILED,
    FEW_CODES,
    FINISHED,
    OPENED,
    REACH,
    SOURCE_LOST,
    STATES,
    Scripted,
    Turned,
    advised,
    followed,
    measured,
)
from trimmer.errors import BookError
from trimmer.measurement.reading import MeasurementError
from trimmer.reports import Failed, Followed, Report
from trimmer.screen import sentences
from trimmer.screen.bells import STROKES_S, bell_of, rung
from trimmer.screen.hand import KeyedHand
from trimmer.screen.mailbox import Mailbox, reports
from trimmer.screen.orders import amount, order
from trimmer.screen.shown import shown
from trimmer.screen.view import View, take


def seen(*given: Report, now: float = 100.0) -> View:
    """The view after some reports."""
    view = View(source="bench")
    for report in given:
        view = take(view, report, now)
    return view


def state(name: str) -> View:
    """The view of a named state."""
    return seen(*STATES[name])


def test_each_turn_has_one_step_and_the_newest_reading_counts() -> None:
    view = seen(OPENED, measured(0, 0.2, 0), measured(1, 0.1, 0), measured(1, 0.11, 0))
    assert [step.turn for step in view.steps] == [0, 1]
    assert view.steps[-1].thd == measured(1, 0.11, 0).reading.thd.value


def test_a_reading_after_a_turn_was_taken_back_takes_the_place_of_later_ones() -> None:
    view = seen(
        measured(0, 0.2, 0), measured(1, 0.1, 0), measured(2, 0.1, 0.1), measured(1, 0.1, 0)
    )
    assert [step.turn for step in view.steps] == [0, 1]


def test_an_advice_takes_the_live_word_of_the_turn_before_away() -> None:
    view = seen(*STATES["stop"], measured(4, 0.04, 0.03))
    assert view.word is None
    assert view.advice is None
    assert seen(*STATES["stop"], advised(4)).word is None


def test_what_the_trims_reach_and_the_floor_are_kept_until_better_ones_are_said() -> None:
    view = seen(*STATES["advice"], measured(4, 0, 0), advised(4, known=False))
    assert view.reach is REACH
    assert view.floor is not None
    assert view.parts is not None
    assert view.parts.reached is not None


def test_a_report_ends_what_was_waited_for() -> None:
    assert seen(*STATES["advice"], SOURCE_LOST).awaiting is SOURCE_LOST
    for report in (measured(3, 0, 0), advised(), followed(0.1), FINISHED, FAILED):
        assert seen(*STATES["advice"], SOURCE_LOST, report).awaiting is None


def test_the_age_of_a_reading_counts_from_its_last_sample() -> None:
    view = take(state("advice"), replace(followed(0.3), age_s=0.5), 200.0)
    assert view.read_at == pytest.approx(199.5)
    assert sentences.freshness(view, 200.2) == "read just now"
    assert sentences.freshness(view, 205.0) == "read 6 s ago"
    assert sentences.freshness(view, 800.0) == "read 10 min ago"


def test_only_a_watched_reading_that_stops_coming_is_called_old() -> None:
    watched, saved = state("half-way"), state("file")
    assert not sentences.stale(watched, 101.0)
    assert sentences.stale(watched, 104.0)
    assert not sentences.stale(saved, 900.0)


@pytest.mark.parametrize(
    ("name", "sign", "words", "ground"),
    [
        ("opening", "wait", "OPENING", "bare"),
        ("first-reading", "wait", "READING", "bare"),
        ("advice", "turn", "UPPER 22° CLOCKWISE", "bare"),
        ("advice-lower", "turn", "LOWER 44° COUNTER-CLOCKWISE", "bare"),
        ("half-way", "turn", "UPPER 22° CLOCKWISE", "bare"),
        ("slow", "slow", "SLOW", "bars"),
        ("stop", "stop", "STOP", "solid"),
        ("wrong-trim", "wrong-trim", "WRONG TRIM TURN UPPER", "checks"),
        ("wrong-way", "wrong-way", "WRONG WAY TURN BACK", "slants"),
        ("hold", "wait", "HOLD", "bare"),
        ("source-lost", "lost", "SOURCE LOST", "slants"),
        ("no-signal", "lost", "NO SIGNAL", "slants"),
        ("drifting", "wait", "LET IT WARM", "bare"),
        ("confirming", "wait", "HANDS OFF", "bare"),
        ("file", "turn", "UPPER 22° CLOCKWISE", "bare"),
        ("finished", "done", "DONE", "bare"),
        ("failed", "ended", "ENDED", "slants"),
    ],
)
def test_each_state_has_its_order(name: str, sign: str, words: str, ground: str) -> None:
    todo = order(state(name))
    assert (todo.sign, " ".join(todo.words[0]), todo.ground) == (sign, words, ground)


def test_a_turn_that_counts_as_made_is_no_longer_asked_for() -> None:
    assert order(seen(*STATES["advice"], followed(0.97, "turn", still=True))).sign == "wait"


def test_a_code_that_is_not_known_is_waited_for_all_the_same() -> None:
    todo = order(seen(OPENED, replace(SOURCE_LOST, code="something-new")))
    assert todo.words == (("WAIT",),)


@pytest.mark.parametrize(
    ("turns", "said"),
    [(0.0611, "22°"), (0.012, "4.3°"), (0.5, "180°"), (1.0, "1.0 TURNS"), (2.345, "2.3 TURNS")],
)
def test_how_far_is_said_in_degrees_up_to_a_whole_turn(turns: float, said: str) -> None:
    assert amount(advised(turns=turns).advice) == said


def test_the_expected_thd_is_said_also_when_it_rises_first() -> None:
    advice = replace(advised(), advice=replace(advised().advice, rises_first=True))
    said = sentences.expectation(seen(*STATES["advice"][:-1], advice))
    assert said == "THD 0.82 % now, 0.61 % after this turn (up first), floor 0.42 ±0.03 %"


def test_a_notice_is_said_before_the_reason() -> None:
    advice = replace(advised().advice, notice="The lower trim is at its end.")
    assert sentences.why(seen(OPENED, replace(advised(), advice=advice))) == advice.notice


def test_a_flag_is_said_with_its_remedy() -> None:
    said = sentences.matters(state("flagged"))
    assert said[0] == f"{FEW_CODES.message}: {FEW_CODES.remedy}"


def test_uneven_rise_and_fall_that_costs_most_is_said_first_before_any_turn() -> None:
    reading = measured(0, 0.0, 0.0, (FEW_CODES,))
    assert sentences.matters(seen(OPENED, reading))[0].startswith(
        "rise share 50.31 % (50) costs 0.35 %"
    )


def test_offset_is_not_said_where_the_input_blocks_it() -> None:
    blocked = measured(0, 0.1, 0.0).reading
    object.__setattr__(blocked, "ac_coupled", True)
    assert "offset" not in sentences.first_things(blocked)


@pytest.mark.parametrize(
    ("ratio", "sigma", "said"),
    [(0.00823, 4e-5, "0.823 ±0.004 %"), (0.0042, 3e-4, "0.42 ±0.03 %"), (0.0123, None, "1.23 %"),
     (0.0123, 0.0, "1.23 %"), (0.02, 0.003, "2.0 ±0.3 %")],
)  # fmt: skip
def test_a_percentage_has_as_many_digits_as_it_can_bear(
    ratio: float, sigma: float | None, said: str
) -> None:
    assert sentences.percent(ratio, sigma) == said


def test_the_bell_rings_on_a_change_and_counts_one_two_three_four() -> None:
    assert [len(STROKES_S[bell]) for bell in ("slow", "stop", "wrong", "done")] == [1, 2, 3, 4]
    slow, stop = state("slow"), state("stop")
    assert rung(state("half-way"), slow) == "slow"
    assert rung(slow, slow) is None
    assert rung(slow, stop) == "stop"
    assert bell_of(state("wrong-trim")) == bell_of(state("wrong-way")) == "wrong"
    assert rung(stop, state("confirming")) is None
    assert rung(state("confirming"), state("finished")) == "done"


def test_the_hand_on_the_keyboard_turns_the_trim_it_holds() -> None:
    turned = Turned()
    hand = KeyedHand(turned, travel=0.75)
    hand.turn("clockwise", fine=False)
    hand.trim = "lower"
    hand.turn("counter-clockwise", fine=True)
    assert turned.turns == [
        ("upper", pytest.approx(0.75 / 90)),
        ("lower", pytest.approx(-0.75 / 360)),
    ]


def test_the_trim_to_be_left_alone_is_named_and_where_the_screwdriver_is() -> None:
    hand = KeyedHand(Turned(), 0.75)
    value = shown(state("advice-lower"), 100.0, hand, silent=False)
    assert value.resting["lower"] == ()
    assert "leave it alone" in value.resting["upper"][0]
    assert "↓ moves it down" in value.resting["upper"][0]


def test_only_keys_that_do_something_now_are_on_show() -> None:
    real = {key.action for key in shown(state("advice"), 100.0, None, False).keys}
    assert not any("turn('" in action for action in real)
    assert "screen.say('moved')" not in real
    assert "screen.say('moved')" in {
        key.action for key in shown(state("file"), 0.0, None, False).keys
    }
    idle = {key.action for key in shown(seen(*STATES["advice"], CONFIRMING), 0.0, None, False).keys}
    assert "app.leave" in idle


def test_the_mailbox_loses_nothing_but_live_readings_that_are_out_of_date() -> None:
    box = Mailbox()
    live = [followed(0.1), followed(0.2), followed(0.9, "slow"), followed(0.95, "slow")]
    given = [
        OPENED, measured(0, 0.1, 0), advised(), *live, followed(1.0, "stop"), measured(1, 0, 0),
    ]  # fmt: skip
    first = [box.put(report) for report in given]
    assert first == [True] + [False] * 8
    taken = box.take()
    shares = [report.word.share for report in taken if isinstance(report, Followed)]
    assert shares == [0.2, 0.95, 1.0]
    assert len(taken) == 7
    assert box.empty
    assert box.take() == []


def test_the_mailbox_can_be_filled_by_one_thread_and_emptied_by_another() -> None:
    box = Mailbox()
    turns = 2000

    def fill() -> None:
        for turn in range(turns):
            box.put(measured(turn, 0.0, 0.0))
            box.put(followed(0.5))
            box.put(followed(0.6))

    thread = threading.Thread(target=fill)
    thread.start()
    got: list[Report] = []
    while thread.is_alive() or not box.empty:
        got += box.take()
    thread.join()
    assert [report.turn for report in got if not isinstance(report, Followed)] == list(range(turns))  # type: ignore[union-attr]


class Broken(Scripted):
    """A session that raises."""

    def __init__(self, error: Exception) -> None:
        super().__init__(())
        self.error = error

    def run(self, stop: Callable[[], bool] = lambda: False) -> Iterator[Report]:
        """Say hello and fall over."""
        yield OPENED
        raise self.error


@pytest.mark.parametrize(
    ("error", "status"),
    [
        (SourceLost("The link broke."), 4),
        (MeasurementError("clipped", "120 samples at a rail.", "Choose a larger range."), 3),
        (BookError("No space left."), 5),
        (ZeroDivisionError("division by zero"), 1),
    ],
)
def test_what_a_session_raises_becomes_its_last_report(error: Exception, status: int) -> None:
    last = list(reports(Broken(error), lambda: False))[-1]
    assert isinstance(last, Failed)
    assert last.exit_status == status
    assert str(error).rstrip(".") in last.message
    assert last.remedy


def test_the_words_of_an_exception_are_cleaned() -> None:
    last = list(reports(Broken(ValueError("\x1b[2J\x07 [/] boo")), lambda: False))[-1]
    assert isinstance(last, Failed)
    assert "\x1b" not in last.message
    assert "[/] boo" in last.message


def test_parts_are_split_anew_for_every_reading() -> None:
    view = seen(*STATES["half-way"])
    assert view.parts is not None
    assert view.reading is not None
    assert np.array_equal(view.parts.parts, view.reading.parts)


def test_a_session_that_ends_without_a_word_is_not_taken_for_done() -> None:
    last = list(reports(Scripted((OPENED,), holds=False), lambda: False))[-1]
    assert isinstance(last, Failed)
    assert last.exit_status == 1
