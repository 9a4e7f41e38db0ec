"""A watched folder: what counts as the next capture, and when."""

from __future__ import annotations

import os
import threading
import time

import numpy as np
import pytest

from drivers import (
    CaptureRequest,
    SourceLost,
    SourceNotFound,
    SourceTimeout,
    UnusableCapture,
    WaveformSource,
)
from drivers.files import folder as folder_module
from drivers.files import open_file, open_folder, single, watch
from drivers.files.watch import Watch, is_candidate

SOON = CaptureRequest(timeout_s=5.0)
NOW = CaptureRequest(timeout_s=0.4)


def text(peak, count=300):
    steps = np.arange(count)
    return "Time (s),CH1 (V)\n" + "".join(
        f"{1e-5 * n:.5f},{peak * np.sin(n / 7):+.5f}\n" for n in steps
    )


def peak(wave):
    return round(float(np.max(wave.samples)), 2)


@pytest.fixture
def folder(tmp_path):
    with open_folder(tmp_path) as source:
        source.path = tmp_path
        yield source


def save(folder, name, content, age_s=0.0):
    path = (folder if hasattr(folder, "joinpath") else folder.path) / name
    path.write_text(content)
    if age_s:
        then = time.time() - age_s
        os.utime(path, (then, then))
    return path


def test_a_folder_is_a_source_that_the_person_paces(folder):
    assert isinstance(folder, WaveformSource)
    assert folder.info.paced_by_person
    assert not folder.info.finite


def test_each_file_that_appears_is_the_next_capture(folder):
    for size in (1.0, 2.0, 3.0):
        save(folder, f"{size}.csv", text(size))
        assert peak(folder.capture(SOON)) == size
    with pytest.raises(SourceTimeout, match="no new capture"):
        folder.capture(NOW)


def test_files_that_came_meanwhile_are_taken_in_order_and_none_skipped(folder):
    for name, size, age_s in (("b", 3.0, 1.0), ("c", 1.0, 3.0), ("a", 2.0, 2.0), ("d", 4.0, 1.0)):
        save(folder, f"{name}.csv", text(size), age_s)
    assert [peak(folder.capture(SOON)) for _ in range(4)] == [1.0, 2.0, 3.0, 4.0]


def test_of_the_files_already_there_only_the_newest_is_taken_and_that_is_said(tmp_path):
    save(tmp_path, "new.csv", text(2.0), 7200.0)
    save(tmp_path, "old.csv", text(1.0), 90000.0)
    with open_folder(tmp_path) as source:
        wave = source.capture(SOON)
        assert peak(wave) == 2.0
        assert "already there" in wave.notes[-1]
        assert "2 hours old" in wave.notes[-1]
        with pytest.raises(SourceTimeout):
            source.capture(NOW)
        save(tmp_path, "next.csv", text(3.0))
        assert "already there" not in "".join(source.capture(SOON).notes)


def test_a_file_that_is_being_written_is_waited_for(folder):
    content = text(1.5)

    def write():
        with (folder.path / "slow.csv").open("w") as file:
            for at in range(0, len(content), 1000):
                file.write(content[at : at + 1000])
                file.flush()
                time.sleep(0.12)

    writer = threading.Thread(target=write)
    writer.start()
    wave = folder.capture(SOON)
    writer.join()
    assert wave.samples.size == 300
    assert peak(wave) == 1.5


def test_a_growing_file_holds_its_place_before_a_later_one(folder):
    content = text(1.0)
    path = folder.path / "first.csv"
    path.write_text(content[:1000])
    with pytest.raises(SourceTimeout, match=r"first\.csv .* was not complete"):
        folder.capture(NOW)
    save(folder, "second.csv", text(2.0))
    with pytest.raises(SourceTimeout):
        folder.capture(NOW)
    path.write_text(content)
    assert [peak(folder.capture(SOON)) for _ in range(2)] == [1.0, 2.0]


def test_a_file_cut_short_for_good_is_taken_after_a_while_and_that_is_said(folder, monkeypatch):
    monkeypatch.setattr(watch, "STALLED_S", 0.5)
    save(folder, "cut.csv", text(1.0)[:-5])
    began = time.monotonic()
    wave = folder.capture(SOON)
    assert time.monotonic() - began > 0.45
    assert wave.samples.size == 299
    assert any("cut short" in note for note in wave.notes)


def test_a_recording_that_declares_more_than_there_is_is_waited_for(folder, monkeypatch):
    from scipy.io import wavfile

    monkeypatch.setattr(watch, "STALLED_S", 30.0)
    whole = folder.path.parent / "whole.wav"
    wavfile.write(whole, 48000, np.sin(np.arange(2000) / 7).astype(np.float32))
    raw = whole.read_bytes()
    path = folder.path / "tone.wav"
    path.write_bytes(raw[:3000])
    with pytest.raises(SourceTimeout):
        folder.capture(NOW)
    path.write_bytes(raw)
    assert folder.capture(SOON).samples.size == 2000


def test_a_file_renamed_into_place_is_taken_at_once(folder):
    save(folder, "x.csv.part", text(1.0))
    with pytest.raises(SourceTimeout):
        folder.capture(NOW)
    os.rename(folder.path / "x.csv.part", folder.path / "x.csv")
    began = time.monotonic()
    assert peak(folder.capture(SOON)) == 1.0
    assert time.monotonic() - began < 2.0


def test_saving_over_the_same_name_is_a_new_capture(folder):
    for size in (1.0, 2.0, 1.5):
        save(folder, "data.csv", text(size))
        assert peak(folder.capture(SOON)) == size


def test_a_taken_file_that_only_grows_on_is_no_new_capture(folder):
    path = save(folder, "log.csv", text(1.0, 300))
    folder.capture(SOON)
    path.write_text(text(1.0, 600))
    with pytest.raises(SourceTimeout):
        folder.capture(NOW)
    save(folder, "next.csv", text(2.0))
    assert peak(folder.capture(SOON)) == 2.0


def test_a_file_that_cannot_be_read_is_refused_once_and_the_next_goes_on(folder, monkeypatch):
    monkeypatch.setattr(watch, "STALLED_S", 0.3)
    save(folder, "bad.csv", "nothing of use\n")
    with pytest.raises(UnusableCapture, match=r"bad\.csv"):
        folder.capture(SOON)
    save(folder, "good.csv", text(1.0))
    assert peak(folder.capture(SOON)) == 1.0


@pytest.mark.parametrize(
    "name",
    [".hidden.csv", "x.csv.part", "x.tmp", "~x.csv", "x.csv~", "x.png", "csv", "x.csv.crdownload"],
)
def test_hidden_temporary_and_other_files_are_passed_over(name):
    assert not is_candidate(name)


@pytest.mark.parametrize("name", ["x.csv", "X.CSV", "scope 1.Txt", "a.tsv", "b.WAV"])
def test_captures_are_known_by_their_names(name):
    assert is_candidate(name)


def test_folders_and_pipes_with_the_name_of_a_capture_are_passed_over(folder):
    (folder.path / "sub.csv").mkdir()
    os.mkfifo(folder.path / "pipe.csv")
    with pytest.raises(SourceTimeout):
        folder.capture(NOW)


def test_a_folder_that_vanishes_is_lost_and_goes_on_when_it_is_back(tmp_path):
    path = tmp_path / "share"
    path.mkdir()
    with open_folder(path) as source:
        path.rmdir()
        with pytest.raises(SourceLost, match="cannot be read"):
            source.capture(NOW)
        path.mkdir()
        save(path, "x.csv", text(1.0))
        assert peak(source.capture(SOON)) == 1.0


def test_what_is_no_folder_is_not_found(tmp_path):
    with pytest.raises(SourceNotFound):
        open_folder(tmp_path / "nothing")


def test_waiting_costs_next_to_nothing_and_ends_in_time(folder):
    for number in range(200):
        save(folder, f"{number}.png", "")
    began, worked = time.monotonic(), time.process_time()
    with pytest.raises(SourceTimeout):
        folder.capture(CaptureRequest(timeout_s=1.5))
    took_s = time.monotonic() - began
    assert 1.4 < took_s < 2.5
    assert (time.process_time() - worked) / took_s < 0.15


def test_channel_and_interval_hold_for_every_file(tmp_path):
    with open_folder(tmp_path, channel=2, interval_s=1e-3) as source:
        save(tmp_path, "x.csv", "A,B\n" + "".join(f"{n % 5},{n % 7}.5\n" for n in range(50)))
        wave = source.capture(SOON)
    assert wave.interval_s == 1e-3
    assert wave.samples[:3].tolist() == [0.5, 1.5, 2.5]


def test_closing_twice_does_no_harm(folder):
    folder.close()
    folder.close()
    with pytest.raises(SourceLost, match="closed"):
        folder.capture(NOW)


def test_the_pause_a_writer_makes_is_the_measure_of_standing_still(tmp_path):
    look = Watch(tmp_path)
    path = save(tmp_path, "x.csv", "1")
    (seen,) = look.look(0.0)
    assert not seen.is_steady(0.1)
    assert seen.is_steady(0.2)
    path.write_text("12")
    (seen,) = look.look(0.5)
    path.write_text("123")
    (seen,) = look.look(1.0)
    assert seen.pace_s == 0.5
    assert not seen.is_steady(2.0)
    assert seen.is_steady(2.6)
    look.settle(seen)
    assert look.look(3.0) == []


def test_a_name_that_a_steady_file_gets_needs_no_new_wait(tmp_path):
    look = Watch(tmp_path)
    save(tmp_path, "x.csv.part", "1")
    assert look.look(0.0) == []
    (tmp_path / "x.csv.part").rename(tmp_path / "x.csv")
    (seen,) = look.look(0.3)
    assert seen.is_steady(0.3)


def test_a_share_that_hangs_ends_the_wait_and_the_file_is_not_lost(folder, monkeypatch):
    save(folder, "x.csv", text(1.0))
    hang = threading.Event()
    real = Watch.look

    def look(self, now):
        assert hang.wait(20.0)
        return real(self, now)

    monkeypatch.setattr(Watch, "look", look)
    for _ in range(2):
        began = time.monotonic()
        with pytest.raises(SourceTimeout, match="does not answer"):
            folder.capture(CaptureRequest(timeout_s=0.2))
        assert time.monotonic() - began < 1.2
    before = threading.active_count()
    hang.set()
    assert peak(folder.capture(SOON)) == 1.0
    assert threading.active_count() <= before


def test_a_file_whose_reading_hangs_is_read_once_the_share_is_back(folder, monkeypatch):
    save(folder, "x.csv", text(1.0))
    back = threading.Event()
    real = folder_module.load

    def load(path):
        assert back.wait(20.0)
        return real(path)

    monkeypatch.setattr(folder_module, "load", load)
    with pytest.raises(SourceTimeout, match="does not answer"):
        folder.capture(CaptureRequest(timeout_s=0.3))
    back.set()
    assert peak(folder.capture(SOON)) == 1.0


def test_a_single_file_whose_reading_hangs_is_a_timeout(tmp_path, monkeypatch):
    path = save(tmp_path, "x.csv", text(1.0))
    back = threading.Event()
    real = single.load
    monkeypatch.setattr(single, "load", lambda path: back.wait(20.0) and real(path))
    with open_file(path) as source:
        with pytest.raises(SourceTimeout, match="not read within"):
            source.capture(CaptureRequest(timeout_s=0.2))
        back.set()
        assert peak(source.capture(SOON)) == 1.0
