"""Readings of simulated captures meet the Fourier transform of an exact period."""

from __future__ import annotations

import numpy as np
import pytest

from tests.circuits.frame import crest_parts, harmonics, thd
from tests.circuits.make_waveforms import CASES, WAVEFORMS, Case, capture, load, period
from tests.circuits.runner import needs_ngspice
from trimmer.measurement import measure

BAR = 1e-5
"""Of the fundamental."""


def by_name(case: Case) -> str:
    """A case's name in a test's."""
    return case.name


@pytest.mark.parametrize("case", CASES, ids=by_name)
def test_a_reading_meets_the_transform_of_an_exact_period(case: Case) -> None:
    times, volts = load(WAVEFORMS / f"{case.name}.csv")
    _, exact = load(WAVEFORMS / f"{case.name}-period.csv")
    interval = (times[-1] - times[0]) / (len(times) - 1)
    reading = measure(volts, interval)
    assert reading.orders == 15
    assert np.max(np.abs(reading.parts - crest_parts(exact))) < BAR
    assert reading.thd.value == pytest.approx(thd(crest_parts(exact)), abs=BAR)
    assert reading.amplitude == pytest.approx(abs(harmonics(exact)[1]), rel=BAR)
    assert reading.offset == pytest.approx(harmonics(exact)[0].real, abs=BAR * reading.amplitude)
    assert reading.fundamental_hz == pytest.approx(case.hz, rel=1e-7)


@pytest.mark.parametrize("case", CASES[:3], ids=by_name)
def test_a_reading_of_whole_periods_meets_their_own_transform(case: Case) -> None:
    _, exact = load(WAVEFORMS / f"{case.name}-period.csv")
    reading = measure(np.tile(exact, 4), 1.0 / (case.hz * len(exact)))
    assert np.max(np.abs(reading.parts - crest_parts(exact))) < BAR


def test_the_stored_lengths_are_not_all_whole_periods_and_settings_differ_widely() -> None:
    assert sum(abs(case.cycles - round(case.cycles)) > 0.05 for case in CASES) >= 6
    found = [thd(crest_parts(load(WAVEFORMS / f"{case.name}-period.csv")[1])) for case in CASES]
    assert min(found) < 0.003
    assert max(found) > 0.08


@needs_ngspice
@pytest.mark.circuit
@pytest.mark.parametrize("case", CASES, ids=by_name)
def test_a_stored_waveform_comes_out_of_its_netlist_again(case: Case) -> None:
    peak = 4.0
    for made, name in ((capture(case), case.name), (period(case), f"{case.name}-period")):
        times, volts = load(WAVEFORMS / f"{name}.csv")
        assert np.max(np.abs(made[0] - times)) < 1e-9 * times[-1]
        assert np.max(np.abs(made[1] - volts)) < 1e-6 * peak
