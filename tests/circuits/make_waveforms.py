"""Makes the stored waveforms anew: ``python -m tests.circuits.make_waveforms``.

Each case is kept twice: as a capture whose length is no whole number of periods, and as one exact
period, whose Fourier transform says what the capture holds.
"""

# ruff: noqa: E741 - the wipers of the two trims are u and l throughout

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tests.circuits.netlist import FIXTURES, Unit, toleranced_unit, with_values
from tests.circuits.runner import simulate

WAVEFORMS = FIXTURES / "waveforms"
CAPTURE_SAMPLES = 2500
PERIOD_SAMPLES = 2000


@dataclass(frozen=True, slots=True)
class Case:
    """A stored waveform and where it comes from."""

    name: str
    """Name of its files, without ending."""
    circuit: str
    """Netlist."""
    seed: int
    """What the unit's tolerances were drawn from."""
    u: float
    """Wiper of the first trim, 0 to 1."""
    l: float
    """Wiper of the second trim, 0 to 1."""
    hz: float
    """Frequency of the triangle, Hz."""
    cycles: float
    """Periods in the capture."""

    @property
    def unit(self) -> Unit:
        """The unit it was taken from."""
        return with_values(toleranced_unit(self.circuit, self.seed), hz=self.hz)


CASES = (
    Case("ladder-best", "ladder_junctions", 3, 0.468, 0.550, 1000.0, 8.3),
    Case("ladder-mis-set", "ladder_junctions", 3, 0.15, 0.80, 1000.0, 5.0),
    Case("ladder-fast", "ladder_junctions", 3, 0.50, 0.30, 12500.0, 6.37),
    Case("string-best", "tapped_string_diodes", 1, 0.480, 0.448, 400.0, 5.41),
    Case("string-mis-set", "tapped_string_diodes", 1, 0.85, 0.20, 400.0, 3.2),
    Case("pair-on-offset-mis-set", "pair_on_offset", 4, 0.20, 0.45, 47.0, 7.77),
    Case("pair-coupled-best", "pair_coupled", 6, 0.502, 0.513, 2200.0, 4.9),
    Case("pair-coupled-mis-set", "pair_coupled", 6, 0.95, 0.10, 2200.0, 10.0),
    Case("few-sections-best", "few_sections", 1, 0.459, 0.414, 1000.0, 6.62),
    Case("uneven-best", "few_sections_uneven", 3, 0.475, 0.370, 1000.0, 9.15),
)
"""Every stored waveform."""


def capture(case: Case) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Simulate a case's capture: times and volts, shape (CAPTURE_SAMPLES,) each."""
    settings = [(case.u, case.l)]
    trace = simulate(case.unit, settings, periods=case.cycles, samples=CAPTURE_SAMPLES)[0]
    return trace.times_s, trace.volts


def period(case: Case) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Simulate one exact period of a case: times and volts, shape (PERIOD_SAMPLES,) each."""
    trace = simulate(case.unit, [(case.u, case.l)], samples=PERIOD_SAMPLES)[0]
    return trace.times_s, trace.volts


def load(path: Path) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Read a stored waveform: times in seconds, volts."""
    table = np.loadtxt(path, delimiter=",", skiprows=1)
    return table[:, 0], table[:, 1]


def store(path: Path, times_s: NDArray[np.float64], volts: NDArray[np.float64]) -> None:
    """Write a waveform as plain ``time,volts`` with nine decimals of a volt."""
    with path.open("w", encoding="ascii", newline="\n") as out:
        out.write("time,volts\n")
        for t, v in zip(times_s, volts, strict=True):
            out.write(f"{t:.10e},{v:.9f}\n")


def main() -> None:
    """Write the waveforms of all cases."""
    WAVEFORMS.mkdir(exist_ok=True)
    for case in CASES:
        store(WAVEFORMS / f"{case.name}.csv", *capture(case))
        store(WAVEFORMS / f"{case.name}-period.csv", *period(case))
        print(case.name)


if __name__ == "__main__":
    main()
