"""The word for the hand, and the lag learned from overshoot."""

import pytest

from trimmer.guidance.pace import FIRST_LAG_S, Lag, Pace


def drive(pace, speed, target, seconds, dt=0.1, start=0.0):
    words = []
    now, way = 0.0, start
    while now < seconds:
        now += dt
        way += speed * dt
        words.append((now, way, pace.say(way, target, now)))
    return words


def test_a_turn_is_called_turn_then_slow_then_stop():
    words = [w for _, _, w in drive(Pace(Lag()), 0.1, 0.2, 2.5)]
    assert words[0] == "turn"
    assert [w for i, w in enumerate(words) if i == 0 or w != words[i - 1]] == [
        "turn",
        "slow",
        "stop",
    ]


def test_stop_is_said_early_by_the_lag():
    for lag_s in (0.1, 0.3, 0.6):
        pace = Pace(Lag(mean_s=lag_s))
        words = drive(pace, 0.1, 0.3, 4.0)
        stop = next(way for _, way, word in words if word == "stop")
        assert stop + 0.1 * lag_s == pytest.approx(0.3, abs=0.011)


def test_a_hand_that_stands_short_of_the_target_is_not_told_to_stop():
    pace = Pace(Lag())
    words = drive(pace, 0.0, 0.2, 1.0, start=0.15)
    assert {w for _, _, w in words} == {"turn"}
    words = drive(Pace(Lag()), 0.0, 0.2, 1.0, start=0.19)
    assert {w for _, _, w in words} == {"slow"}


def test_past_the_target_it_is_stop_whatever_the_speed():
    assert Pace(Lag()).say(0.21, 0.2, 1.0) == "stop"


def test_the_lag_is_learned_from_overshoot():
    lag = Lag()
    for _ in range(12):
        pace = Pace(lag)
        for now, way, word in drive(pace, 0.1, 0.3, 4.0):
            if word == "stop":
                pace.say(way + 0.1 * 0.5, 0.3, now + 1.0)
                break
        pace.rest()
    assert lag.mean_s == pytest.approx(0.5, abs=0.06)


def test_what_small_turns_go_too_far_is_learned_and_stop_said_earlier():
    lag = Lag()
    for _ in range(8):
        pace = Pace(lag)
        for now, way, word in drive(pace, 0.01, 0.01, 4.0):
            if word == "stop":
                pace.say(way + 0.006, 0.01, now + 1.0)
                break
        pace.rest()
    assert 0.003 < lag.creep < 0.007
    assert Pace(lag).say(0.0101 - lag.creep, 0.01, 2.0) == "stop"
    assert Pace(Lag()).say(0.0101 - lag.creep, 0.01, 2.0) != "stop"
    for _ in range(20):
        lag.overshot(-0.004)
    assert lag.creep == 0.0


def test_without_a_stop_nothing_is_learned():
    lag = Lag()
    pace = Pace(lag)
    drive(pace, 0.05, 0.3, 1.0)
    pace.rest()
    assert lag.mean_s == FIRST_LAG_S


def test_no_overshoot_teaches_more_than_the_longest_lag():
    lag = Lag()
    lag.learn(60.0)
    assert lag.mean_s < 0.8
    lag.learn(-5.0)
    assert lag.mean_s >= 0.0
