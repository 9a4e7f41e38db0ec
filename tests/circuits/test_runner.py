"""The simulator's output is what closed forms say it must be, to 1e-6 of the fundamental."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from tests.circuits.frame import crest_parts, harmonics, thd
from tests.circuits.netlist import CIRCUITS, Circuit, Unit, toleranced_unit
from tests.circuits.runner import SimulatorFailed, needs_ngspice, simulate

pytestmark = [needs_ngspice, pytest.mark.circuit]

_TRIANGLE = (
    "Vtri in 0 PWL(0 {tri_offset-tri_peak} {tri_rise/hz} {tri_offset+tri_peak}"
    " {1/hz} {tri_offset-tri_peak}) r=0"
)
_PARAMS = ".param u=0.5 l=0.5 hz=1k tri_peak=5 tri_offset=0.3 tri_rise=0.5"


def bare(rise_share: float = 0.5, *stages: str) -> Unit:
    """A triangle through linear stages alone; `stages` lead from node in to node out."""
    text = "\n".join(["* a triangle", _PARAMS, _TRIANGLE, *(stages or ("Eout out 0 in 0 1",))])
    values = {"u": 0.5, "l": 0.5, "hz": 1e3, "tri_peak": 5.0, "tri_offset": 0.3}
    values["tri_rise"] = rise_share
    return Unit(Circuit("bare", text, values), None, values)


def triangle_series(rise_share: float, orders: int) -> NDArray[np.complex128]:
    """Fourier series of a unit triangle that starts at its lower crest, n = 1 .. orders.

    ``X_n = (exp(-2 pi j n d) - 1) / (pi^2 n^2 d (1 - d))``, any handbook.
    """
    n, d = np.arange(1, orders + 1), rise_share
    series: NDArray[np.complex128] = np.exp(-2j * np.pi * n * d) - 1.0
    return series / (np.pi**2 * n**2 * d * (1.0 - d))


@pytest.mark.parametrize("rise_share", [0.5, 0.48, 0.3])
def test_a_triangle_has_the_harmonics_of_its_series(rise_share: float) -> None:
    trace = simulate(bare(rise_share), [(0.5, 0.5)], samples=8192, settle=1.0)[0]
    expected = 5.0 * triangle_series(rise_share, 15)
    assert np.max(np.abs(harmonics(trace.volts)[1:] - expected)) < 1e-6 * abs(expected[0])
    assert harmonics(trace.volts)[0].real == pytest.approx(0.3, abs=1e-6)


def test_a_triangle_has_the_distortion_of_the_handbook() -> None:
    # orders 2 to 15 of the odd series 1/k^2: 12.0986 %; without end sqrt(pi^4/96 - 1) = 12.1153 %
    parts = crest_parts(simulate(bare(), [(0.5, 0.5)], samples=8192)[0].volts)
    assert thd(parts) == pytest.approx(np.sqrt(sum(k**-4.0 for k in range(3, 16, 2))), abs=1e-6)


def test_a_low_pass_turns_and_shrinks_each_harmonic_as_its_transfer_says() -> None:
    unit = bare(0.5, "R1 in low 10k", "C1 low 0 2n", "Eout out 0 low 0 1")
    trace = simulate(unit, [(0.5, 0.5)], samples=8192, settle=1.0, steps=4000)[0]
    k = np.arange(1, 16)
    transfer = 1.0 / (1.0 + 2j * np.pi * 1e3 * k * 10e3 * 2e-9)
    expected = 5.0 * triangle_series(0.5, 15) * transfer
    assert np.max(np.abs(harmonics(trace.volts)[1:] - expected)) < 2e-6 * abs(expected[0])


@pytest.mark.parametrize("name", CIRCUITS)
def test_harmonics_do_not_depend_on_how_finely_or_when_they_were_taken(name: str) -> None:
    unit = toleranced_unit(name, 2)
    settings = [(0.5, 0.5), (0.1, 0.85)]
    fine = simulate(unit, settings, samples=8192, settle=1.25, steps=12000)
    usual = simulate(unit, settings)
    for one, other in zip(fine, usual, strict=True):
        assert np.max(np.abs(crest_parts(one.volts) - crest_parts(other.volts))) < 1e-6


def test_several_periods_say_what_one_says() -> None:
    unit = toleranced_unit("few_sections_uneven", 2)
    one = simulate(unit, [(0.3, 0.6)], samples=4096)[0]
    many = simulate(unit, [(0.3, 0.6)], periods=3, samples=3 * 4096)[0]
    assert np.max(np.abs(crest_parts(one.volts) - crest_parts(many.volts, 3))) < 1e-7
    assert many.interval_s == pytest.approx(one.interval_s)


def test_a_netlist_that_cannot_be_run_says_so() -> None:
    with pytest.raises(SimulatorFailed, match="bare-nominal: no output"):
        simulate(bare(0.5, "Q1 out in 0 nosuch"), [(0.5, 0.5)])


def test_a_run_without_end_is_ended() -> None:
    with pytest.raises(SimulatorFailed, match=r"no end after 0\.5 s"):
        simulate(bare(), [(0.5, 0.5)], periods=1e5, timeout_s=0.5)


def test_no_settings_are_no_run() -> None:
    assert simulate(bare(), []) == []
