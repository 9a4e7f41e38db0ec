"""The linear heart of the fit against certified values."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from trimmer.measurement.fit import solve
from trimmer.measurement.model import Lines
from trimmer.measurement.projection import Record, project

ENSO = Path(__file__).parents[2] / "fixtures" / "nist" / "ENSO.dat"


def test_nist_enso_certified_amplitudes_with_its_certified_periods():
    """NIST StRD, data set ENSO, public domain: certified values in the header of the file.

    The fundamental is the year, the other two periods are nuisance lines; all three are held, so
    the remaining seven parameters are linear.
    """
    rows = [line.split() for line in ENSO.read_text().splitlines()[60:228]]
    y = np.array([float(row[0]) for row in rows])
    assert [float(row[1]) for row in rows] == list(range(1, 169))
    b4, b7 = 44.311088700, 26.887614440
    lines = Lines(1, 2 * math.pi / np.array([b4, b7]))
    w = 2 * math.pi / 12
    record = Record(y, float(y.min()), float(y.max()), mean=0.0, scale=1.0)
    solved = solve(project(record, lines, w), w, lines)
    # amplitudes about the middle of the record, turned to the file's x = 0
    phasors = (solved.amplitudes[0] - 1j * solved.amplitudes[1]) * np.exp(
        -1j * lines.frequencies(w) * 84.5
    )
    certified = {
        "b1": (10.510749193, phasors[0].real),
        "b2": (3.0762128085, phasors[1].real),
        "b3": (0.53280138227, -phasors[1].imag),
        "b5": (-1.6231428586, phasors[2].real),
        "b6": (0.52554493756, -phasors[2].imag),
        "b8": (0.21232288488, phasors[3].real),
        "b9": (1.4966870418, -phasors[3].imag),
    }
    for name, (expected, found) in certified.items():
        assert found == pytest.approx(expected, abs=1e-8, rel=1e-8), name
    assert float(y @ y) - solved.explained == pytest.approx(788.53978668, rel=1e-9)
