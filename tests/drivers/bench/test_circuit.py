"""The unit against a circuit simulator that is given the same parts (ngspice)."""

from __future__ import annotations

import shutil
import subprocess
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from drivers.bench.ladder import END_OHM, TAPS, Ladder
from drivers.bench.parts import WARM_C, Parts, draw
from drivers.bench.unit import (
    BOLTZMANN_OVER_CHARGE,
    ZERO_CELSIUS_K,
    breakpoints,
    crest_frame,
    period,
)

NGSPICE = shutil.which("ngspice")
pytestmark = [
    pytest.mark.circuit,
    pytest.mark.skipif(NGSPICE is None, reason="ngspice is not installed"),
]

WIPERS = (0.42, 0.63)
THERMAL_V = BOLTZMANN_OVER_CHARGE * (WARM_C + ZERO_CELSIUS_K)


def ladder_lines(side: str, ladder: Ladder, at: float, own: str, other: str) -> list[str]:
    """Ladder, pot and feed of one half; taps are the nodes `side` 1 to 4."""
    nodes = ["shared", *(f"{side}{k}" for k in range(1, TAPS + 1))]
    lines = [
        f"R{side}g{k} {nodes[k]} {nodes[k + 1]} {ohm!r}" for k, ohm in enumerate(ladder.rungs_ohm)
    ]
    return [
        *lines,
        f"R{side}top {own} {side}{TAPS} {ladder.top_ohm!r}",
        f"R{side}feed {side}w {side}{TAPS} {ladder.feed_ohm!r}",
        f"R{side}near {own} {side}w {END_OHM + ladder.pot_ohm * at!r}",
        f"R{side}far {other} {side}w {END_OHM + ladder.pot_ohm * (1.0 - at)!r}",
    ]


def branch_lines(parts: Parts) -> list[str]:
    """The branches: each tap buffered, a junction, its resistor. A second source adds what a
    diode's current lacks of a pure exponential."""
    lines = []
    for index, (ohm, knee_v) in enumerate(zip(parts.branches_ohm, parts.knees_v, strict=True)):
        side, k = ("u", index + 1) if index < TAPS else ("d", index - TAPS + 1)
        saturation = float(THERMAL_V / ohm * np.exp(-knee_v / THERMAL_V))
        ends = f"m{index} b{index}" if side == "u" else f"b{index} m{index}"
        lines += [
            f"E{index} b{index} 0 {side}{k} 0 1",
            f"R{index} y m{index} {ohm!r}",
            f"D{index} {ends} junction{index}",
            f"I{index} {ends} {saturation!r}",
            f".model junction{index} D(IS={saturation!r} N=1 RS=0 CJO=0 TNOM={WARM_C})",
        ]
    return lines


def netlist(parts: Parts, source: str, analysis: str, node_f: float) -> str:
    """The whole unit up to the shaped node."""
    plus, minus = parts.rails_v
    lines = [
        "a unit of the bench",
        f".options temp={WARM_C} reltol=1e-7 vntol=1e-10 abstol=1e-15 gmin=1e-15 chgtol=1e-20",
        f"Vplus plus 0 {plus!r}",
        f"Vminus minus 0 {minus!r}",
        f"Rshared shared 0 {parts.shared_ohm!r}",
        *ladder_lines("u", parts.upper, WIPERS[0], "plus", "minus"),
        *ladder_lines("d", parts.lower, WIPERS[1], "minus", "plus"),
        source,
        f"Rs x y {parts.source_ohm!r}",
        f"Cnode y 0 {node_f!r}",
        *branch_lines(parts),
        ".control",
        "set numdgt=15",
        analysis,
        "quit 0",
        ".endc",
        ".end",
    ]
    return "\n".join(lines) + "\n"


def run(text: str, folder: Path) -> np.ndarray:
    """Run ngspice and read what it wrote to `out`."""
    assert NGSPICE is not None
    (folder / "unit.cir").write_text(text)
    subprocess.run(
        [NGSPICE, "-b", "unit.cir"], cwd=folder, check=True, capture_output=True, timeout=120
    )
    return np.loadtxt(folder / "out")


def test_the_transfer_curve_is_the_circuits(tmp_path: Path) -> None:
    parts = draw(21)
    table = run(
        netlist(parts, "Vx x 0 0", "dc Vx -3.95 3.95 0.05\nwrdata out v(y)", 1e-15), tmp_path
    )
    x, y = table[:, 0], table[:, 1]
    ours, _ = breakpoints(parts, WIPERS, WARM_C).input_v(y)
    np.testing.assert_allclose(ours, x, atol=2e-5)


def test_the_taps_are_the_circuits(tmp_path: Path) -> None:
    parts = draw(22)
    taps = " ".join(f"v({side}{k})" for side in "ud" for k in range(1, TAPS + 1))
    table = run(netlist(parts, "Vx x 0 0", f"dc Vx 0 0.1 0.1\nwrdata out {taps}", 1e-15), tmp_path)
    np.testing.assert_allclose(breakpoints(parts, WIPERS, WARM_C).taps_v, table[0, 1::2], atol=1e-9)


def test_the_shaped_wave_and_its_lean_are_the_circuits(tmp_path: Path) -> None:
    parts, hertz = draw(23), 2000.0
    whole = 1.0 / hertz
    rise = parts.rise_share * whole
    low, high = parts.offset_v - parts.triangle_v, parts.offset_v + parts.triangle_v
    points = [(0.0, low), (rise, high), (whole, low), (whole + rise, high), (2 * whole, low)]
    corners = " ".join(f"{t!r} {v!r}" for t, v in points)
    analysis = f"tran {whole / 4096!r} {2 * whole!r} {whole!r} {whole / 4096!r}\nwrdata out v(y)"
    table = run(netlist(parts, f"Vx x 0 PWL({corners})", analysis, parts.node_f), tmp_path)
    times = whole * (1.0 + np.arange(4096) / 4096)
    circuit = crest_frame(np.interp(times, table[:, 0], table[:, 1]))
    bare = without_output(parts)
    ours = crest_frame(period(bare, WIPERS, hertz))
    np.testing.assert_allclose(ours[:9], circuit[:9], atol=1.5e-5)
    assert circuit[1].imag == pytest.approx(ours[1].imag, rel=0.03)


def without_output(parts: Parts) -> Parts:
    """The unit with an output stage that changes nothing."""
    ideal = replace(parts.output, gain=1.0, slew_v_s=1e15, unity_hz=1e15)
    return replace(parts, output=ideal)
