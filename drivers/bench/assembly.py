"""The bench as a whole: a unit, a digitiser in one dialect, a socket on the loopback address."""

from __future__ import annotations

import contextlib
import secrets
import threading
import time
from collections.abc import Callable
from math import floor, log10
from typing import Self

import numpy as np

from drivers.bench.digitiser import Converter, Settings
from drivers.bench.faults import LATE_S, STARTS_AFTER, FaultSwitch, check
from drivers.bench.parts import NOMINAL, Parts, draw
from drivers.bench.plant import TRIMS, Plant
from drivers.bench.server import LOOPBACK, Server
from drivers.bench.speakers import SPEAKERS

FRAME_CYCLES = 10.0
"""Cycles of the wave in a record, as a person sets the time axis."""
TIME_SCALE = 45.0
"""A cold unit warms this much faster than a real one: minutes pass in seconds."""
MIDDLE = (0.2, 0.8)
"""The trims stand somewhere here at first, shares of the travel."""


class Bench:
    """A simulated unit and a digitiser that watches it, reached through a socket.

    Parameters
    ----------
    seed
        Of the unit, where its trims stand, and all noise; None takes one from the system.
    dialect
        Waveform dialect of the digitiser, one of `DIALECTS`.
    fault
        A fault from the start, one of `FAULTS`.
    port
        TCP port on the loopback address; 0 lets the system choose.
    travel_turns
        Screw turns over a trim's whole travel.
    frequency_hz
        What the unit's dial is set to; None for 1 kHz.
    cold
        True for a unit just switched on.
    nonlinearity_codes
        Peak of the digitiser's integral non-linearity, codes.
    noise_codes
        The digitiser's own noise, codes rms.
    acquire_s
        Seconds that an acquisition takes; None for as long as its record is.
    parts
        The unit itself, where it is not to be drawn from the seed.
    start
        Where the trims stand at first, upper and lower, shares of the travel.
    time_scale
        Seconds of warming that pass in one second of the clock.
    clock
        Seconds, never backwards: of the unit's warming and the screws' motion.

    Raises
    ------
    ValueError
        A name is not known, or a number makes no sense.
    OSError
        The port cannot be had.
    """

    def __init__(
        self,
        seed: int | None = None,
        *,
        dialect: str = "ten-field",
        fault: str | None = None,
        port: int = 0,
        travel_turns: float = 0.75,
        frequency_hz: float | None = None,
        cold: bool = False,
        nonlinearity_codes: float = 0.05,
        noise_codes: float = 0.55,
        acquire_s: float | None = 0.0,
        parts: Parts | None = None,
        start: tuple[float, float] | None = None,
        time_scale: float = TIME_SCALE,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        if dialect not in SPEAKERS:
            raise ValueError(
                f"there is no dialect {dialect!r}; there are: {', '.join(sorted(SPEAKERS))}"
            )
        if fault is not None:
            check(fault)
        self.seed = secrets.randbelow(2**31) if seed is None else seed
        """Gives the same unit, start and noise again."""
        if self.seed < 0:
            raise ValueError(f"a seed is 0 or more, not {seed}")
        self.travel_turns = travel_turns
        """Screw turns over a trim's whole travel."""
        self.dialect = dialect
        """Waveform dialect of the digitiser."""
        rng = np.random.default_rng((self.seed, 0))
        drawn = (float(rng.uniform(*MIDDLE)), float(rng.uniform(*MIDDLE)))
        self.plant = Plant(
            parts or draw(self.seed),
            start=start or drawn,
            travel_turns=travel_turns,
            frequency_hz=NOMINAL.frequency_hz if frequency_hz is None else frequency_hz,
            cold=cold,
            time_scale=time_scale,
            clock=clock,
        )
        """The unit itself."""
        self._halt = threading.Event()
        self._faults = FaultSwitch(self.seed)
        speaker = SPEAKERS[dialect]
        self.instrument = speaker(
            self.plant.wave,
            Converter(
                self.seed,
                noise_codes=noise_codes,
                nonlinearity_codes=nonlinearity_codes,
                lowest_code=speaker.lowest_code,
            ),
            Settings(),
            serial=self.seed % 1_000_000,
            acquire_s=acquire_s,
            faults=self._faults,
            halt=self._halt,
        )
        """The digitiser."""
        self.instrument.set_time_axis(self._record_s(self.instrument.settings.points))
        if fault is not None:
            self.fail(fault, after=STARTS_AFTER.get(fault, 0))
        self._server = Server(self.instrument, self._faults, port, self._halt)

    @property
    def port(self) -> int:
        """TCP port on the loopback address."""
        return self._server.port

    @property
    def resource(self) -> str:
        """VISA resource name of the digitiser."""
        return f"TCPIP::{LOOPBACK}::{self.port}::SOCKET"

    # -- the unit -----------------------------------------------------------------------------

    def turn(self, trim: str, turns: float, seconds: float = 0.0) -> None:
        """Turn a trim's screw.

        Parameters
        ----------
        trim
            `upper` or `lower`.
        turns
            Screw turns, clockwise positive. Backlash, end stops, the track and the trim's sense
            of rotation are the unit's.
        seconds
            Spreads the motion evenly over real time, in the background.
        """
        self.plant.turn(trim, turns, seconds)

    def drive(self, trim: str, turns_per_s: float) -> None:
        """Keep a screw turning at a rate; 0 stops it."""
        self.plant.drive(trim, turns_per_s)

    def slow(self, trim: str, share: float) -> None:
        """Go on turning at a share of the rate."""
        self.plant.slow(trim, share)

    def finish(self, trim: str, after_s: float = 0.0) -> None:
        """Let a motion under way go on for so long, and no longer."""
        self.plant.finish(trim, after_s)

    def position(self, trim: str) -> float:
        """Where a wiper stands, share of the mechanical travel (0 to 1, clockwise)."""
        return self.plant.position(trim)

    def at_stop(self, trim: str) -> bool:
        """Say whether a screw stands against the stop it was last turned towards."""
        return self.plant.at_stop(trim)

    @property
    def frequency_hz(self) -> float:
        """True frequency of the wave now."""
        return self.plant.frequency_hz()

    def set_frequency(self, hertz: float) -> None:
        """Turn the unit's dial, and the digitiser's time axis with it, as a person does."""
        self.plant.set_frequency(hertz)
        self.instrument.set_time_axis(self._record_s(self.instrument.settings.points))

    def thd(self) -> float:
        """THD without noise at the present setting, ratio, orders 2 to 15."""
        return self.plant.thd()

    def best(self, *, warm: bool = False) -> tuple[float, float, float]:
        """Find the true best inside the travel, at the present frequency, without noise.

        Parameters
        ----------
        warm
            True for the warm unit, whatever it is now.

        Returns
        -------
        thd, upper, lower
            Ratio, and the trims' positions, shares of the mechanical travel.
        """
        return self.plant.best(warm=warm)

    def _record_s(self, points: int) -> float:
        """Choose the sample interval of 1, 2 or 5 that comes nearest to the cycles wanted."""
        wanted = log10(FRAME_CYCLES / self.plant.frequency_hz() / points)
        steps = [float(f"{digit}e{floor(wanted)}") for digit in (1, 2, 5, 10)]
        return points * min(steps, key=lambda s: abs(log10(s) - wanted))

    # -- faults -------------------------------------------------------------------------------

    def fail(
        self, name: str | None, *, times: int | None = None, after: int = 0, late_s: float = LATE_S
    ) -> None:
        """Put a fault in force, or with None end it.

        Parameters
        ----------
        name
            One of `FAULTS`.
        times
            Waveforms (answers, for `silence` and `garbage`) that suffer; None for all from now on.
        after
            Waveforms that are handed out soundly first.
        late_s
            How late, for `late-answer`.
        """
        self._faults.set(name, times, after, late_s)

    def close(self) -> None:
        """Close the socket and end every thread, within a second. Twice does no harm."""
        self._server.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        with contextlib.suppress(OSError):
            self.close()


def parse_turn(line: str) -> tuple[str, float]:
    """Read a turn written as a line: ``upper 0.06``, ``lower -0.02``.

    Returns
    -------
    trim, turns
        Screw turns, clockwise positive.

    Raises
    ------
    ValueError
        The line says no such thing; the message says what is wrong.
    """
    words = line.split()
    if len(words) != 2:
        raise ValueError(f"a turn is a trim and its screw turns, not {line.strip()!r}")
    trim, text = words[0].lower(), words[1]
    if trim not in TRIMS:
        raise ValueError(f"there is no trim {words[0]!r}: it is `upper` or `lower`")
    try:
        turns = float(text)
    except ValueError:
        raise ValueError(f"{text!r} is not a number of turns") from None
    if not abs(turns) <= 1000.0:
        raise ValueError(f"{text} turns cannot be made")
    return trim, turns
