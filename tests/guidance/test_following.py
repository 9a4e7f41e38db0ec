"""A hand watched live: the bar, the words, the mistakes, the stillness."""

import numpy as np
import pytest

from tests.fleet.catalogue import prior, unit
from tests.fleet.hands import Trims
from tests.fleet.live import err_once, watch_through
from tests.fleet.readings import Scope
from trimmer.guidance import Guide
from trimmer.guidance.advice import Advice, Confirm


class Watched:
    """A guide that follows, and a screw moved by hand, a tenth of a second at a time."""

    def __init__(self, *, known=True, number=1, at=(0.3, 0.72), kind="ladders"):
        self.unit = unit(kind, number, wired=known)
        self.trims = Trims(self.unit, list(at))
        self.scope = Scope(np.random.default_rng(number))
        self.guide = Guide(followed=True, prior=prior(kind, followed=True) if known else None)
        self.answer = self.guide.observe(self.read())
        self.now = 10.0

    def read(self, **how):
        return self.scope.read(self.unit.parts(self.trims.at), **how)

    def asked(self):
        sense = 1.0 if self.answer.sense == "clockwise" else -1.0
        return (0 if self.answer.trim == "upper" else 1), sense * self.answer.turns / 0.75

    def word(self, share=0.0, trim=None):
        """Turn a little and hear what the guide says of it."""
        self.trims.turn(self.asked()[0] if trim is None else trim, share)
        self.now += 0.1
        return self.guide.follow(self.read(), self.now)

    def made(self):
        self.answer = self.guide.observe(self.read())
        while isinstance(self.answer, Confirm):
            self.answer = self.guide.observe(self.read(longer=True), longer=True)


def test_the_bar_fills_as_the_screw_goes():
    w = Watched()
    trim, share = w.asked()
    went = 0.0
    for _ in range(8):
        word = w.word(share / 10)
        went += 0.1
        assert word.trim == ("upper", "lower")[trim]
        assert word.share == pytest.approx(went, abs=0.2)
        assert not word.still
    assert word.share > 0.5


def test_before_anything_moves_it_is_turn_and_never_still():
    w = Watched()
    words = [w.word() for _ in range(30)]
    assert {x.say for x in words} == {"turn"}
    assert not any(x.still for x in words)
    assert all(x.share == 0.0 for x in words)


def test_the_share_is_not_known_before_the_column_is():
    w = Watched(known=False)
    _, share = w.asked()
    words = [w.word(share / 8) for _ in range(8)] + [w.word() for _ in range(10)]
    assert all(x.share is None for x in words)
    assert words[-1].still
    assert not any(x.say.startswith("wrong") for x in words)


def test_a_moving_screw_is_not_still_and_a_resting_one_soon_is():
    w = Watched()
    _, share = w.asked()
    assert not any(w.word(share / 20).still for _ in range(19))
    rest = [w.word() for _ in range(12)]
    assert rest[-1].still
    assert next(i for i, x in enumerate(rest) if x.still) >= 3
    assert rest[-1].say == "wait"


@pytest.mark.parametrize("size", [0.002, 0.004])
def test_a_slow_screw_is_not_taken_for_a_resting_one(size):
    w = Watched()
    _, share = w.asked()
    steps = int(abs(share) / size)
    assert not any(w.word(np.sign(share) * size).still for _ in range(steps))


def test_a_pause_on_the_way_is_longer_than_one_at_the_end():
    w = Watched()
    _, share = w.asked()
    for _ in range(4):
        w.word(share / 10)
    pause = [w.word().still for _ in range(9)]
    assert not any(pause)
    assert any(w.word().still for _ in range(15))


def test_stop_is_said_and_it_is_stop_that_ends_the_turn_well():
    w = Watched()
    _, share = w.asked()
    said = []
    for _ in range(40):
        said.append(w.word(share / 12).say)
        if said[-1] == "stop":
            break
    assert said[-1] == "stop"
    assert "slow" in said
    while not w.word().still:
        pass
    before = w.answer
    w.made()
    assert w.unit.thd(w.trims.at) < 1.35 * before.expected_thd


def test_the_other_trim_is_noticed_and_taken_for_what_it_was():
    w = Watched()
    trim, share = w.asked()
    words = [w.word(share / 10, trim=1 - trim) for _ in range(6)]
    assert "wrong-trim" in [x.say for x in words[:5]]
    while not w.word().still:
        pass
    w.made()
    net = w.guide.net_turns
    moved, left = ("lower", "upper") if trim == 0 else ("upper", "lower")
    assert abs(net[moved]) > 3 * abs(net[left])
    assert isinstance(w.answer, Advice)
    assert "that moved" in w.answer.notice
    assert w.guide.turns_made == 1


def test_a_wrong_trim_turned_back_is_forgiven():
    w = Watched()
    trim, share = w.asked()
    for _ in range(4):
        w.word(share / 10, trim=1 - trim)
    play = w.unit.pots[1 - trim].backlash
    back = [w.word(-share / 10, trim=1 - trim) for _ in range(4)]
    back.append(w.word(-np.sign(share) * play, trim=1 - trim))
    words = [w.word(share / 10) for _ in range(10)]
    assert words[-1].say in ("turn", "slow", "stop")
    assert words[-1].share == pytest.approx(1.0, abs=0.3)


def test_the_wrong_way_is_noticed_at_once():
    w = Watched()
    _, share = w.asked()
    words = [w.word(-share / 10) for _ in range(5)]
    assert "wrong-way" in [x.say for x in words]
    assert words[-1].share < 0


def test_live_sessions_reach_the_best_in_few_turns_without_a_false_alarm():
    sessions = [
        watch_through(kind, number, known=known)
        for kind in ("few_sections", "pair_coupled", "ladders")
        for known in (False, True)
        for number in range(3)
    ]
    assert all(s.reached is not None for s in sessions)
    assert sum(s.stuck for s in sessions) == 0
    assert sum(s.alarms for s in sessions) == 0
    assert np.median([s.reached for s in sessions]) <= 4
    assert max(s.turns for s in sessions) <= 12


@pytest.mark.parametrize("mistake", ["wrong-trim", "wrong-way"])
def test_mistakes_are_noticed_within_half_a_second(mistake):
    found = [
        err_once(kind, number, mistake, known=known)
        for kind in ("few_sections", "pair_coupled")
        for known in (False, True)
        for number in range(7)
    ]
    clear = [e for e in found if e is not None and e.asked >= 0.03]
    assert len(clear) >= 10
    soon = [e.noticed_s is not None and e.noticed_s <= 0.5 for e in clear]
    assert np.mean(soon) >= 0.9


def test_the_persons_lag_is_learned():
    quick = [watch_through("ladders", n, known=False).lags_s for n in range(8)]
    true, learned = np.array(quick).T
    assert np.corrcoef(true, learned)[0, 1] > 0.2
    assert abs(np.mean(learned) - np.mean(true)) < 0.1
