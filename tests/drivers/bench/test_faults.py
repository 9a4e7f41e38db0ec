"""Every fault, as it looks from the other end of the wire."""

from __future__ import annotations

import time

import numpy as np
import pytest

from drivers.bench import FAULTS, Bench
from tests.drivers.bench.talker import Talker

DATA = ":WAVeform:DATA?"
WHOLE = b"#900001000"


def rest(talker: Talker, seconds: float = 0.3) -> bytes:
    """All that comes within a time."""
    talker.socket.settimeout(0.1)
    end, came = time.monotonic() + seconds, b""
    while time.monotonic() < end:
        try:
            came += talker.socket.recv(1 << 20)
        except TimeoutError:
            continue
    talker.socket.settimeout(5.0)
    return came


def test_silence_answers_nothing() -> None:
    with Bench(1, fault="silence") as bench, Talker(bench) as talker:
        talker.say("*IDN?", DATA)
        assert talker.silent()


def test_a_slow_drip_comes_in_drops() -> None:
    with Bench(1, fault="slow-drip") as bench, Talker(bench) as talker:
        assert talker.ask("*OPC?") == "1"
        talker.say(DATA)
        assert 20 <= len(rest(talker, 0.4)) <= 300


def test_a_short_block_ends_before_its_count_and_nothing_follows() -> None:
    with Bench(1, fault="short-block") as bench, Talker(bench) as talker:
        talker.say(DATA)
        came = rest(talker)
        assert came.startswith(b"#9000001000")
        assert len(came) == 11 + 1000 - 100


def test_a_long_block_goes_on_after_its_count() -> None:
    with Bench(1, fault="long-block") as bench, Talker(bench) as talker:
        talker.say(DATA)
        came = rest(talker)
        assert came.startswith(b"#9000001000")
        assert len(came) == 11 + 1000 + 37 + 1
        assert came.endswith(b"\n")


def test_wrong_digits_make_the_count_too_small() -> None:
    with Bench(1, fault="wrong-digits") as bench, Talker(bench) as talker:
        talker.say(DATA)
        came = rest(talker)
        assert came.startswith(b"#31000")
        assert len(came) == 6 + 1000 + 1


def test_an_indefinite_block_has_no_count() -> None:
    with Bench(1, fault="indefinite-block") as bench, Talker(bench) as talker:
        talker.say(DATA)
        came = rest(talker)
        assert came.startswith(b"#0")
        assert came.endswith(b"\n")
        assert len(came) == 2 + 1000 + 1


def test_a_drop_ends_the_connection_in_the_middle_and_the_next_is_served() -> None:
    with Bench(1, fault="drop") as bench:
        with Talker(bench) as talker:
            talker.say(DATA)
            with pytest.raises(ConnectionAbortedError):
                talker.bytes(1012)
            assert len(talker._kept) == 506
        with Talker(bench) as again:
            assert again.ask("*OPC?") == "1"


def test_a_reset_resets() -> None:
    with Bench(1, fault="reset") as bench, Talker(bench) as talker:
        talker.say(DATA)
        time.sleep(0.2)
        with pytest.raises(ConnectionResetError):
            talker.bytes(1012)


def test_a_late_answer_comes_after_the_next_question() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        bench.fail("late-answer", times=1, late_s=0.4)
        talker.say(DATA)
        assert talker.silent(0.2)
        talker.say("*OPC?")
        assert len(talker.bytes(1012)) == 1012  # the late one comes first
        assert talker.line() == "1"


def test_an_error_in_the_queue_and_no_waveform() -> None:
    with Bench(1, fault="error-queue") as bench, Talker(bench) as talker:
        talker.say(DATA)
        assert talker.silent()
        assert talker.ask("SYST:ERR?") == '-221,"Settings conflict"'
        assert int(talker.ask("*ESR?")) & 16


def test_a_reboot_forgets_its_settings_and_comes_back_on_its_port() -> None:
    with Bench(1) as bench, Talker(bench) as talker, Talker(bench) as other:
        talker.say(":CHANnel1:RANGe 30", "*CLS")
        port, identity = bench.port, talker.ask("*IDN?")
        bench.fail("reboot")
        talker.say(DATA)
        with pytest.raises(OSError):  # noqa: PT011 - aborted or reset, as the system has it
            talker.bytes(2000)
        with pytest.raises(OSError):  # noqa: PT011
            other.ask("*OPC?")
        time.sleep(0.3)
        with pytest.raises(ConnectionRefusedError):
            Talker(bench)
        time.sleep(1.8)
        assert bench.port == port
        with Talker(bench) as again:
            assert again.ask("*IDN?") == identity
            assert int(again.ask("*ESR?")) & 128
            assert float(again.ask(":CHANnel1:RANGe?")) == pytest.approx(12.8)
            assert len(again.block(DATA)[0]) == 1000


def test_a_bench_that_reboots_can_be_closed() -> None:
    bench = Bench(1)
    with Talker(bench) as talker:
        bench.fail("reboot")
        talker.say(DATA)
        time.sleep(0.2)
        start = time.monotonic()
        bench.close()
        assert time.monotonic() - start < 1.0


def test_garbage_is_garbage_and_the_same_for_the_same_seed() -> None:
    came = []
    for _ in range(2):
        with Bench(1, fault="garbage") as bench, Talker(bench) as talker:
            talker.say("*IDN?")
            came.append(rest(talker))
    assert came[0] == came[1]
    assert b"SIMULATED" not in came[0]
    assert len(came[0]) > 20


def codes(talker: Talker) -> np.ndarray:
    talker.say(":WAVeform:POINts:MODE RAW", ":DIGitize")
    return np.frombuffer(talker.block(DATA)[0], np.uint8)


def test_a_stale_frame_stays_whatever_is_armed() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        codes(talker)
        bench.fail("stale")
        first, second = codes(talker), codes(talker)
        assert np.array_equal(first, second)
        bench.fail(None)
        assert not np.array_equal(first, codes(talker))


def test_a_clipped_signal_stands_at_both_rails() -> None:
    with Bench(1, fault="clipped") as bench, Talker(bench) as talker:
        taken = codes(talker)
        assert np.mean(taken == 1) > 0.05
        assert np.mean(taken == 255) > 0.05


def test_a_low_level_uses_few_codes() -> None:
    with Bench(1, fault="low-level") as bench, Talker(bench) as talker:
        assert 5 < np.ptp(codes(talker).astype(int)) < 25


def test_no_signal_is_noise() -> None:
    with Bench(1, fault="no-signal") as bench, Talker(bench) as talker:
        assert np.ptp(codes(talker).astype(int)) < 8


@pytest.mark.parametrize("name", ["short-block", "drop", "late-answer", "stale"])
def test_a_fault_can_be_for_once_and_after_some(name: str) -> None:
    with Bench(1) as bench:
        bench.fail(name, times=1, after=2, late_s=0.0)
        seen = []
        for _ in range(4):
            seen.append(bench._faults.active() == name)
            bench._faults.count(waveform=True)
        assert seen == [False, False, True, False]


def test_a_fault_for_once_leaves_the_rest_sound() -> None:
    with Bench(1) as bench:
        bench.fail("drop", times=1)
        with Talker(bench) as talker:
            talker.say(DATA)
            with pytest.raises(ConnectionAbortedError):
                talker.bytes(1012)
        with Talker(bench) as again:
            assert len(again.block(DATA)[0]) == 1000


def test_a_refused_waveform_counts_too() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        bench.fail("error-queue", times=2)
        talker.say(DATA, DATA)
        assert talker.ask("SYST:ERR?;:SYST:ERR?").count("-221") == 2
        assert len(talker.block(DATA)[0]) == 1000


def test_a_bench_told_to_reboot_from_the_start_lets_a_session_get_under_way() -> None:
    with Bench(1, fault="reboot") as bench, Talker(bench) as talker:
        for _ in range(8):
            assert len(talker.block(DATA)[0]) == 1000
        talker.say(DATA)
        with pytest.raises(OSError):  # noqa: PT011
            talker.bytes(1012)


def test_unknown_faults_are_refused_with_the_list_of_them() -> None:
    with pytest.raises(ValueError, match="slow-drip"):
        Bench(1, fault="tantrum")
    with Bench(1) as bench:
        with pytest.raises(ValueError, match="slow-drip"):
            bench.fail("tantrum")
        with pytest.raises(ValueError, match="at least once"):
            bench.fail("drop", times=0)


def test_each_fault_says_what_it_does() -> None:
    assert len(FAULTS) == 16
    assert all(len(words) > 10 for words in FAULTS.values())
