"""Saves a circuit's output as a plain oscilloscope would: few bits, some noise, any phase and length."""

# ruff: noqa: E741 - the wipers of the two trims are u and l throughout

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tests.circuits.netlist import Unit
from tests.circuits.runner import simulate


@dataclass(frozen=True, slots=True)
class Oscilloscope:
    """How a capture is taken."""

    rng: np.random.Generator
    """Noise, and where in the period the capture begins."""
    bits: int = 8
    """Bits of a code."""
    clean: bool = False
    """True for values as the simulator gave them."""
    samples: int = 10_000
    """Samples of a capture."""
    cycles: float = 8.3
    """Periods in it, give or take a third."""
    noise_codes: float = 0.6
    """Standard deviation of the noise, in codes."""
    filled: float = 0.8
    """Share of the codes the first capture's span uses."""

    def save(self, unit: Unit, u: float, l: float, path: Path) -> None:
        """Capture the unit's output at a setting and save it under `path`, all at once."""
        cycles = self.cycles + self.rng.uniform(-1 / 3, 1 / 3)
        began = 0.25 + self.rng.uniform()
        trace = simulate(unit, [(u, l)], periods=cycles, samples=self.samples, settle=began)[0]
        volts = trace.volts if self.clean else self._digitised(trace.volts)
        written = path.with_suffix(".part")
        header = "time,volts" if self.clean else "Time (s),CH1 (V)"
        shape = "%.10e,%.10e" if self.clean else "%.9e,%.8e"
        table = np.column_stack([trace.times_s, volts])
        np.savetxt(written, table, fmt=shape, header=header, comments="")
        os.replace(written, path)

    def _digitised(self, volts: NDArray[np.float64]) -> NDArray[np.float64]:
        """Round to codes of a range in steps of 1 % of a volt, with the trace set to its middle."""
        codes_in_all = 2**self.bits
        code = np.ceil(100.0 * np.ptp(volts) / self.filled) / 100.0 / codes_in_all
        middle = np.round((np.max(volts) + np.min(volts)) / 2.0, 2)
        noisy = (volts - middle) / code + self.noise_codes * self.rng.standard_normal(volts.size)
        codes = np.clip(np.round(noisy), -codes_in_all // 2, codes_in_all // 2 - 1)
        return np.asarray(middle + code * codes, dtype=np.float64)
