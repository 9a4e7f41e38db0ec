"""What one simulated unit is made of: the design's values, and a seed's tolerances on them.

All values are this project's own, chosen so that the unit shows what such shapers show: the
figures are asserted in the tests.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import exp

import numpy as np

from drivers.bench.ladder import TAPS, Ladder
from drivers.bench.output import OutputStage
from drivers.bench.pot import Track

WARM_C = 42.0
"""Inside temperature of a unit that has been on for long."""


@dataclass(frozen=True, slots=True)
class Warming:
    """How the inside temperature settles, and what it moves."""

    rise_k: float
    """From switching on to warm, kelvin."""
    time_constant_s: float
    """Of the exponential, seconds of the unit's own time."""
    knee_v_k: float
    """Drift of a knee, volts per kelvin, after what the unit compensates of its -2 mV/K."""
    triangle_per_k: float
    """Relative drift of the triangle's amplitude, per kelvin."""
    frequency_per_k: float
    """Relative drift of the frequency, per kelvin."""

    def temperature_c(self, seconds_on: float) -> float:
        """Inside temperature, degrees Celsius, so long after switching on."""
        return WARM_C - self.rise_k * exp(-seconds_on / self.time_constant_s)


@dataclass(frozen=True, slots=True)
class Parts:
    """One unit's parts, tolerances included."""

    frequency_hz: float
    """As the dial stands when it is warm."""
    triangle_v: float
    """Peak of the triangle when warm, volts."""
    offset_v: float
    """Its offset, volts."""
    rise_share: float
    """Share of the period in which the triangle rises."""
    source_ohm: float
    """Rs, from the triangle to the shaped node."""
    branches_ohm: tuple[float, ...]
    """Series resistors of the branches: four of the upper half, four of the lower."""
    knees_v: tuple[float, ...]
    """Drops of their junctions at the knee when warm, volts."""
    upper: Ladder
    """The upper half's ladder and trim."""
    lower: Ladder
    """The lower half's ladder and trim."""
    shared_ohm: float
    """From the ladders' shared node to ground."""
    rails_v: tuple[float, float]
    """Positive and negative supply, volts."""
    node_f: float
    """Capacitance at the shaped node, farad."""
    output: OutputStage
    """The amplifier after it."""
    upper_track: Track
    """The upper trim's track."""
    lower_track: Track
    """The lower trim's track."""
    backlash: tuple[float, float]
    """Play of the upper and the lower screw, shares of the travel."""
    warming: Warming
    """How it warms up."""
    mains_hz: float
    """Of the hum."""
    hum_v: float
    """Peak of the hum at the terminal, volts."""
    noise_v: float
    """Noise at the terminal, volts rms in the digitiser's bandwidth."""


NOMINAL = Parts(
    frequency_hz=1000.0,
    triangle_v=3.9,
    offset_v=0.0,
    rise_share=0.5,
    source_ohm=10e3,
    branches_ohm=2 * (82e3, 27e3, 11e3, 1e3),
    knees_v=(0.15,) * 2 * TAPS,
    upper=Ladder(8.2e3, (680.0, 820.0, 620.0, 470.0), 51e3, 47e3),
    lower=Ladder(8.2e3, (680.0, 820.0, 620.0, 470.0), 51e3, 47e3),
    shared_ohm=180.0,
    rails_v=(10.0, -10.0),
    node_f=25e-12,
    output=OutputStage(gain=2.0, slew_v_s=0.515e6, unity_hz=1.5e6),
    upper_track=Track(),
    lower_track=Track(),
    backlash=(0.01, 0.01),
    warming=Warming(18.0, 360.0, -0.6e-3, 2e-4, -1.5e-4),
    mains_hz=50.0,
    hum_v=0.5e-3,
    noise_v=0.6e-3,
)
"""The unit as drawn, before tolerances."""


def draw(seed: int | None, nominal: Parts = NOMINAL) -> Parts:
    """Draw one unit of the design.

    Tolerances are standard deviations, cut at two of them: resistors 1.5 %, knees 1.2 mV, rails
    1 %, triangle 1 %, offset 20 mV, rise share 0.2 %.

    Parameters
    ----------
    seed
        Of this unit; None takes one from the system.
    nominal
        The design.
    """
    rng = np.random.default_rng(seed)

    def cut(sigma: float) -> float:
        while abs(z := float(rng.standard_normal())) > 2.0:
            pass
        return sigma * z

    def ohm(value: float) -> float:
        return value * (1.0 + cut(0.015))

    def ladder(ideal: Ladder) -> Ladder:
        rungs = tuple(ohm(r) for r in ideal.rungs_ohm)
        return Ladder(ohm(ideal.top_ohm), rungs, ohm(ideal.feed_ohm), ohm(ideal.pot_ohm))

    def track() -> Track:
        return Track(
            bow=float(rng.uniform(-0.03, 0.03)),
            ripple=float(rng.uniform(-0.015, 0.015)),
            reverse=bool(rng.random() < 0.5),
        )

    plus, minus = nominal.rails_v
    ideal = nominal.warming
    return Parts(
        frequency_hz=nominal.frequency_hz * (1.0 + cut(0.01)),
        triangle_v=nominal.triangle_v * (1.0 + cut(0.01)),
        offset_v=nominal.offset_v + cut(0.020),
        rise_share=nominal.rise_share + cut(0.002),
        source_ohm=ohm(nominal.source_ohm),
        branches_ohm=tuple(ohm(r) for r in nominal.branches_ohm),
        knees_v=tuple(v + cut(0.0012) for v in nominal.knees_v),
        upper=ladder(nominal.upper),
        lower=ladder(nominal.lower),
        shared_ohm=ohm(nominal.shared_ohm),
        rails_v=(plus * (1.0 + cut(0.01)), minus * (1.0 + cut(0.01))),
        node_f=nominal.node_f * (1.0 + cut(0.1)),
        output=OutputStage(
            nominal.output.gain,
            nominal.output.slew_v_s * (1.0 + cut(0.02)),
            nominal.output.unity_hz * (1.0 + cut(0.1)),
        ),
        upper_track=track(),
        lower_track=track(),
        backlash=(float(rng.uniform(0.004, 0.02)), float(rng.uniform(0.004, 0.02))),
        warming=Warming(
            ideal.rise_k * (1.0 + cut(0.1)),
            ideal.time_constant_s * (1.0 + cut(0.15)),
            ideal.knee_v_k * (1.0 + cut(0.2)),
            ideal.triangle_per_k * (1.0 + cut(0.2)),
            ideal.frequency_per_k * (1.0 + cut(0.2)),
        ),
        mains_hz=nominal.mains_hz * (1.0 + cut(0.001)),
        hum_v=nominal.hum_v * (1.0 + cut(0.4)),
        noise_v=nominal.noise_v * (1.0 + cut(0.1)),
    )
