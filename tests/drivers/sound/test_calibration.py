"""The file that keeps what full scale is in volts."""

from __future__ import annotations

import tomllib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers import SourceRefused
from drivers.soundcard import store_calibration, stored_calibration
from drivers.soundcard.calibration import FILE, _quoted


def test_what_is_stored_is_found_for_its_device_and_channel_only(tmp_path):
    settings = tmp_path / "not" / "there yet"
    assert stored_calibration(settings, "Line", 1) is None
    store_calibration(settings, "Line", 1, 1.75)
    store_calibration(settings, "Line", 2, 1.5)
    store_calibration(settings, 'A "quoted" \\ name\x7f', 1, 2.0)
    store_calibration(settings, "Line", 1, 1.8)
    assert stored_calibration(settings, "Line", 1) == 1.8
    assert stored_calibration(settings, "Line", 2) == 1.5
    assert stored_calibration(settings, 'A "quoted" \\ name\x7f', 1) == 2.0
    assert stored_calibration(settings, "Line", 3) is None
    assert [path.name for path in settings.iterdir()] == [FILE]


@given(st.text(st.characters(exclude_categories=["Cs"])))
def test_any_name_survives_the_file(name):
    assert tomllib.loads(f"device = {_quoted(name)}")["device"] == name


@pytest.mark.parametrize("volts", [0.0, -1.0, float("nan"), float("inf"), 1e9])
def test_impossible_volts_are_refused_before_anything_is_written(tmp_path, volts):
    with pytest.raises(SourceRefused, match="not possible"):
        store_calibration(tmp_path, "Line", 1, volts)
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize(
    "content",
    [
        b"not toml",
        b"\xff\xfe",
        b"input = 3",
        b"[[input]]\ndevice = 'x'",
        b"[[input]]\ndevice = 'x'\nchannel = 1\nfull_scale_v = inf",
        b"[[input]]\ndevice = 'x'\nchannel = 1.0\nfull_scale_v = 1.0",
    ],
)
def test_a_damaged_file_is_named_and_left_as_it_is(tmp_path, content):
    (tmp_path / FILE).write_bytes(content)
    with pytest.raises(SourceRefused, match="damaged"):
        stored_calibration(tmp_path, "Line", 1)
    with pytest.raises(SourceRefused, match="damaged"):
        store_calibration(tmp_path, "Line", 1, 1.0)
    assert (tmp_path / FILE).read_bytes() == content
