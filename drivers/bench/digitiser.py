"""The simulated digitiser: what becomes of a wave between its input and its memory.

Eight bits, a range and an offset, noise of its own, a smooth non-linearity of its converter,
rails. Averaging adds up frames that were each rounded to eight bits; their noise is what carries
the bits below (W. R. Bennett, *Spectra of quantized signals*, Bell System Technical Journal 27,
1948, on when rounding is noise).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import ceil, log2, pi

import numpy as np
from numpy.typing import NDArray

from drivers.bench.plant import Wave

CODES = 256
"""Codes of one frame."""
MOST_BITS = 12
"""Bits that averaging can yield."""
WORD_BITS = 16
"""Bits of a word in memory; codes stand left in it."""
MOST_AVERAGED = 1024
MOST_POINTS = 2_000_000
MOST_WORK = 50_000_000
"""Points times averaged frames that one acquisition may take."""
PEAK_FINER = 4
"""How much finer peak detection samples than it hands out."""
COUPLING_HZ = 7.0
"""Corner of the input when AC-coupled."""


@dataclass(frozen=True, slots=True)
class Settings:
    """How the digitiser is set."""

    full_scale_v: float = 12.8
    """Span of all codes, volts."""
    offset_v: float = 0.0
    """Voltage in the middle of the span."""
    interval_s: float = 1e-6
    """Seconds between samples."""
    points: int = 10_000
    """Samples of a frame."""
    average: int = 1
    """Frames averaged into one."""
    ac: bool = False
    """True when the input is AC-coupled."""
    peak: bool = False
    """True for peak detection: the least and the largest of each interval, one after the other."""

    @property
    def code_v(self) -> float:
        """Volts between two codes."""
        return self.full_scale_v / CODES

    @property
    def low_v(self) -> float:
        """Voltage of code 0."""
        return self.offset_v - 0.5 * self.full_scale_v

    @property
    def bits(self) -> int:
        """Bits that an acquisition yields."""
        return min(MOST_BITS, 8 + ceil(0.5 * log2(self.average)))


@dataclass(frozen=True, slots=True, eq=False)
class Frame:
    """One acquisition in memory."""

    words: NDArray[np.uint16]
    """Shape (N,), codes standing left in 16 bits."""
    settings: Settings
    """How the digitiser was set."""
    number: int
    """Counts acquisitions since the digitiser was switched on, from 1."""
    clipped_low: bool
    """True where samples lie on the lower rail."""
    clipped_high: bool
    """True where samples lie on the upper rail."""

    def volts(self) -> NDArray[np.float64]:
        """What the digitiser means by its codes, shape (N,)."""
        word_v = self.settings.full_scale_v / (1 << WORD_BITS)
        return self.settings.low_v + self.words.astype(np.float64) * word_v


class Converter:
    """The analog-digital converter with its faults, all from one seed.

    Parameters
    ----------
    seed
        Of non-linearity, noise and trigger instants.
    noise_codes
        Noise of its input, codes rms.
    nonlinearity_codes
        Peak of the integral non-linearity, codes.
    lowest_code, highest_code
        The rails.
    """

    def __init__(
        self,
        seed: int,
        *,
        noise_codes: float = 0.55,
        nonlinearity_codes: float = 0.05,
        lowest_code: int = 0,
        highest_code: int = CODES - 1,
    ) -> None:
        if not 0.0 <= noise_codes < CODES or not 0.0 <= nonlinearity_codes < CODES:
            raise ValueError("noise and non-linearity are given in codes, from 0 up")
        self._seed = seed
        self._noise_codes = noise_codes
        self._rails = (lowest_code, highest_code)
        shape = _nonlinearity(np.random.default_rng((seed, 1)))
        self._grid = np.linspace(0.0, CODES - 1.0, shape.size)
        self._nonlinearity = nonlinearity_codes * shape
        self._frames = 0

    def acquire(self, wave: Wave, settings: Settings, gain: float = 1.0) -> Frame:
        """Take one acquisition, at a trigger instant that has nothing to do with the sampling.

        The noise depends on the seed and on how many acquisitions were taken, not on the time.

        Parameters
        ----------
        wave
            What stands at the input.
        settings
            How the digitiser is set.
        gain
            What the wave goes through before the input, for faults of level.
        """
        self._frames += 1
        rng = np.random.default_rng((self._seed, 2, self._frames))
        table = self._in_codes(wave, settings, gain)
        start = rng.random()
        low, high = self._rails
        total: NDArray[np.float32] | None = None
        for _ in range(settings.average):
            codes = self._codes(table, wave, settings, start, rng)
            np.rint(codes, out=codes)
            np.clip(codes, low, high, out=codes)
            total = codes if total is None else np.add(total, codes, out=total)
        assert total is not None
        total *= np.float32((1 << settings.bits) / CODES / settings.average)
        np.rint(total, out=total)
        left = np.uint16(1 << (WORD_BITS - settings.bits))
        words = total.astype(np.uint16) * left
        least, most = int(words.min()), int(words.max())
        return Frame(words, settings, self._frames, least <= low << 8, most >= high << 8)

    def _in_codes(self, wave: Wave, settings: Settings, gain: float) -> NDArray[np.float32]:
        """One period as the converter sees it, in codes, its first point repeated at the end."""
        period = wave.period_v * gain
        if settings.ac:
            spectrum = np.fft.rfft(period)
            hertz = wave.frequency_hz * np.arange(spectrum.size)
            period = np.fft.irfft(spectrum * (1j * hertz / (1j * hertz + COUPLING_HZ)), period.size)
        codes = (period - settings.low_v) / settings.code_v
        # The curve bends over many codes, so it may be put on before noise and rounding.
        codes += np.interp(codes, self._grid, self._nonlinearity)
        return np.append(codes, codes[0]).astype(np.float32)

    def _codes(
        self,
        table: NDArray[np.float32],
        wave: Wave,
        settings: Settings,
        start: float,
        rng: np.random.Generator,
    ) -> NDArray[np.float32]:
        if not settings.peak:
            return self._sample(table, wave, settings, start, rng)
        fine = replace(
            settings,
            points=settings.points * PEAK_FINER,
            interval_s=settings.interval_s / PEAK_FINER,
        )
        samples = self._sample(table, wave, fine, start, rng)
        pairs = samples[: samples.size // (2 * PEAK_FINER) * 2 * PEAK_FINER]
        pairs = pairs.reshape(-1, 2 * PEAK_FINER)
        return np.stack([pairs.min(axis=1), pairs.max(axis=1)], axis=1).ravel()

    def _sample(
        self,
        table: NDArray[np.float32],
        wave: Wave,
        settings: Settings,
        start: float,
        rng: np.random.Generator,
    ) -> NDArray[np.float32]:
        points = table.size - 1
        at = np.arange(settings.points, dtype=np.float64)
        at *= wave.frequency_hz * settings.interval_s
        at += start
        at -= np.floor(at)
        at *= points
        below = at.astype(np.intp)
        np.minimum(below, points - 1, out=below)
        at -= below
        codes: NDArray[np.float32] = np.diff(table)[below]
        codes *= at.astype(np.float32)
        codes += table[below]
        noise = np.hypot(self._noise_codes, wave.noise_v / settings.code_v)
        grain = rng.standard_normal(settings.points, dtype=np.float32)
        grain *= np.float32(noise)
        codes += grain
        codes += self._hum(wave, settings, rng.random())
        return codes

    @staticmethod
    def _hum(wave: Wave, settings: Settings, start: float) -> NDArray[np.float32]:
        """Hum in codes, drawn through points 1/64 of its period apart or closer."""
        turns = wave.hum_hz * settings.interval_s * (settings.points - 1)
        knots = min(settings.points, 64 * ceil(turns) + 64)
        angle = 2.0 * pi * (start + turns * np.linspace(0.0, 1.0, knots))
        hum = wave.hum_v / settings.code_v * np.sin(angle)
        at = np.linspace(0.0, knots - 1.0, settings.points)
        drawn: NDArray[np.float32] = np.interp(at, np.arange(knots), hum).astype(np.float32)
        return drawn


def _nonlinearity(rng: np.random.Generator) -> NDArray[np.float64]:
    """A smooth curve over all codes, its peak 1, no offset and no gain in it.

    Chebyshev polynomials of order 2 to 6, the higher the smaller, as the bends of a converter's
    input are.
    """
    grid = np.linspace(-1.0, 1.0, 1025)
    weights = np.concatenate([[0.0, 0.0], rng.standard_normal(5) / np.arange(2, 7)])
    curve = np.polynomial.chebyshev.chebval(grid, weights)
    curve = curve - np.polyval(np.polyfit(grid, curve, 1), grid)
    shape: NDArray[np.float64] = curve / np.max(np.abs(curve))
    return shape
