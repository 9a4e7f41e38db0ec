"""Finding the fundamental with no hint: the largest line of the spectrum.

The fundamental of a wave with up to 100 % distortion is its largest line, so no guess among
multiples is needed. Short records are searched whole. Long ones first in a few segments, which
settles all but slow fundamentals; those are searched in the record averaged down. Either way only
a few tens of thousand samples are transformed.
"""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from trimmer.measurement.kernels import Array
from trimmer.measurement.model import Lines
from trimmer.measurement.projection import Projections, Record, project

_WHOLE = 1 << 15
"""Records up to this length are transformed whole."""
_SEGMENTS = 6
_SLOW_CELLS = 10.0
"""Below so many periods in a segment the averaged record decides."""
_GRAIN = 1e-12
_GOLDEN = 0.6180339887498949


@lru_cache(maxsize=16)
def _hann(samples: int) -> Array:
    """Periodic-symmetric Hann window without zero end points, read-only; shape (samples,)."""
    window = 0.5 - 0.5 * np.cos(2.0 * np.pi * (np.arange(samples) + 0.5) / samples)
    window.flags.writeable = False
    return window


def _power_spectrum(values: Array, padded: int) -> Array:
    """Hann-windowed power spectrum, straight line taken off under the window."""
    window = _hann(values.size)
    t = np.arange(values.size) - 0.5 * (values.size - 1)
    weight = float(window.sum())
    values = values - float(window @ values) / weight
    slope = float((window * t) @ values) / float(window @ (t * t))
    values -= slope * t
    if float(np.abs(values).max()) < _GRAIN:  # a straight line, and the arithmetic's grain
        return np.zeros(padded // 2 + 1)
    spectrum = np.fft.rfft(values * window, padded)
    return spectrum.real**2 + spectrum.imag**2


def _padded(samples: int, factor: float) -> int:
    """Give a length for the FFT of at least `factor` times the samples: a power of 2, or 3/4 of it."""
    wanted = factor * samples
    power = 1 << math.ceil(math.log2(wanted))
    return 3 * power // 4 if 3 * power // 4 >= wanted and power >= 8 else power


def _largest_line(power: Array, cell: float, lowest: float) -> float:
    """Find the largest local maximum above `lowest` cells; `cell` is bins per 1/N.

    Returns
    -------
    float
        Its position in bins; 0 where there is none.
    """
    start = max(1, math.ceil(lowest * cell))
    inner = power[start:-1]
    if inner.size < 1 or not np.any(inner > 0.0):
        return 0.0
    peaks = (inner >= power[start - 1 : -2]) & (inner >= power[start + 1 :])
    if not peaks.any():
        return 0.0
    best = start + int(np.argmax(np.where(peaks, inner, -1.0)))
    below, at, above = (math.log(max(float(power[best + i]), 1e-300)) for i in (-1, 0, 1))
    bend = below - 2.0 * at + above
    if bend >= 0.0:
        return float(best)
    return best + cell * _beside(
        0.5 * (above - below), 0.5 * (below - above) / bend / cell, 1.0 / cell
    )


def _beside(lead: float, start: float, spacing: float) -> float:
    """Place a line between bins by the Hann window's own main lobe.

    Parameters
    ----------
    lead
        Logarithm of the bin above the peak over the bin below it.
    start
        Place by a parabola through the logarithms of three bins, cells of the record.
    spacing
        Distance of the bins, cells.

    Returns
    -------
    float
        Distance of the line from the peak's bin, cells.
    """
    off = max(-0.5 * spacing, min(0.5 * spacing, start))
    for _ in range(
        3
    ):  # the lobe's logarithm bends by 2 - pi^2/3 at its top, and hardly more beside
        short = lead - _lobe(off - spacing) + _lobe(off + spacing)
        off += short / (2.0 * spacing * (math.pi**2 / 3.0 - 2.0))
    return max(-spacing, min(spacing, off))


def _lobe(x: float) -> float:
    """Logarithm of the Hann window's transform ``sin(pi x) / (pi x (1 - x^2))``, ``|x| < 2``."""
    if abs(x) < 1e-6:
        return 0.0
    if abs(abs(x) - 1.0) < 1e-6:
        return -math.log(2.0)
    return math.log(max(math.sin(math.pi * x) / (math.pi * x * (1.0 - x * x)), 1e-300))


def coarse_fundamental(record: Record) -> tuple[float, float]:
    """Find the fundamental of a record.

    Returns
    -------
    tuple
        Radians per sample (0 where no line stands out), and how far it may be off: 0 where it is
        known to a few hundredths of ``2 pi / N``, else the resolution of the segments, for `beat`
        to sharpen.
    """
    if record.count <= _WHOLE:
        return _whole(record.piece(0, record.count)), 0.0
    quick = _in_segments(record)
    if quick > 0.0:
        return quick, 2.0 * math.pi / _segment_length(record.count)
    return _averaged(record), 0.0


def _whole(values: Array) -> float:
    padded = _padded(values.size, 2.0)
    cell = padded / values.size
    bin_ = _largest_line(_power_spectrum(values, padded), cell, 1.2)
    return 2.0 * math.pi * bin_ / padded


def _segment_length(samples: int) -> int:
    return max(_WHOLE // 2, 1 << math.ceil(math.log2(16.0 * math.sqrt(samples))))


def _in_segments(record: Record) -> float:
    """Search a few segments; 0 where the fundamental is too slow for them."""
    length = _segment_length(record.count)
    room = record.count - length
    window = _hann(length)
    power = np.zeros(length // 2 + 1)
    for i in range(_SEGMENTS):
        start = round(room * math.fmod(i * _GOLDEN, 1.0))
        spectrum = np.fft.rfft(record.piece(start, start + length) * window)
        power += spectrum.real**2 + spectrum.imag**2
    if float(np.argmax(power)) < _SLOW_CELLS:
        return 0.0
    bin_ = _largest_line(power, 1.0, _SLOW_CELLS - 2.0)
    return 2.0 * math.pi * bin_ / length


def _averaged(record: Record) -> float:
    """Search the whole record, averaged down."""
    group = record.count // _segment_length(record.count)
    count = record.count // group
    means = np.add.reduceat(record.samples, np.arange(0, count * group, group))
    if count * group < record.count:  # the last group took the rest as well
        means[-1] = record.samples[(count - 1) * group : count * group].sum()
    return _whole((means / group - record.mean) / record.scale) / group


def beat(projections: Projections, line: int, w: float, reach: float) -> float:
    """Find the strongest line within `reach` of the frequency `w` that column `line` was projected on.

    Each block's sum turns at what the frequency is off, and an FFT over the blocks shows it: the
    resolution of the whole record for a transform as long as the number of blocks.

    Returns
    -------
    float
        Radians per sample; `w` itself where nothing stands out.
    """
    turning = projections.sums[line] * np.exp(-1j * w * projections.centres)
    padded = _padded(turning.size, 4.0)
    spectrum = np.fft.fft(turning * _hann(turning.size), padded)
    power = np.roll(spectrum.real**2 + spectrum.imag**2, padded // 2)
    cell = 2.0 * math.pi / (padded * projections.length)
    bins = min(max(2, math.ceil(reach / cell)), padded // 2 - 1)
    start = padded // 2 - bins
    fine = padded / turning.size
    bin_ = _largest_line(power[start : padded // 2 + bins + 1], fine, 1.0 / fine)
    return w + cell * (bin_ + start - padded // 2) if bin_ > 0.0 else w


def nearest_lines(record: Record, w: Array, reach: Array) -> Array:
    """Find the strongest line within `reach` of each `w`; all in radians per sample, shape (n,)."""
    projections = project(record, Lines(1, w), 0.5 * math.pi)
    found = [
        beat(projections, 2 + i, float(near), float(far))
        for i, (near, far) in enumerate(zip(w, reach, strict=True))
    ]
    return np.array(found)
