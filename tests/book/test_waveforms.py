"""Waveforms are packed without losing a bit, and damaged ones are refused."""

from __future__ import annotations

import zlib

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from tests.book.samples import wave
from trimmer.book.columns import unpack
from trimmer.book.waveforms import pack, unpack_samples

any_float = st.floats(allow_nan=True, allow_infinity=True, width=64)


def bits(samples: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> list[int]:
    return np.asarray(samples, dtype="<f8").view("<u8").tolist()


@given(hnp.arrays(np.float64, st.integers(0, 300), elements=any_float))
def test_any_floats_come_back_bit_for_bit(samples: np.ndarray) -> None:  # type: ignore[type-arg]
    assert bits(unpack_samples(pack(samples))) == bits(samples)


@given(
    hnp.arrays(np.float64, st.integers(1, 6), elements=any_float),
    st.lists(st.integers(0, 5), min_size=30, max_size=200),
)
def test_few_levels_come_back_bit_for_bit(levels: np.ndarray, picks: list[int]) -> None:  # type: ignore[type-arg]
    samples = levels[np.array(picks) % levels.size]
    assert bits(unpack_samples(pack(samples))) == bits(samples)


@pytest.mark.parametrize("count", [65_535, 65_536, 65_537])
def test_the_most_levels_that_an_index_can_hold(count: int) -> None:
    levels = np.random.default_rng(3).normal(size=count)
    samples = np.tile(levels, 4)
    assert bits(unpack_samples(pack(samples))) == bits(samples)


def test_an_eight_bit_wave_takes_less_than_a_byte_a_sample() -> None:
    samples = wave(seed=1, samples=10_000)
    assert len(pack(samples)) < 10_000
    assert len(pack(samples)) < len(zlib.compress(samples.tobytes(), 9))


@pytest.mark.parametrize("cut", [0, 5, 12, 40])
def test_a_waveform_cut_short_is_refused(cut: int) -> None:
    with pytest.raises(ValueError, match=r"cut short|not a packed waveform"):
        unpack_samples(pack(wave())[:cut])


@given(st.binary(max_size=80))
def test_garbage_is_refused_and_nothing_else_happens(garbage: bytes) -> None:
    with pytest.raises(ValueError, match=r"packed waveform|packed bytes"):
        unpack_samples(b"wave" + garbage)


def test_bytes_that_unpack_to_more_than_they_should_are_refused() -> None:
    with pytest.raises(ValueError, match="longer than"):
        unpack(zlib.compress(bytes(10_000_000)), limit=1_000_000)
    bomb = pack(np.zeros(8))[:11] + zlib.compress(bytes(50_000_000))
    with pytest.raises(ValueError, match="longer than"):
        unpack_samples(bomb)
