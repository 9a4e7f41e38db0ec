"""WAV files, written by other software where there is some, and byte by byte where there is none."""

from __future__ import annotations

import struct
import wave as standard_wave

import numpy as np
import pytest
from scipy.io import wavfile

from drivers import UnusableCapture
from drivers.files import open_file

RATE = 48000
X = 0.7 * np.sin(2 * np.pi * 997 / RATE * np.arange(4800) + 0.1)


def capture(path, **more):
    return open_file(path, **more).capture()


def chunk(name, body, order="<"):
    return name + struct.pack(order + "I", len(body)) + body + b"\0" * (len(body) & 1)


def riff(*chunks, magic=b"RIFF", order="<"):
    body = b"WAVE" + b"".join(chunks)
    return magic + struct.pack(order + "I", len(body)) + body


def form(tag=1, channels=1, bits=16, rate=RATE, order="<", extra=b""):
    frame = channels * ((bits + 7) // 8)
    return chunk(
        b"fmt ",
        struct.pack(order + "HHIIHH", tag, channels, rate, rate * frame, frame, bits) + extra,
        order,
    )


@pytest.mark.parametrize(("width", "bits"), [(1, 8), (2, 16), (3, 24), (4, 32)])
@pytest.mark.parametrize("channel", [1, 2])
def test_whole_numbers_as_the_standard_library_writes_them(tmp_path, width, bits, channel):
    codes = np.round(X * (2 ** (bits - 1) - 1)).astype(np.int64)
    both = np.column_stack([codes, -codes])
    stored = both + 128 if width == 1 else both
    raw = b"".join(int(v).to_bytes(width, "little", signed=width > 1) for v in stored.ravel())
    path = tmp_path / "tone.wav"
    with standard_wave.open(str(path), "wb") as file:
        file.setnchannels(2)
        file.setsampwidth(width)
        file.setframerate(RATE)
        file.writeframes(raw)
    read = capture(path, channel=channel)
    sign = 1 if channel == 1 else -1
    np.testing.assert_array_equal(read.samples, sign * codes / 2.0 ** (bits - 1))
    assert read.interval_s == 1 / RATE
    assert (read.bits, read.code) == (bits, 2.0 ** (1 - bits))
    assert (read.low_rail, read.high_rail) == (-1.0, 1.0 - 2.0 ** (1 - bits))
    assert not read.has_volts
    assert f"channel {channel} of 2" in read.notes[0]


@pytest.mark.parametrize("kind", [np.int16, np.int32, np.float32, np.float64])
def test_files_of_the_general_library_are_read_as_it_reads_them(tmp_path, kind):
    scale = np.iinfo(kind).max if np.issubdtype(kind, np.integer) else 1.0
    path = tmp_path / "tone.wav"
    wavfile.write(path, RATE, np.column_stack([X * scale, X * scale / 2]).astype(kind))
    _, theirs = wavfile.read(path)
    full = 2.0 ** (8 * np.dtype(kind).itemsize - 1) if np.issubdtype(kind, np.integer) else 1.0
    for channel in (1, 2):
        np.testing.assert_array_equal(
            capture(path, channel=channel).samples, theirs[:, channel - 1] / full
        )


def test_the_extensible_form_with_20_bits_in_24(tmp_path):
    tail = struct.pack("<HHIH", 22, 20, 3, 1) + b"\0\0\0\0\x10\0\x80\0\0\xaa\0\x38\x9b\x71"
    codes = np.round(X * 2**19).astype(np.int64)
    data = b"".join(int(code << 4).to_bytes(3, "little", signed=True) for code in codes)
    path = tmp_path / "tone.wav"
    path.write_bytes(riff(form(0xFFFE, bits=24, extra=tail), chunk(b"data", data)))
    read = capture(path)
    np.testing.assert_array_equal(read.samples, codes / 2.0**19)
    assert read.bits == 20
    assert read.code == 2.0**-19


def test_odd_and_unknown_chunks_are_stepped_over(tmp_path):
    codes = np.round(X * 2**15).astype("<i2")
    path = tmp_path / "tone.wav"
    path.write_bytes(
        riff(
            chunk(b"JUNK", b"\1" * 7),
            chunk(b"LIST", b"INFOdata" + b"\0" * 3),
            form(),
            chunk(b"fact", b"\0\0\0\0"),
            chunk(b"data", codes.tobytes()),
            chunk(b"note", b"x"),
        )
    )
    np.testing.assert_array_equal(capture(path).samples, codes / 2.0**15)


def test_big_endian_and_large_file_forms(tmp_path):
    codes = np.round(X * 2**15).astype(np.int16)
    big = riff(
        form(order=">"), chunk(b"data", codes.astype(">i2").tobytes(), ">"),
        magic=b"RIFX", order=">",
    )  # fmt: skip
    sizes = struct.pack("<QQQI", 0, 2 * codes.size, codes.size, 0)
    data = b"data" + b"\xff" * 4 + codes.astype("<i2").tobytes()
    large = riff(chunk(b"ds64", sizes), form(), data, magic=b"RF64")
    for content in (big, large):
        path = tmp_path / "tone.wav"
        path.write_bytes(content)
        read = capture(path)
        np.testing.assert_array_equal(read.samples, codes / 2.0**15)
        assert not any("ends before" in note for note in read.notes)


@pytest.mark.parametrize("declared", [None, 0, 0xFFFFFFFF])
def test_a_recording_that_was_not_finished_gives_what_is_there(tmp_path, declared):
    data = np.round(X * 2**15).astype("<i2").tobytes()
    whole = riff(form(), chunk(b"data", data))
    place = whole.index(b"data") + 4
    if declared is None:
        whole = whole[:-1001]
    else:
        whole = whole[:place] + struct.pack("<I", declared) + whole[place + 4 :]
    path = tmp_path / "tone.wav"
    path.write_bytes(whole)
    read = capture(path)
    count = 4800 if declared is not None else (9600 - 1001) // 2
    np.testing.assert_array_equal(read.samples, np.frombuffer(data, "<i2")[:count] / 2.0**15)
    assert any("ends before" in note for note in read.notes)


def test_what_is_no_number_in_a_float_file_is_passed_on_as_such(tmp_path):
    values = X.astype(np.float32)
    values[[5, 6]] = [np.inf, np.nan]
    path = tmp_path / "tone.wav"
    wavfile.write(path, RATE, values)
    read = capture(path)
    assert np.flatnonzero(np.isnan(read.samples)).tolist() == [5, 6]
    assert read.clipped == 2


@pytest.mark.parametrize(
    ("content", "reason"),
    [
        (b"", "does not begin"),
        (b"Time,CH1\n0,1\n", "does not begin"),
        (riff(), "no data"),
        (riff(form()), "no data"),
        (riff(form(), chunk(b"data", b"")), "no samples"),
        (riff(chunk(b"data", b"\0" * 100)), "before its format"),
        (riff(chunk(b"fmt ", b"\0" * 10), chunk(b"data", b"\0" * 100)), "cut short"),
        (riff(form(tag=6, bits=8), chunk(b"data", b"\0" * 100)), "kind 6"),
        (riff(form(tag=85, bits=0), chunk(b"data", b"\0" * 100)), "kind 85"),
        (riff(form(rate=0), chunk(b"data", b"\0" * 100)), "rate of 0"),
        (riff(form(channels=0), chunk(b"data", b"\0" * 100)), "0 channels"),
        (riff(form(0xFFFE), chunk(b"data", b"\0" * 100)), "cut short"),
    ],
)
def test_damaged_and_compressed_files_are_refused(tmp_path, content, reason):
    path = tmp_path / "tone.wav"
    path.write_bytes(content)
    with pytest.raises(UnusableCapture, match=reason):
        capture(path)


def test_a_channel_that_is_not_there_is_refused(tmp_path):
    path = tmp_path / "tone.wav"
    wavfile.write(path, RATE, X.astype(np.float32))
    with pytest.raises(UnusableCapture, match="no number 2"):
        capture(path, channel=2)


def test_a_wav_under_another_name_is_still_one(tmp_path):
    path = tmp_path / "tone.txt"
    wavfile.write(path, RATE, X.astype(np.float32))
    assert capture(path).samples.size == 4800


def test_the_person_s_interval_replaces_the_rate_and_is_said(tmp_path):
    path = tmp_path / "tone.wav"
    wavfile.write(path, RATE, X.astype(np.float32))
    read = capture(path, interval_s=1e-6)
    assert read.interval_s == 1e-6
    assert any("as stated by you" in note for note in read.notes)
