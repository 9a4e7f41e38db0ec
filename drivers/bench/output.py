"""The output stage: a closed loop of finite gain-bandwidth whose output can only move so fast.

A differential input pair steers a current into the compensating capacitor, so that::

    dv/dt = S tanh(omega_u (u - v / G) / S)

with slew rate S, unity-gain frequency omega_u and closed-loop gain G (Solomon, *The monolithic op
amp: a tutorial study*, IEEE J. Solid-State Circuits, 1974, has the pair and its limit). While the
signal is slow against S this is a first-order lag of G / omega_u. Once the slope asked for nears S,
a third-order part grows that stands in the crests as well as in the lean, which no shaping trim
can cure.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, exp, pi, tanh

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

GENTLE = 0.3
"""Slope over slew rate below which the lag is solved exactly and the pair's curvature added."""
SETTLE_PERIODS = 2
"""Periods stepped through before the one that counts: the loop forgets within a microsecond."""


@dataclass(frozen=True, slots=True)
class OutputStage:
    """The amplifier between the shaped node and the terminal."""

    gain: float
    """Closed-loop gain G."""
    slew_v_s: float
    """Slew rate S at the output, volts per second."""
    unity_hz: float
    """Frequency at which the open loop's gain is one, omega_u / 2 pi."""

    def drive(self, node_v: Array, frequency_hz: float) -> Array:
        """Let one period through, in the steady state.

        Parameters
        ----------
        node_v
            Shape (N,), one period of the shaped node at even steps, volts.
        frequency_hz
            How often it repeats.

        Returns
        -------
        numpy.ndarray
            Shape (N,), one period at the terminal, volts.
        """
        orders = np.arange(node_v.size // 2 + 1)
        omega = 2.0 * pi * frequency_hz * orders
        spectrum = np.fft.rfft(node_v) * self.gain
        lag = self.gain / (2.0 * pi * self.unity_hz)
        spectrum /= 1.0 + 1j * omega * lag
        lagged = np.fft.irfft(spectrum, node_v.size)
        asked = np.fft.irfft(1j * omega * spectrum, node_v.size) / self.slew_v_s
        if np.max(np.abs(asked)) >= GENTLE:
            return self._step(node_v, frequency_hz, lagged)
        # The input that the pair needs beyond the linear one, for the slope it delivers.
        extra = self.slew_v_s / (2.0 * pi * self.unity_hz) * (np.arctanh(asked) - asked)
        return lagged - self.gain * extra

    def _step(self, node_v: Array, frequency_hz: float, start: Array) -> Array:
        """Step through time: exponential Euler, exact while the pair is linear."""
        step_s = 1.0 / (frequency_hz * node_v.size)
        omega_u = 2.0 * pi * self.unity_hz
        lag = self.gain / omega_u
        parts = max(1, ceil(2.0 * step_s / lag))
        h = step_s / parts
        slew, stiff = self.slew_v_s, omega_u / self.slew_v_s
        ends = np.append(node_v, node_v[0])
        grid = np.arange(node_v.size * parts) / parts + 0.5 / parts
        # Input at the middle of each step: second order in the step.
        middles: list[float] = np.interp(grid, np.arange(ends.size), ends).tolist()
        inverse = 1.0 / self.gain
        v = float(start[0])
        out: list[float] = []
        for period in range(SETTLE_PERIODS):
            keep = period == SETTLE_PERIODS - 1
            for at, u in enumerate(middles):
                if keep and at % parts == 0:
                    out.append(v)
                w = tanh(stiff * (u - v * inverse))
                # dv'/dv of the loop, and the exact growth of a linear one over the step
                rate = -omega_u * inverse * (1.0 - w * w)
                z = h * rate
                grown = (exp(z) - 1.0) / z if z < -1e-6 else 1.0 + 0.5 * z
                v += h * slew * w * grown
        return np.array(out)
