"""From a triangle to a near-sine: eight soft breakpoints, and the capacitance of their node.

The triangle `x` feeds the shaped node `y` through a resistor `Rs`; past its tap voltage `V_k`
each branch draws a current through a junction in series with a resistor `R_k`::

    x(y) = y + Rs sum_k s_k I_k(y)                         s_k = +1 upper half, -1 lower half
    I_k  = (V_T / R_k) w((s_k (y - V_k) - V_on,k) / V_T)

`w` is the Wright omega function, `w + ln w = z`: with `V_on = V_T ln(V_T / (J R_k))`, `J` the
junction's saturation current, this is the exact current of an exponential junction behind a
resistor (Corless and Jeffrey, *The Wright omega function*, 2002). `x(y)` is monotone, so `y(x)` is
one interpolation and no iteration.

A capacitance C from the node to ground takes `C dy/dt` more. To first order in `Rs C` over the
period that moves the node by `-Rs C (dy/dx)^2 dx/dt`: a lean in time that grows with frequency.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import wrightomega

Array = NDArray[np.float64]

GRID = 2001
"""Points of the transfer curve: steps of 3 mV against a V_T of 26 mV keep it true to 1e-6."""


@dataclass(frozen=True, slots=True, eq=False)
class Breakpoints:
    """The branches of the shaper at one setting of the trims and one temperature."""

    source_ohm: float
    """Rs, between the triangle and the shaped node."""
    senses: Array
    """Shape (B,), +1 for branches of the upper half wave, -1 for those of the lower."""
    taps_v: Array
    """Shape (B,), tap voltages, volts."""
    branches_ohm: Array
    """Shape (B,), series resistors."""
    knees_v: Array
    """Shape (B,), `V_on`: drop of each junction at its knee, volts."""
    thermal_v: float
    """V_T = kT/q, volts. Towards zero the breakpoints become sharp."""

    def input_v(self, y: Array) -> tuple[Array, Array]:
        """Triangle voltage that holds the node at `y`, and its slope dx/dy.

        Parameters
        ----------
        y
            Shape (N,), node voltages, volts.

        Returns
        -------
        x, slope
            Shape (N,) each: volts, and a ratio that is never below 1.
        """
        past = self.senses[:, None] * (y[None, :] - self.taps_v[:, None]) - self.knees_v[:, None]
        omega = wrightomega(past / self.thermal_v)
        gain = self.source_ohm / self.branches_ohm
        x = y + (self.senses * gain * self.thermal_v) @ omega
        # dw/dz = w / (1 + w), and the sense counts twice
        slope = 1.0 + gain @ (omega / (1.0 + omega))
        return x, slope


def transfer(breakpoints: Breakpoints, low_v: float, high_v: float) -> tuple[Array, Array, Array]:
    """Tabulate the transfer curve over the span of a triangle.

    Parameters
    ----------
    breakpoints
        The branches.
    low_v, high_v
        The triangle's lowest and highest voltage.

    Returns
    -------
    x, y, slope
        Shape (GRID,) each: triangle and node, volts, ascending, and dy/dx. The table reaches over
        both ends of the triangle: the branches only ever draw current away from the node.
    """
    coarse = np.linspace(min(low_v, 0.0), max(high_v, 0.0), 65)
    reached, _ = breakpoints.input_v(coarse)
    first = int(np.searchsorted(reached, low_v, side="right")) - 1
    last = int(np.searchsorted(reached, high_v, side="left"))
    y = np.linspace(coarse[max(first, 0)], coarse[min(last, coarse.size - 1)], GRID)
    x, inverse = breakpoints.input_v(y)
    return x, y, 1.0 / inverse
