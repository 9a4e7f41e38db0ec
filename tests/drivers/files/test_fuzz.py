"""Whatever bytes a file holds, reading it ends with a waveform or with a source's own error."""

from __future__ import annotations

import struct
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from drivers import SourceError, Waveform
from drivers.files.capture import interpret
from drivers.files.csvfile import Wanted
from tests.drivers.files.shapes import SHAPES

WHEN = datetime(2024, 5, 1, tzinfo=UTC)
SEEDS = [SHAPES[name]().content for name in sorted(SHAPES) if "more_header" not in name]
WAV = (
    b"RIFF\x44\x02\0\0WAVEfmt \x10\0\0\0\1\0\2\0\x80\xbb\0\0\0\xee\2\0\4\0\x10\0data\0\2\0\0"
    + bytes(range(256)) * 2
)

wanted = st.builds(
    Wanted, st.none() | st.integers(1, 4), st.none() | st.floats(1e-12, 1e3, allow_nan=False)
)
fuzz = settings(
    deadline=None, suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large]
)


def is_safe(text: str) -> bool:
    """Say whether a text has no character that steers a terminal."""
    return not any(ord(mark) < 32 or 127 <= ord(mark) < 160 for mark in text)


def outcome(raw: bytes, name: str, decided: Wanted) -> Waveform | None:
    """Read; None for a refusal."""
    try:
        wave = interpret(raw, Path(name), decided, WHEN).waveform
    except SourceError as error:
        refusal = error
    else:
        return checked(wave)
    assert refusal.remedy
    assert is_safe(str(refusal))
    return None


def checked(wave: Waveform) -> Waveform:
    """Check what every answer must keep to."""
    assert wave.samples.ndim == 1
    assert wave.samples.size >= 1
    assert not np.any(np.isinf(wave.samples))
    assert np.isfinite(wave.interval_s)
    assert wave.interval_s > 0
    assert wave.times_s is None or wave.times_s.shape == wave.samples.shape
    assert all(is_safe(note) for note in wave.notes)
    return wave


@fuzz
@given(raw=st.binary(max_size=400), decided=wanted, suffix=st.sampled_from([".csv", ".wav"]))
def test_any_bytes(raw, decided, suffix):
    outcome(raw, "x" + suffix, decided)


WORDS = (
    "0 1 2 -1 1.5 1,5 -0 05 1e-6 1E+37 9.9e37 nan inf **** Time s ms V mV CH1 (V) (s) Index # "
    'sep=; interval rate 12:00:00 2024-01-01 01.02.2024 1.234.567 1,234.5 " "a" \0 \x1b[31m '
    "\ufeff Segments YMULT 0.01 Min Max \u2212 3us 4k 1e400 99999999999999999999 0x1f 1_0 \u0663"
)
TOKENS = st.sampled_from([*WORDS.split(), ""])
MARKS = st.sampled_from([",", ";", "\t", " ", "|", "\n", "\n", "\r\n", "\r", ", ", ""])


@fuzz
@given(
    parts=st.lists(st.tuples(TOKENS, MARKS), max_size=80),
    encoding=st.sampled_from(["utf-8", "utf-16", "latin-1"]),
    decided=wanted,
)
def test_any_table_of_odd_cells(parts, encoding, decided):
    raw = "".join(token + mark for token, mark in parts).encode(encoding, errors="replace")
    outcome(raw, "x.csv", decided)


@fuzz
@given(
    columns=st.integers(1, 4),
    body=st.lists(st.lists(TOKENS, min_size=1, max_size=5), min_size=10, max_size=40),
    mark=st.sampled_from([",", ";", "\t", " "]),
    decided=wanted,
)
def test_any_rows(columns, body, mark, decided):
    lines = [mark.join((row * columns)[:columns]) for row in body]
    outcome("\n".join(lines).encode("utf-8", errors="replace"), "x.csv", decided)


@settings(fuzz, max_examples=150)
@given(data=st.data(), decided=wanted)
def test_a_good_file_damaged_anywhere(data, decided):
    raw = bytearray(data.draw(st.sampled_from(SEEDS))[:6000])
    for _ in range(data.draw(st.integers(1, 4))):
        at = data.draw(st.integers(0, len(raw) - 1))
        length = data.draw(st.integers(0, 40))
        raw[at : at + length] = data.draw(st.binary(max_size=20))
    outcome(bytes(raw[: data.draw(st.integers(0, len(raw)))]), "x.csv", decided)


@fuzz
@given(data=st.data(), decided=wanted)
def test_a_wav_file_damaged_anywhere(data, decided):
    raw = bytearray(WAV)
    for _ in range(data.draw(st.integers(1, 5))):
        at = data.draw(st.integers(0, 60))
        raw[at : at + 2] = data.draw(st.binary(min_size=2, max_size=2))
    outcome(bytes(raw[: data.draw(st.integers(0, len(raw)))]), "x.wav", decided)


@fuzz
@given(
    fields=st.tuples(*[st.integers(0, 65535)] * 2, *[st.integers(0, 2**32 - 1)] * 2,
                     *[st.integers(0, 65535)] * 2),
    size=st.integers(0, 2**32 - 1),
    decided=wanted,
)  # fmt: skip
def test_a_wav_file_with_any_format(fields, size, decided):
    head = b"RIFF\0\0\0\0WAVEfmt \x10\0\0\0" + struct.pack("<HHIIHH", *fields)
    outcome(head + b"data" + struct.pack("<I", size) + bytes(range(200)), "x.wav", decided)


@pytest.mark.parametrize("name", sorted(SHAPES))
def test_a_file_cut_anywhere_gives_right_values_or_a_refusal(name):
    wanted_shape = SHAPES[name]()
    raw = wanted_shape.content
    decided = Wanted(wanted_shape.channel, wanted_shape.stated_s)
    rng = np.random.default_rng(3)
    for at in rng.integers(len(raw) // 2, len(raw), 12):
        wave = outcome(raw[:at], "x.csv", decided)
        if wave is None:
            continue
        size = wave.samples.size
        if wave.has_volts != wanted_shape.has_volts:
            continue
        right = wanted_shape.values[:size]
        np.testing.assert_allclose(
            wave.samples[:-1], right[:-1], rtol=1e-12, atol=wanted_shape.tolerance
        )


@pytest.mark.parametrize("raw", [b'"\n1,234.5, Time\n0\t', b"0\nTime,0,0,", b"sep=\n", b"\xff\xfe"])
def test_files_that_once_ended_in_a_traceback(raw):
    outcome(raw, "x.csv", Wanted())
