"""Runs a unit of a fixture circuit in ngspice and gives its output, evenly sampled.

One run of the simulator takes any number of settings, since starting it costs more than a
setting does. The simulator's steps are uneven; between the triangle's corners, where the output
has kinks, a cubic spline through them gives the even samples.
"""

# ruff: noqa: E741 - the wipers of the two trims are u and l throughout

from __future__ import annotations

import re
import shutil
import subprocess
import tempfile
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from tests.circuits.netlist import Unit, render

NGSPICE = shutil.which("ngspice")
needs_ngspice = pytest.mark.skipif(
    NGSPICE is None, reason="ngspice is not installed (Debian: apt install ngspice)"
)

_OPTIONS = ".options reltol=1e-6 abstol=1e-14 vntol=1e-9 gmin=1e-14 chgtol=1e-18 itl1=400 itl4=60"
_SOURCE = re.compile(r"^Vtri .*$", re.MULTILINE)


@dataclass(frozen=True, slots=True, eq=False)
class Trace:
    """A settled stretch of a circuit's output."""

    u: float
    """Wiper of the first trim, 0 to 1."""
    l: float
    """Wiper of the second trim, 0 to 1."""
    volts: NDArray[np.float64]
    """Shape (samples,)."""
    interval_s: float
    """Seconds between samples."""
    hz: float
    """The triangle's frequency, Hz."""

    @property
    def times_s(self) -> NDArray[np.float64]:
        """Shape (samples,), from zero."""
        return np.arange(len(self.volts), dtype=np.float64) * self.interval_s


class SimulatorFailed(Exception):
    """The simulator did not deliver what was asked; the message has its last words."""


def simulate(
    unit: Unit,
    settings: Sequence[tuple[float, float]],
    *,
    periods: float = 1.0,
    samples: int = 2048,
    settle: float = 0.25,
    steps: int = 1500,
    timeout_s: float = 300.0,
) -> list[Trace]:
    """Take the unit's output at each setting of its trims.

    Parameters
    ----------
    unit
        What to simulate.
    settings
        Wiper positions (u, l), each 0 to 1.
    periods
        Length of what is given, in periods; any positive number.
    samples
        Even samples over that length. With whole `periods` the last sample stands one interval
        before the period's end, as a Fourier transform wants it.
    settle
        Periods left out before it.
    steps
        Least number of simulator steps a period.
    timeout_s
        Longest wait for the simulator.

    Raises
    ------
    SimulatorFailed
        It stopped early, took too long, or wrote less than was asked.
    """
    if NGSPICE is None:
        raise SimulatorFailed("ngspice is not installed")
    if not settings:
        return []
    period = 1.0 / unit.hz
    stop = (settle + periods) * period
    interval = periods * period / samples
    wanted = settle * period + np.arange(samples, dtype=np.float64) * interval
    corners = _corners(unit, stop)
    traces = []
    with tempfile.TemporaryDirectory(prefix="circuit-") as name:
        folder = Path(name)
        words = _run(unit, _deck(unit, settings, stop, period / steps), folder, timeout_s)
        for index, (u, l) in enumerate(settings):
            path = folder / f"{index}.raw"
            if not path.exists():
                raise SimulatorFailed(f"{unit.name}: no output at {(u, l)}: {words}")
            times, volts = _read_raw(path)
            if times[-1] < stop * (1 - 1e-9):
                raise SimulatorFailed(f"{unit.name}: stopped at {times[-1]:g} s: {words}")
            even = _resampled(times, volts, wanted, corners)
            traces.append(Trace(u, l, even, interval, unit.hz))
    return traces


def _run(unit: Unit, deck: str, folder: Path, timeout_s: float) -> str:
    """Run the simulator on a deck inside `folder` and give its last words."""
    (folder / "deck.cir").write_text(deck, encoding="ascii")
    assert NGSPICE is not None
    try:
        run = subprocess.run(
            [NGSPICE, "-b", "deck.cir"],
            cwd=folder,
            capture_output=True,
            text=True,
            timeout=timeout_s,
            check=False,
        )
    except subprocess.TimeoutExpired as late:
        raise SimulatorFailed(f"{unit.name}: no end after {timeout_s:g} s") from late
    return run.stderr[-500:]


def _corners(unit: Unit, stop: float) -> NDArray[np.float64]:
    """Times of the triangle's corners from 0 to past `stop`, lower one first."""
    period = 1.0 / unit.hz
    starts = np.arange(int(np.ceil(stop / period)) + 1) * period
    return np.sort(np.concatenate([starts, starts + unit.rise_share * period]))


def _triangle(unit: Unit, stop: float) -> str:
    """The triangle, written out: a repeated list would not make the simulator stop at corners."""
    low = unit.values["tri_offset"] - unit.values["tri_peak"]
    high = unit.values["tri_offset"] + unit.values["tri_peak"]
    corners = _corners(unit, stop)
    points = (f"{t:.15g} {high if i % 2 else low:.15g}" for i, t in enumerate(corners))
    return "Vtri in 0 PWL(" + "\n+ ".join(points) + ")"


def _deck(unit: Unit, settings: Sequence[tuple[float, float]], stop: float, step: float) -> str:
    text, replaced = _SOURCE.subn(lambda _: _triangle(unit, stop), render(unit))
    if replaced != 1:
        raise ValueError(f"{unit.circuit.name}: expected one line `Vtri ...`, found {replaced}")
    return "\n".join(
        [
            text,
            _OPTIONS,
            ".save v(out)",
            ".control",
            "set filetype=binary",
            *_runs(settings, stop, step),
            "quit",
            ".endc",
            ".end",
            "",
        ]
    )


def _runs(settings: Sequence[tuple[float, float]], stop: float, step: float) -> Iterator[str]:
    for index, (u, l) in enumerate(settings):
        yield f"alterparam u={u:.15g}"
        yield f"alterparam l={l:.15g}"
        yield "reset"
        yield f"tran {step:.15g} {stop:.15g} 0 {step:.15g}"
        yield f"write {index}.raw v(out)"
        yield "destroy all"


def _read_raw(path: Path) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Read time and one voltage from the simulator's binary output."""
    head, mark, body = path.read_bytes().partition(b"Binary:\n")
    if not mark or b"No. Variables: 2\n" not in head:
        raise SimulatorFailed(f"{path.name} is not a binary output of one voltage")
    table = np.frombuffer(body, dtype="<f8")
    table = table[: len(table) // 2 * 2].reshape(-1, 2)
    return table[:, 0], table[:, 1]


def _resampled(
    times: NDArray[np.float64],
    volts: NDArray[np.float64],
    wanted: NDArray[np.float64],
    corners: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Give the values at `wanted`, by a spline of its own between each two corners."""
    even = np.empty_like(wanted)
    nearby = 1e-7 * (corners[1] - corners[0])
    for left, right in pairwise(corners):
        inside = (wanted >= left) & (wanted < right)
        if not inside.any():
            continue
        part = (times >= left - nearby) & (times <= right + nearby)
        t, v = times[part], volts[part]
        keep = np.concatenate([[True], np.diff(t) > 0])
        even[inside] = CubicSpline(t[keep], v[keep])(wanted[inside])  # type: ignore[no-untyped-call]
    return even
