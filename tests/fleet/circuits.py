"""Static curves of six shapers of our own, each with two trims at electrical positions in 0..1.

All voltages in volts, currents in amperes, resistances in ohms. Values are invented; what they are
aimed at is the size of the effects which a circuit simulator shows for such networks.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.special import wrightomega

from tests.fleet.waves import Vector, coefficients, crest_frame

THERMAL_V = 0.02585
NODES = 281


class Circuit(Protocol):
    """A shaper with its component values drawn."""

    @property
    def rise_share(self) -> float:
        """Share of the period that the triangle spends rising."""
        ...

    def curve(self, upper: float, lower: float) -> tuple[Vector, Vector, float]:
        """Give the triangle's values, the output at them, and the triangle's peak."""
        ...


def parts(circuit: Circuit, upper: float, lower: float, lag: float = 0.0) -> Vector:
    """Give the true crest and skew parts at electrical positions; `lag` is w tau of the output."""
    x, y, peak = circuit.curve(upper, lower)
    z = coefficients(x, y, peak, circuit.rise_share)
    k = np.arange(1, z.size + 1)
    return crest_frame(z / (1.0 + 1j * k * lag))


def junction(voltage: Vector, knee: float, resistance: float, saturation_a: float) -> Vector:
    """Current of a junction in series with a resistor once `voltage` passes `knee` (exact)."""
    scale = THERMAL_V / resistance
    omega = wrightomega(np.log(saturation_a / scale) + (voltage - knee) / THERMAL_V)
    return np.asarray(scale * omega, dtype=np.float64)


def _levels(top: float) -> Vector:
    """Output levels for a table, closer together towards the crests."""
    return np.asarray(top * np.sin(np.linspace(-1.5, 1.5, NODES)), dtype=np.float64)


def _through_network(x_of_y: NDArray[np.float64], y: Vector, peak: float) -> tuple[Vector, Vector]:
    """Cut a table (x(y), y) to the triangle's span, ends by local interpolation."""
    if x_of_y[0] > -peak or x_of_y[-1] < peak:
        raise ValueError("the table of the curve ends before the triangle does")
    inside = (x_of_y > -peak) & (x_of_y < peak)
    ends = np.interp([-peak, peak], x_of_y, y)
    x = np.concatenate(([-peak], x_of_y[inside], [peak]))
    return x, np.concatenate((ends[:1], y[inside], ends[1:]))


@dataclass(frozen=True, slots=True)
class Ladders:
    """Breakpoint branches on two resistor ladders, each ladder's far end fed by a trim."""

    rise_share: float
    peak_v: float
    offset_v: float
    series: float
    rungs: NDArray[np.float64]
    """Shape (2, n + 1), the ladders' resistors from ground up, then the feed."""
    branches: NDArray[np.float64]
    """Shape (2, n), series resistors of the branches, lowest tap first."""
    knees_v: NDArray[np.float64]
    """Shape (2, n), errors of the junctions' knees."""
    rails_v: tuple[float, float]
    swing: float
    """Share of the rail over which the trim moves the ladder's feed."""
    coupling: float
    """Share of one trim's feed that loads the other ladder."""

    def curve(self, upper: float, lower: float) -> tuple[Vector, Vector, float]:
        feeds = np.array([upper, lower])
        feeds = feeds - self.coupling * (feeds[::-1] - 0.5)
        y = _levels(1.1 * self.peak_v)
        x = y.copy()
        for side, sign in enumerate((1.0, -1.0)):
            taps = self._taps(side, float(feeds[side]))
            for tap, resistance, error in zip(
                taps, self.branches[side], self.knees_v[side], strict=True
            ):
                flow = junction(sign * y, tap + 0.55 + error, float(resistance), 1e-3)
                x += sign * self.series * flow
        x -= self.offset_v
        return *_through_network(x, y, self.peak_v), self.peak_v

    def _taps(self, side: int, feed: float) -> Vector:
        drive = abs(self.rails_v[side]) * (1.0 - self.swing * (0.5 - feed))
        ladder = self.rungs[side]
        return np.asarray(drive * np.cumsum(ladder[:-1]) / ladder.sum(), dtype=np.float64)


@dataclass(frozen=True, slots=True)
class Pair:
    """A bipolar differential pair with emitter resistor, driven by a triangle with an offset.

    ``v = V_T ln((1 + i) / (1 - i)) + r i`` where `i` is the output over the tail current. `mixing`
    is the matrix by which the two trims set drive and balance.
    """

    rise_share: float
    drive: float
    """Peak drive over V_T at mid-travel."""
    offset: float
    """Balance over V_T at mid-travel."""
    degeneration: float
    """Emitter resistor times tail current over V_T."""
    mixing: NDArray[np.float64]
    """Shape (2, 2): drive (relative) and balance (in V_T) per travel of upper and lower."""
    bend: float
    """Relative unevenness by which the drive saturates towards one end."""

    def curve(self, upper: float, lower: float) -> tuple[Vector, Vector, float]:
        at = np.array([upper - 0.5, lower - 0.5])
        gain, shift = self.mixing @ at
        peak = self.drive * (1.0 + gain + self.bend * gain**2)
        output = np.tanh(np.linspace(-5.0, 5.0, NODES))
        v = np.log1p(output) - np.log1p(-output) + self.degeneration * output
        return *_through_network(v - self.offset - shift, output, peak), peak


@dataclass(frozen=True, slots=True)
class Diodes:
    """Three diode clamps a side behind resistors; each trim moves its side's bias and its load."""

    rise_share: float
    peak_v: float
    offset_v: float
    series: float
    biases_v: NDArray[np.float64]
    """Shape (2, 3), the clamps' voltages at mid-travel, lowest first."""
    resistances: NDArray[np.float64]
    """Shape (2, 3)."""
    reach: NDArray[np.float64]
    """Shape (2, 3), relative movement of each clamp's voltage over the travel."""
    common: float
    """Share by which a trim also moves the other side (shared divider)."""

    def curve(self, upper: float, lower: float) -> tuple[Vector, Vector, float]:
        at = np.array([upper - 0.5, lower - 0.5])
        at = at + self.common * at[::-1]
        y = _levels(1.1 * self.peak_v)
        x = y.copy()
        for side, sign in enumerate((1.0, -1.0)):
            bias = self.biases_v[side] * (1.0 + self.reach[side] * at[side])
            for level, resistance in zip(bias, self.resistances[side], strict=True):
                x += (
                    sign
                    * self.series
                    * junction(sign * y, float(level) + 0.55, float(resistance), 1e-3)
                )
        x -= self.offset_v
        return *_through_network(x, y, self.peak_v), self.peak_v


@dataclass(frozen=True, slots=True)
class SquareLaw:
    """Two voltage-controlled square-law clippers, one a half wave, each with its trim's threshold."""

    rise_share: float
    offset: float
    thresholds: NDArray[np.float64]
    strengths: NDArray[np.float64]
    reach: NDArray[np.float64]
    softness: float

    def curve(self, upper: float, lower: float) -> tuple[Vector, Vector, float]:
        x = np.linspace(-1.0, 1.0, NODES)
        v = x + self.offset
        y = v.copy()
        for side, (sign, at) in enumerate(((1.0, upper), (-1.0, lower))):
            threshold = self.thresholds[side] + self.reach[side] * (at - 0.5)
            over = self.softness * np.logaddexp(0.0, (sign * v - threshold) / self.softness)
            y -= sign * self.strengths[side] * over**2
        return x, y, 1.0
