"""Waveforms packed without loss: a digitiser's few levels once, then small numbers."""

from __future__ import annotations

import struct
import zlib

import numpy as np
from numpy.typing import NDArray

from trimmer.book.columns import unpack

_HEAD = struct.Struct("<4sBIH")
_MARK = b"wave"
_LEVELS, _RAW = 1, 0
_MOST_SAMPLES = 50_000_000


def pack(samples: NDArray[np.float64]) -> bytes:
    """Pack samples so that `unpack_samples` gives back the same 64 bits of each.

    A digitiser gives few distinct levels (256 at 8 bits). Up to 65535 of them are stored once, and
    each sample as the difference of its level's index from the one before, which a smooth wave keeps
    small. Waves with more levels are stored as they are, byte planes apart, so that the slowly
    changing exponent bytes lie together.

    Parameters
    ----------
    samples
        Shape (n,).
    """
    bits = np.ascontiguousarray(samples, dtype="<f8").view("<u8")
    # Sorted as values, not as bit patterns, so that neighbouring levels have neighbouring indices.
    order = np.where(bits >> 63, ~bits, bits | np.uint64(1 << 63))
    levels, index = np.unique(order, return_inverse=True)
    if levels.size <= 0xFFFF and levels.size * 4 <= bits.size:
        stored = np.where(levels >> np.uint64(63), levels ^ np.uint64(1 << 63), ~levels)
        steps = np.diff(index.astype("<u2"), prepend=np.uint16(0)).astype("<u2")
        body = stored.astype("<u8").tobytes() + _planes(steps.view(np.uint8), 2)
        return _HEAD.pack(_MARK, _LEVELS, bits.size, levels.size) + zlib.compress(body, 6)
    body = _planes(bits.view(np.uint8), 8)
    return _HEAD.pack(_MARK, _RAW, bits.size, 0) + zlib.compress(body, 6)


def unpack_samples(packed: bytes) -> NDArray[np.float64]:
    """Give back what `pack` packed.

    Raises
    ------
    ValueError
        The bytes are not a packed waveform.
    """
    if len(packed) < _HEAD.size:
        raise ValueError("a packed waveform is cut short")
    mark, form, count, levels = _HEAD.unpack_from(packed)
    if mark != _MARK or form not in (_LEVELS, _RAW) or count > _MOST_SAMPLES:
        raise ValueError("these bytes are not a packed waveform")
    wanted = 8 * levels + 2 * count if form == _LEVELS else 8 * count
    body = unpack(packed[_HEAD.size :], wanted + 1)
    if len(body) != wanted:
        raise ValueError("a packed waveform has the wrong length")
    if form == _RAW:
        return np.frombuffer(_joined(body, 8), dtype="<f8").astype(np.float64)
    table = np.frombuffer(body, dtype="<f8", count=levels)
    steps = np.frombuffer(_joined(body[8 * levels :], 2), dtype="<u2")
    index = np.cumsum(steps, dtype=np.uint16)
    if index.size and int(index.max()) >= levels:
        raise ValueError("a packed waveform names a level it does not have")
    return table[index].astype(np.float64)


def _planes(octets: NDArray[np.uint8], width: int) -> bytes:
    return octets.reshape(-1, width).T.tobytes()


def _joined(body: bytes, width: int) -> bytes:
    return np.frombuffer(body, dtype=np.uint8).reshape(width, -1).T.tobytes()
