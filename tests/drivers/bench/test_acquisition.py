"""Frames are fresh when armed for, old when not, and done when it is said."""

from __future__ import annotations

import time

import numpy as np
import pytest

from drivers.bench import Bench
from tests.drivers.bench.talker import Talker

RAW = ":WAVeform:POINts:MODE RAW"


def test_a_frame_that_was_not_armed_for_is_the_frame_of_before() -> None:
    with Bench(2) as bench, Talker(bench) as talker:
        talker.say(RAW, ":DIGitize")
        first, _ = talker.block(":WAVeform:DATA?")
        bench.turn("upper", 0.2)
        stale, _ = talker.block(":WAVeform:DATA?")
        talker.say(":DIGitize")
        fresh, _ = talker.block(":WAVeform:DATA?")
        assert first == stale
        assert fresh != first


def test_a_single_acquisition_comes_back_at_once_and_is_polled_for() -> None:
    with Bench(2, acquire_s=0.3) as bench, Talker(bench) as talker:
        talker.say(RAW, ":STOP")
        old, _ = talker.block(":WAVeform:DATA?")
        start = time.monotonic()
        talker.say(":SINGle")
        assert talker.ask(":OPERegister:CONDition?") == "8"
        assert talker.ask("*OPC?") == "1"  # of no use here
        assert time.monotonic() - start < 0.25
        early, _ = talker.block(":WAVeform:DATA?")
        while talker.ask(":OPERegister:CONDition?") != "0":
            time.sleep(0.02)
        assert time.monotonic() - start >= 0.29
        late, _ = talker.block(":WAVeform:DATA?")
        assert len(early) < len(late)  # under way, only the screen is handed out
        assert late != old


def test_digitise_holds_the_instrument_until_it_is_done() -> None:
    with Bench(2, acquire_s=0.3) as bench, Talker(bench) as talker:
        start = time.monotonic()
        assert talker.ask(":DIGitize;*OPC?") == "1"
        assert 0.29 <= time.monotonic() - start < 1.0


def test_completion_is_the_right_wait_of_the_keyword_dialect() -> None:
    with Bench(2, dialect="keyword-curve", acquire_s=0.3) as bench, Talker(bench) as talker:
        start = time.monotonic()
        talker.say("HEADer OFF", "ACQuire:STOPAfter SEQuence", "ACQuire:STATE RUN")
        assert talker.ask("BUSY?") == "1"
        assert talker.ask("*OPC?;BUSY?") == "1;0"
        assert time.monotonic() - start >= 0.29


def test_trigger_status_tells_the_code_origin_dialect() -> None:
    with Bench(2, dialect="ten-field-code", acquire_s=0.2) as bench, Talker(bench) as talker:
        seen = [talker.ask(":TRIGger:STATus?")]
        talker.say(":SINGle")
        seen.append(talker.ask(":TRIGger:STATus?"))
        time.sleep(0.25)
        seen.append(talker.ask(":TRIGger:STATus?"))
        assert seen == ["AUTO", "WAIT", "STOP"]


def test_an_acquisition_may_take_as_long_as_its_record() -> None:
    with Bench(2, acquire_s=None) as bench, Talker(bench) as talker:
        talker.say(":TIMebase:RANGe 0.3")
        start = time.monotonic()
        talker.ask(":DIGitize;*OPC?")
        assert time.monotonic() - start >= 0.29


def test_the_frame_shows_the_setting_at_the_instant_of_arming() -> None:
    with Bench(2, acquire_s=0.2) as bench, Talker(bench) as talker:
        talker.say(RAW, ":SINGle")
        assert talker.ask(":OPERegister:CONDition?") == "8"
        before = bench.plant.wave().period_v.max()
        bench.turn("upper", 0.4)
        after = bench.plant.wave().period_v.max()
        time.sleep(0.25)
        codes = np.frombuffer(talker.block(":WAVeform:DATA?")[0], np.uint8)
        crest = (np.percentile(codes, 99.5) - 128.0) * 0.05
        assert abs(crest - before) < abs(crest - after)


def test_stopping_gives_up_an_acquisition_under_way() -> None:
    with Bench(2, acquire_s=0.2) as bench, Talker(bench) as talker:
        talker.say(RAW, ":STOP")
        old, _ = talker.block(":WAVeform:DATA?")
        talker.say(":SINGle;:STOP")
        time.sleep(0.25)
        assert talker.block(":WAVeform:DATA?")[0] == old


def test_changed_settings_show_with_the_next_acquisition() -> None:
    with Bench(2) as bench, Talker(bench) as talker:
        talker.say(RAW, ":DIGitize", ":ACQuire:POINts 5000")
        assert talker.ask(":WAVeform:PREamble?").split(",")[2] == "10000"
        assert len(talker.block(":WAVeform:DATA?")[0]) == 10_000
        talker.say(":DIGitize")
        assert talker.ask(":WAVeform:PREamble?").split(",")[2] == "5000"


def test_bytes_of_an_averaged_frame_are_cut_off() -> None:
    with Bench(2) as bench, Talker(bench) as talker:
        talker.say(":ACQuire:TYPE AVERage;COUNt 64", RAW, ":DIGitize")
        cut = np.frombuffer(talker.block(":WAVeform:DATA?")[0], np.uint8).astype(float)
        talker.say(":WAVeform:FORMat WORD")
        whole = np.frombuffer(talker.block(":WAVeform:DATA?")[0], ">u2") / 256.0
        assert np.mean(whole - cut) == pytest.approx(0.5 - 1 / 16, abs=0.02)


def test_too_much_work_for_one_acquisition_is_refused() -> None:
    with Bench(2) as bench, Talker(bench) as talker:
        talker.say("*CLS", ":ACQuire:POINts 2000000;TYPE AVERage;COUNt 1024", ":DIGitize")
        assert talker.ask("SYST:ERR?").startswith("-221")
