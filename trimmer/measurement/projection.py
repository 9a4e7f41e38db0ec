"""What the data have to say: block projections of a record on the lines of a model.

The record is cut into M blocks of B samples. One real matrix product gives every block's sums
``P = sum x exp(-j w_i b)`` and moments ``Q = sum b x exp(-j w_i b)``, with ``b`` counted from the
middle of the block. Twisting block m by ``exp(-j w_i t_m)`` and adding up gives the sums over the
whole record, and the moments give them at any slightly different frequency as well, so that the
frequency can be refined without touching the samples again.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trimmer.measurement.kernels import Array
from trimmer.measurement.model import Complex, Lines

SHORT = 1 << 15
"""Up to this many samples a record counts as short."""
_CHUNK = 1 << 15
"""Samples projected at a time: a quarter of a megabyte, so that a chunk stays in the cache."""


@dataclass(frozen=True, slots=True, eq=False)
class Record:
    """A record brought to order: mean and scale taken out when its samples are read."""

    samples: NDArray[np.float64]
    """Shape (N,), as given."""
    low: float
    """Least sample."""
    high: float
    """Largest sample."""
    mean: float
    """Taken off each sample."""
    scale: float
    """Each sample is divided by it after the mean is taken off."""

    @property
    def count(self) -> int:
        """N, number of samples."""
        return int(self.samples.size)

    def piece(self, start: int, stop: int) -> Array:
        """Samples `start` to `stop`, without mean, over the scale."""
        piece: Array = self.samples[start:stop] - self.mean
        piece *= 1.0 / self.scale
        return piece


@dataclass(frozen=True, slots=True, eq=False)
class Projections:
    """Block sums of a record on lines near the fundamental `w`."""

    samples: int
    """N."""
    lines: Lines
    """The lines projected on."""
    w: float
    """Fundamental at which the blocks were projected, radians per sample."""
    centres: Array
    """Shape (M,), middle of each block in samples from the middle of the record."""
    length: int
    """B, samples of a block."""
    sums: Complex
    """Shape (L, M), ``sum x exp(-j w_i b)``."""
    moments: Complex
    """Shape (L, M), ``sum b x exp(-j w_i b)``."""
    power: float
    """``sum x^2``."""

    def totals(self, w: float, lines: Lines | None = None) -> tuple[Complex, Complex]:
        """Give ``sum x exp(-j w_i t)`` and ``sum t x exp(-j w_i t)`` at the fundamental `w`.

        Exact at `self.w`; away from it the error is of the order of ``(K (w - self.w) B)^2 / 24``.
        `lines` chooses some of the lines: fewer orders, the first of the nuisance lines.
        """
        lines = self.lines if lines is None else lines
        keep = self.lines.kept(lines)
        sums, moments = self.sums[keep], self.moments[keep]
        turn = twists(self.centres, lines, w)
        shift = w - self.w
        if shift != 0.0:
            sums = sums - ((1j * shift) * lines.multiples())[:, None] * moments
        first = turn * sums
        second = first @ self.centres + np.einsum("lm,lm->l", turn, moments)
        return first.sum(axis=1), second

    def blur(self, w: float) -> float:
        """Say how far the highest order turns within half a block between `self.w` and `w`."""
        return 0.5 * abs(w - self.w) * self.lines.orders * self.length


def twists(t: Array, lines: Lines, w: float) -> Complex:
    """Give ``exp(-j w_i t)`` for each line; shape (L, len(t)).

    Orders are built by doubling: two multiplications each, where an exponential costs forty. What
    the doublings add to the error is far below that of the phase itself in a long record.
    """
    waves = np.empty((lines.count, t.size), dtype=np.complex128)
    waves[0] = 1.0
    known, turn = 1, _turn(t, w)
    while known <= lines.orders:
        more = min(known, lines.orders + 1 - known)
        np.multiply(waves[:more], turn, out=waves[known : known + more])
        known += more
        turn = turn * turn
    for place, fixed in enumerate(lines.fixed):
        waves[lines.orders + 1 + place] = _turn(t, float(fixed))
    return waves


def _turn(t: Array, w: float) -> Complex:
    """Give ``exp(-j w t)``; a cosine and a sine are quicker than a complex exponential."""
    angle = w * t
    turn = np.empty(t.size, dtype=np.complex128)
    np.cos(angle, out=turn.real)
    np.sin(-angle, out=turn.imag)
    return turn


def block_length(samples: int) -> int:
    """Choose B, even.

    In a long record twice as many samples in a block as there are blocks, because the blocks' sums
    are kept; in a short one half as many, so that the frequency may move further before the samples
    have to be projected again.
    """
    share = 0.7 if samples > SHORT else 0.35
    return max(8, 2 * round(share * float(np.sqrt(samples))))


def project(record: Record, lines: Lines, w: float) -> Projections:
    """Project a record on `lines` at the fundamental `w` (radians per sample)."""
    samples, length = record.count, block_length(record.count)
    blocks = -(-samples // length)
    inner: Array = np.arange(float(length)) - 0.5 * (length - 1)
    basis = _basis(inner, lines, w)
    found = np.empty((basis.shape[0], blocks))
    power = 0.0
    rows = max(1, _CHUNK // length)
    for first in range(0, blocks, rows):
        last = min(first + rows, blocks)
        piece = record.piece(first * length, min(last * length, samples))
        power += float(piece @ piece)
        if piece.size < (last - first) * length:  # zeros add nothing to any sum
            piece = np.concatenate((piece, np.zeros((last - first) * length - piece.size)))
        found[:, first:last] = basis @ piece.reshape(last - first, length).T
    count = lines.count
    sums = np.empty((count, blocks), dtype=np.complex128)
    sums.real, sums.imag = found[:count], found[count : 2 * count]
    moments = np.empty((count, blocks), dtype=np.complex128)
    moments.real, moments.imag = found[2 * count : 3 * count], found[3 * count :]
    centres: Array = np.arange(float(blocks)) * length + 0.5 * (length - samples)
    return Projections(
        samples=samples,
        lines=lines,
        w=w,
        centres=centres,
        length=length,
        sums=sums,
        moments=moments,
        power=power,
    )


def _basis(inner: Array, lines: Lines, w: float) -> Array:
    """Shape (4 L, B): cosines, negative sines, and both times the time within the block."""
    waves = twists(inner, lines, w)
    basis = np.empty((4, lines.count, inner.size))
    basis[0], basis[1] = waves.real, waves.imag
    np.multiply(basis[:2], inner, out=basis[2:])
    return basis.reshape(4 * lines.count, inner.size)
