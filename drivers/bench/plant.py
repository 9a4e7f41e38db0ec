"""The unit on the bench as time goes by: its screws, its temperature, its dial."""

from __future__ import annotations

import threading
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from drivers.bench.parts import NOMINAL, WARM_C, Parts
from drivers.bench.pot import Screw
from drivers.bench.unit import Best, best, period, thd

Trim = Literal["upper", "lower"]
TRIMS: tuple[Trim, Trim] = ("upper", "lower")

SLOWEST_HZ, FASTEST_HZ = 10.0, 100e3
"""The dial's range."""
TEMPERATURE_STEP_K = 0.02
"""The wave is worked out anew when the temperature has changed by this much: 0.004 % of THD."""


@dataclass(frozen=True, slots=True, eq=False)
class Wave:
    """What stands at the unit's terminal at one instant: one period of it, and what rides on it."""

    period_v: NDArray[np.float64]
    """Shape (P,), one period at even steps, volts."""
    frequency_hz: float
    """How often it repeats."""
    hum_hz: float
    """Mains frequency."""
    hum_v: float
    """Peak of the hum, volts."""
    noise_v: float
    """Noise, volts rms."""


class Plant:
    """One unit and its two screws.

    Parameters
    ----------
    parts
        The unit.
    start
        Where the wipers stand at first: upper and lower, shares of the mechanical travel.
    travel_turns
        Screw turns over the whole travel.
    frequency_hz
        What the dial is set to; the unit's own error comes on top.
    cold
        True for a unit that has just been switched on; False for one that has long been warm.
    time_scale
        Seconds of warming that pass in one second of the clock.
    clock
        Seconds, from anywhere, never backwards.
    """

    def __init__(
        self,
        parts: Parts,
        *,
        start: tuple[float, float],
        travel_turns: float,
        frequency_hz: float,
        cold: bool,
        time_scale: float,
        clock: Callable[[], float],
    ) -> None:
        self.parts = parts
        self._clock = clock
        self._zero = clock()
        self._cold = cold
        self._time_scale = time_scale
        self._screws = {
            trim: Screw(at, backlash=play, travel_turns=travel_turns)
            for trim, at, play in zip(TRIMS, start, parts.backlash, strict=True)
        }
        self._tracks = {"upper": parts.upper_track, "lower": parts.lower_track}
        self._lock = threading.RLock()
        self._kept: tuple[tuple[float, ...], NDArray[np.float64]] | None = None
        self.set_frequency(frequency_hz)

    @property
    def now_s(self) -> float:
        """Seconds since the unit stands on the bench."""
        return self._clock() - self._zero

    def set_frequency(self, hertz: float) -> None:
        """Turn the dial."""
        if not SLOWEST_HZ <= hertz <= FASTEST_HZ:
            raise ValueError(
                f"the dial goes from {SLOWEST_HZ:g} to {FASTEST_HZ:g} Hz, not {hertz:g}"
            )
        with self._lock:
            self._dial_hz = hertz * self.parts.frequency_hz / NOMINAL.frequency_hz

    def screw(self, trim: str) -> Screw:
        """Give a trim's screw.

        Raises
        ------
        ValueError
            There is no such trim.
        """
        if trim not in self._screws:
            raise ValueError(f"there is no trim {trim!r}: it is `upper` or `lower`")
        return self._screws[trim]

    def turn(self, trim: str, turns: float, seconds: float) -> None:
        """Turn a screw; see `Screw.turn`."""
        with self._lock:
            self.screw(trim).turn(turns, self.now_s, seconds)

    def drive(self, trim: str, turns_per_s: float) -> None:
        """Keep a screw turning; see `Screw.drive`."""
        with self._lock:
            self.screw(trim).drive(turns_per_s, self.now_s)

    def slow(self, trim: str, share: float) -> None:
        """Go on turning at a share of the rate; see `Screw.slow`."""
        with self._lock:
            self.screw(trim).slow(share, self.now_s)

    def finish(self, trim: str, after_s: float) -> None:
        """Let a screw turn on for so long only; see `Screw.finish`."""
        with self._lock:
            self.screw(trim).finish(self.now_s, after_s)

    def position(self, trim: str) -> float:
        """Where a wiper stands, share of the mechanical travel."""
        with self._lock:
            return self.screw(trim).position(self.now_s)

    def at_stop(self, trim: str) -> bool:
        """Say whether a screw stands against a stop."""
        with self._lock:
            return self.screw(trim).at_stop(self.now_s)

    def temperature_c(self) -> float:
        """Inside temperature, degrees Celsius."""
        if not self._cold:
            return WARM_C
        return self.parts.warming.temperature_c(self.now_s * self._time_scale)

    def frequency_hz(self) -> float:
        """Frequency of the wave as it is now."""
        drift = self.parts.warming.frequency_per_k * (self.temperature_c() - WARM_C)
        return self._dial_hz * (1.0 + drift)

    def wipers(self) -> tuple[float, float]:
        """Electrical shares of the two trims."""
        upper, lower = (self._tracks[trim].electrical(self.position(trim)) for trim in TRIMS)
        return upper, lower

    def wave(self) -> Wave:
        """Give what stands at the terminal now."""
        with self._lock:
            temperature = TEMPERATURE_STEP_K * round(self.temperature_c() / TEMPERATURE_STEP_K)
            key = (*self.wipers(), self._dial_hz, temperature)
            if self._kept is None or self._kept[0] != key:
                wave = period(self.parts, (key[0], key[1]), self._dial_hz, temperature)
                wave.flags.writeable = False
                self._kept = (key, wave)
            return Wave(
                period_v=self._kept[1],
                frequency_hz=self.frequency_hz(),
                hum_hz=self.parts.mains_hz,
                hum_v=self.parts.hum_v,
                noise_v=self.parts.noise_v,
            )

    def thd(self) -> float:
        """THD without noise at the present setting, ratio."""
        return thd(self.wave().period_v)

    def best(self, *, warm: bool = False) -> tuple[float, float, float]:
        """Find the least THD inside the travel, at the present frequency.

        Parameters
        ----------
        warm
            True for the warm unit, whatever it is now.

        Returns
        -------
        thd, upper, lower
            Ratio, and where the wipers stand then, shares of the mechanical travel.
        """
        with self._lock:
            found: Best = best(self.parts, self._dial_hz, WARM_C if warm else self.temperature_c())
            upper, lower = (
                self._tracks[trim].mechanical(at)
                for trim, at in zip(TRIMS, found.wipers, strict=True)
            )
            return found.thd, upper, lower
