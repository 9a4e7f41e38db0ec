"""Limits and the verdicts of a survey, the way of the dial, and when it stands still."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.fleet.readings import Scope
from trimmer.measurement import Reading
from trimmer.measurement.reading import Interval
from trimmer.upkeep.dial import Stillness, Way, targets
from trimmer.upkeep.limits import Limits, judged, overall, verdicts
from trimmer.upkeep.survey import flatness, surveyed

PARTS = np.concatenate(([0.006, 0.0, 0.008], np.zeros(25)))
"""Parts of an invented wave, THD 1 %."""


def reading(
    hertz: float = 1000.0, thd: float = 0.01, sigma: float = 1e-4, **more: float
) -> Reading:
    one = Scope(np.random.default_rng(1)).read(PARTS * thd / 0.01)
    interval = Interval(thd, sigma, thd - 1.96 * sigma, thd + 1.96 * sigma)
    return replace(one, fundamental_hz=hertz, thd=interval, **more)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("low", "high", "verdict"),
    [
        (0.008, 0.0099, "inside"),
        (0.0101, 0.012, "outside"),
        (0.009, 0.011, "cannot-tell"),
        (0.009, 0.01, "inside"),
        (0.01, 0.011, "cannot-tell"),
    ],
)
def test_a_verdict_takes_the_uncertainty_into_account(
    low: float, high: float, verdict: str
) -> None:
    assert judged(low, high, 0.01) == verdict


def test_each_limit_judges_its_own_figure() -> None:
    one = reading(rise_share=0.47, rise_share_sigma=0.001, offset=-0.2, offset_sigma=0.01)
    found = verdicts(one, Limits(thd=0.02, symmetry=0.01, offset_v=0.2))
    assert found == {"thd": "inside", "symmetry": "outside", "offset": "cannot-tell"}
    assert overall(found.values()) == "outside"


def test_an_offset_behind_a_coupling_capacitor_cannot_be_judged() -> None:
    blocked = replace(reading(), ac_coupled=True, offset=0.0, offset_sigma=1e-6)
    assert verdicts(blocked, Limits(offset_v=0.1)) == {"offset": "cannot-tell"}


def test_without_a_limit_nothing_is_called_inside() -> None:
    assert verdicts(reading(), Limits()) == {}
    assert overall([]) == "cannot-tell"
    assert not Limits().any


def test_limits_of_the_command_come_before_those_of_the_kind() -> None:
    kind = Limits.from_document({"thd": 0.01, "flatness": 0.05, "of a newer program": 3})
    assert Limits(thd=0.02).over(kind) == Limits(thd=0.02, flatness=0.05)
    assert Limits.from_document(kind.to_document()) == kind
    with pytest.raises(ValueError, match="positive"):
        Limits(thd=-1.0)


@given(
    low=st.floats(1.0, 1e4),
    ratio=st.floats(1.05, 1e4),
    count=st.integers(2, 25),
    start=st.floats(0.5, 2e8),
)
def test_the_way_leads_to_every_point_once(
    low: float, ratio: float, count: int, start: float
) -> None:
    points = targets(low, low * ratio, count)
    if len(set(points)) < count:  # closer than the three digits they are rounded to
        return
    way = Way(points)
    asked = []
    now: float = start
    while way.left:
        towards = way.next_hz(now)
        asked.append(towards)
        now = towards * 1.0001
        at = way.at(now)
        assert at == towards
        way.taken(at)
    assert sorted(asked) == points
    assert asked in (points, points[::-1])  # from one end to the other: no way is made twice


def test_the_way_begins_at_the_nearer_end() -> None:
    assert Way(targets(47.0, 18e3, 7)).next_hz(12e3) == 18e3
    assert Way(targets(47.0, 18e3, 7)).next_hz(100.0) == 47.0


def test_points_are_even_on_a_log_scale() -> None:
    points = targets(47.0, 18e3, 7)
    assert len(points) == 7
    assert points[0] == 47.0
    assert points[-1] == 18e3
    assert np.allclose(np.diff(np.log(points)), np.log(18e3 / 47.0) / 6, rtol=0.01)
    for wrong in ((2000.0, 100.0, 3), (100.0, 100.0, 2), (100.0, 200.0, 0)):
        with pytest.raises(ValueError, match="Hz"):
            targets(*wrong)


def test_a_frequency_between_two_points_belongs_to_none() -> None:
    way = Way([1000.0, 2000.0])
    assert way.at(1400.0) is None
    assert way.at(1080.0) == 1000.0
    way.taken(1000.0)
    assert way.at(1000.0) is None


def test_the_dial_is_still_once_it_has_been_for_a_while() -> None:
    still = Stillness()
    turning = [still.moved(0.1 * n, 1000.0 * 1.02**n, 0.1) for n in range(10)]
    assert all(turning)
    held = [still.moved(1.0 + 0.1 * n, 1200.0 + 0.1 * (n % 2), 0.1) for n in range(10)]
    assert held[0]
    assert not held[-1]
    still.forget()
    assert still.moved(3.0, 1200.0, 0.1)


def test_a_survey_names_the_worst_point_and_what_grows_with_frequency() -> None:
    found = surveyed([reading(18e3, 0.03), reading(100.0), reading(1e3)], Limits(thd=0.02))
    assert found.verdict == "outside"
    assert found.outside == ("thd",)
    assert found.at_hz == 18e3
    assert found.worst_thd is not None
    assert found.worst_thd.value == 0.03


def test_a_survey_with_points_left_out_is_not_called_inside() -> None:
    two = [reading(100.0), reading(1e3)]
    assert surveyed(two, Limits(thd=0.02)).verdict == "inside"
    assert surveyed(two, Limits(thd=0.02), complete=False).verdict == "cannot-tell"
    assert surveyed(two, Limits(thd=0.001), complete=False).verdict == "outside"
    assert surveyed([], Limits(thd=0.02)).verdict == "cannot-tell"


def test_flatness_is_relative_to_the_amplitude_near_one_kilohertz() -> None:
    three = [
        reading(50.0, amplitude=2.0, amplitude_sigma=0.002),
        reading(900.0, amplitude=2.5, amplitude_sigma=0.0),
        reading(18e3, amplitude=2.6, amplitude_sigma=0.0),
    ]
    flat = flatness(three)
    assert flat is not None
    assert flat.value == pytest.approx(0.2)
    assert flat.sigma == pytest.approx(0.8e-3)
    assert surveyed(three, Limits(flatness=0.1)).outside == ("flatness",)
    assert flatness(three[:1]) is None
