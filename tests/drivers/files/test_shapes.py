"""Every shape of file is read with the right values, or refused with a reason."""

from __future__ import annotations

import csv

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers import SourceNotFound, SourceRefused, UnusableCapture, WaveformSource
from drivers.files import open_file
from tests.drivers.files.shapes import CODES, DT, SHAPES, TIMES, VOLTS, N, T, V, W, cells, of, rows
from trimmer.measurement import MeasurementError, measure


def capture(tmp_path, content, **more):
    path = tmp_path / "capture.csv"
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    with open_file(path, **more) as source:
        return source.capture()


@pytest.mark.parametrize("name", SHAPES)
def test_values_and_interval_are_what_the_instrument_meant(tmp_path, name):
    wanted = SHAPES[name]()
    wave = capture(tmp_path, wanted.content, channel=wanted.channel, interval_s=wanted.stated_s)
    assert wave.interval_s == pytest.approx(wanted.interval_s, rel=1e-9)
    np.testing.assert_allclose(wave.samples, wanted.values, rtol=1e-12, atol=wanted.tolerance)
    assert wave.has_volts == wanted.has_volts
    assert wave.clipped == np.count_nonzero(np.isnan(wanted.values))
    assert wave.notes
    assert wave.taken_at.tzinfo is not None
    if wave.times_s is not None:
        even = wanted.interval_s * np.arange(wave.samples.size)
        np.testing.assert_allclose(wave.times_s, even, atol=1e-3 * wanted.interval_s)


HEAD = "Time (s),CH1 (V)\n"
BODY = rows(TIMES, VOLTS)
PAIRS = rows(cells(np.repeat(T[::2], 2), ".6f"), cells(V + np.tile([-0.1, 0.1], N // 2)))

REFUSALS = {
    "an_empty_file": ("", "empty"),
    "words_only": ("hello\nworld\n", "no rows of numbers"),
    "a_picture": (b"\x89PNG\r\n\x1a\n" + bytes(range(256)) * 20, "binary"),
    "one_column_without_interval": ("\n".join(VOLTS), "how far apart"),
    "an_index_without_interval": (rows(map(str, range(N)), VOLTS), "how far apart"),
    "minimum_and_maximum_in_turn": (HEAD + PAIRS, "envelope"),
    "minimum_and_maximum_columns": (
        "Time (s),CH1 Min (V),CH1 Max (V)\n" + rows(TIMES, cells(V - 0.1), cells(V + 0.1)),
        "minimum and a maximum",
    ),
    "peak_detect": ("Acquisition Mode,Peak Detect\n" + HEAD + BODY, "peak detect"),
    "envelope_format": ("PT_FMT,ENV\nXINCR,1e-6\n" + "\n".join(VOLTS) + "\n", "env"),
    "a_spectrum": ("Frequency (Hz),Level (dBV)\n" + rows(cells(T + 1), VOLTS), "spectrum"),
    "decibels": ("Time (s),Level (dB)\n" + BODY, "dB"),
    "two_segments": (HEAD + BODY + "Segment 2\n" + BODY, "break off at line 1502"),
    "two_captures_in_a_row": (HEAD + BODY + BODY, "runs backwards"),
    "a_gap_without_times": ("dt,1e-6\n" + "\n".join([*VOLTS[:700], "", *VOLTS[700:]]), "empty"),
    "a_damaged_row": (HEAD + BODY.replace(VOLTS[700], "1.2x4", 1), "break off"),
    "a_hole": ((HEAD + BODY)[:9000] + "\0" * 500 + (HEAD + BODY)[9500:], "break off"),
    "commas_for_everything": (
        rows(*[[cell.replace(".", ",") for cell in column] for column in (TIMES, VOLTS)]),
        "may part the columns or mark decimals",
    ),
    "columns_without_names_or_time": (rows(VOLTS, cells(W)), "without names"),
    "many_values_to_a_line": (
        "\n".join(" ".join(VOLTS[at : at + 10]) for at in range(0, N, 10)),
        "without names",
    ),
    "time_of_unknown_unit": ("Time,CH1\n(div),(V)\n" + BODY, "no unit of time"),
    "rising_whole_numbers": (rows(cells(T * 1e9, ".0f"), VOLTS), "whole numbers"),
    "time_that_stands_still": (HEAD + rows(["0.00"] * N, VOLTS), "stands still"),
    "a_missing_time": (
        HEAD + BODY.replace("\n" + TIMES[700], "\n", 1),
        "row 701 of 1500 is missing",
    ),
    "rate_against_interval": ("Rate,1e6\nInterval,2e-6\n" + "\n".join(VOLTS), "contradict"),
    "a_thinned_out_record": (
        "Record Length,15000\nSample Interval,2e-7\n" + "\n".join(VOLTS),
        "thinned out",
    ),
    "a_counter_in_steps_of_ten": (
        "Sample Interval,2e-7\nIndex,CH1 (V)\n" + rows(map(str, range(0, 10 * N, 10)), VOLTS),
        "does not step by one",
    ),
    "a_lost_micro": ("Time (?s),CH1 (V)\n" + BODY, "no unit of time"),
    "whole_numbers_as_time": ("Time,CH1\n" + rows(map(str, range(N)), VOLTS), "whole numbers"),
    "another_axis": (
        "Phase (deg),U (V)\n" + rows(cells(np.arange(N) * 0.3, ".1f"), VOLTS),
        "is no time",
    ),
    "names_that_do_not_fit": (
        "Time (us) CH1 (V) CH2 (V)\n" + rows(TIMES, VOLTS, by=" "),
        "another count of names",
    ),
    "one_name_over_two_halves": (
        "dt,1e-6\nA,B\n" + rows(*[map(str, abs(CODES))] * 4),
        "may part the columns or mark decimals",
    ),
    "thousands_or_decimals": (
        "dt;1e-6\n" + "".join(f"{2 + n % 3},{n % 1000:03d}\n" for n in range(300)),
        "decimals or thousands",
    ),
    "mixed_units": (
        HEAD + rows(TIMES, [f"{c} {'V' if n % 2 else 'A'}" for n, c in enumerate(VOLTS)]),
        "mixes units",
    ),
    "time_only": ("Time (s)\n" + "\n".join(TIMES) + "\n", "no column of values"),
    "one_row": (HEAD + "0.0,1.0\n", "single row"),
}


@pytest.mark.parametrize("name", REFUSALS)
def test_what_cannot_be_read_for_sure_is_refused_with_reason_and_remedy(tmp_path, name):
    content, reason = REFUSALS[name]
    with pytest.raises(UnusableCapture, match=reason) as caught:
        capture(tmp_path, content)
    assert caught.value.remedy.endswith(".")


@pytest.mark.parametrize("drop", [1, 3])
def test_a_row_lost_in_the_middle_makes_an_axis_that_measurement_refuses(tmp_path, drop):
    kept = np.delete(np.arange(N), slice(700, 700 + drop))
    text = HEAD + rows([TIMES[row] for row in kept], [VOLTS[row] for row in kept])
    wave = capture(tmp_path, text)
    with pytest.raises(MeasurementError) as caught:
        measure(wave.samples, wave.interval_s, times_s=wave.times_s)
    assert caught.value.code == "uneven-time"


def test_times_with_too_few_digits_are_no_uneven_axis(tmp_path):
    wave = capture(tmp_path, SHAPES["times_with_too_few_digits"]().content)
    assert any("too few digits" in note for note in wave.notes)
    reading = measure(wave.samples, wave.interval_s, times_s=wave.times_s)
    assert reading.fundamental_hz == pytest.approx(1000.0, rel=1e-5)


def test_missing_values_are_refused_by_measurement_not_read_as_zero(tmp_path):
    wave = capture(tmp_path, SHAPES["overrange_marks_of_several_kinds"]().content)
    with pytest.raises(MeasurementError):
        measure(wave.samples, wave.interval_s, times_s=wave.times_s)


def test_the_person_s_interval_goes_before_the_file_s_and_that_is_said(tmp_path):
    wave = capture(tmp_path, HEAD + BODY, interval_s=5e-6)
    assert wave.interval_s == 5e-6
    assert any("as stated by you" in note for note in wave.notes)
    assert any("2e-06 s instead" in note for note in wave.notes)


def test_a_header_that_contradicts_the_time_column_is_followed_by_a_note(tmp_path):
    wave = capture(tmp_path, "Sample Interval,1e-6\n" + HEAD + BODY)
    assert wave.interval_s == pytest.approx(DT)
    assert any("time column was followed" in note for note in wave.notes)


@pytest.mark.parametrize(("channel", "values"), [(None, V), (1, V), (2, W)])
def test_the_channel_is_the_nth_column_of_values(tmp_path, channel, values):
    text = "Index,Time (s),CH1 (V),CH2 (V)\n" + rows(map(str, range(N)), TIMES, VOLTS, cells(W))
    wave = capture(tmp_path, text, channel=channel)
    np.testing.assert_allclose(wave.samples, values, atol=1e-12)
    assert any(f"column {channel or 1} of 2" in note for note in wave.notes)


def test_a_channel_that_is_not_there_is_refused(tmp_path):
    with pytest.raises(UnusableCapture, match="no number 3"):
        capture(tmp_path, HEAD + BODY, channel=3)
    with pytest.raises(SourceRefused):
        capture(tmp_path, HEAD + BODY, channel=0)


@pytest.mark.parametrize("interval", [0.0, -1.0, float("nan"), float("inf")])
def test_an_impossible_interval_is_refused(tmp_path, interval):
    with pytest.raises(SourceRefused, match="not possible"):
        capture(tmp_path, HEAD + BODY, interval_s=interval)


def test_volts_are_preferred_where_nothing_is_chosen(tmp_path):
    text = "Time (s),I (mA),U (V)\n" + rows(TIMES, cells(W), VOLTS)
    wave = capture(tmp_path, text)
    np.testing.assert_allclose(wave.samples, V, atol=1e-12)


def test_the_header_s_settings_reach_the_waveform(tmp_path):
    text = "Coupling,AC\nAverages,16\nBits,12\n" + HEAD + BODY
    wave = capture(tmp_path, text)
    assert (wave.coupling, wave.averaged, wave.bits) == ("AC", 16, 12)


def test_names_from_the_file_are_made_safe_to_show(tmp_path):
    text = "Time (s),\x1b[31mred[/] (V),b (V)\n" + rows(TIMES, VOLTS, cells(W))
    wave = capture(tmp_path, text)
    assert "\x1b" not in "".join(wave.notes)


def test_codes_are_found_by_their_common_step(tmp_path):
    step = 0.0078125
    wave = capture(tmp_path, HEAD + rows(TIMES, cells(CODES * step, ".5f")))
    assert wave.code == pytest.approx(step, rel=1e-3)


def test_a_file_is_a_source_with_one_capture_that_can_be_had_again(tmp_path):
    path = tmp_path / "one.csv"
    path.write_text(HEAD + BODY)
    with open_file(path) as source:
        assert isinstance(source, WaveformSource)
        assert source.info.finite
        assert not source.info.paced_by_person
        first, second = source.capture(), source.capture()
        np.testing.assert_array_equal(first.samples, second.samples)
    source.close()
    with pytest.raises(Exception, match="closed"):
        source.capture()


def test_no_handle_stays_open_and_a_file_may_go(tmp_path):
    path = tmp_path / "one.csv"
    path.write_text(HEAD + BODY)
    source = open_file(path)
    source.capture()
    path.unlink()
    with pytest.raises(Exception, match="gone"):
        source.capture()


def test_what_is_no_file_is_not_found(tmp_path):
    with pytest.raises(SourceNotFound):
        open_file(tmp_path / "nothing.csv")
    with pytest.raises(SourceNotFound):
        open_file(tmp_path)


def test_a_file_too_large_is_refused_before_it_is_read(tmp_path):
    path = tmp_path / "huge.csv"
    with path.open("wb") as file:
        file.truncate(10 << 30)  # sparse: takes no room on the disk
    with pytest.raises(UnusableCapture, match="10737 MB"):
        open_file(path).capture()


finite = st.floats(allow_nan=False, allow_infinity=False, width=64, min_value=-1e6, max_value=1e6)


@settings(max_examples=60, deadline=None)
@given(
    values=st.lists(st.tuples(finite, finite), min_size=12, max_size=60),
    by=st.sampled_from([",", ";", "\t"]),
    form=st.sampled_from(["r", ".6e", ".9f", "+.3E"]),
)
def test_plain_tables_read_as_the_obvious_reader_reads_them(tmp_path_factory, values, by, form):
    def printed(value):
        return repr(value) if form == "r" else format(value, form)

    lines = [by.join([f"{1e-3 * n:.6f}", *map(printed, pair)]) for n, pair in enumerate(values)]
    text = by.join(["Time (s)", "A (V)", "B (V)"]) + "\n" + "\n".join(lines) + "\n"
    path = tmp_path_factory.mktemp("plain") / "table.csv"
    path.write_text(text)
    obvious = [[float(cell) for cell in row] for row in csv.reader(lines, delimiter=by)]
    for channel in (1, 2):
        wave = open_file(path, channel=channel).capture()
        assert wave.samples.tolist() == [row[channel] for row in obvious]
        assert wave.interval_s == 1e-3


def test_a_long_file_with_one_odd_cell_reads_as_its_plain_neighbour(tmp_path):
    count = 60_000
    times = cells(1e-6 * np.arange(count), ".6e")
    volts = cells(np.sin(0.01 * np.arange(count)), ".6f")
    plain = capture(tmp_path, HEAD + rows(times, volts))
    volts[31_000] = "****"
    odd = capture(tmp_path, HEAD + rows(times, volts))
    assert np.flatnonzero(np.isnan(odd.samples)).tolist() == [31_000]
    np.testing.assert_array_equal(np.delete(odd.samples, 31_000), np.delete(plain.samples, 31_000))


def test_helpers_make_what_they_say():
    assert of("a").content == b"a"
    assert len(SHAPES) >= 45
