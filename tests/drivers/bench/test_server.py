"""The socket: lines in pieces, several talkers, an end within a second."""

from __future__ import annotations

import socket
import threading
import time

import numpy as np
import pytest

from drivers.bench import DIALECTS, Bench
from tests.drivers.bench.talker import Talker


def test_a_message_may_come_in_pieces() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        for piece in (b"*ID", b"N", b"?\n"):
            talker.socket.sendall(piece)
            time.sleep(0.02)
        assert talker.line().startswith("SIMULATED")


def test_several_messages_may_come_in_one_packet() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        talker.socket.sendall(b"*IDN?\n:WAV:FORM WORD\n*OPC?\r\n\n  \n:WAV:FORM?\n")
        assert talker.line().startswith("SIMULATED")
        assert talker.line() == "1"
        assert talker.line() == "WORD"


def test_a_chain_answers_in_one_line_and_keeps_its_path() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        chain = ":WAVeform:FORMat WORD;BYTeorder LSBFirst;FORMat?;BYTeorder?;*OPC?;POINts:MODE?"
        assert talker.ask(chain) == "WORD;LSBF;1;NORM"
        assert talker.ask(":ACQ:COUN 4;:WAV:FORM?;:ACQ:COUN?") == "WORD;4"


def test_after_an_unknown_header_the_rest_of_the_message_is_not_carried_out() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        talker.say("*CLS", ":WAV:FORM BYTE;NONSENSE 1;FORM WORD")
        assert talker.ask(":WAV:FORM?") == "BYTE"
        assert talker.ask("SYST:ERR?") == '-113,"Undefined header"'
        assert talker.ask("*ESR?") == "32"


def test_switching_on_is_told_once() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        assert int(talker.ask("*ESR?")) == 128
        assert int(talker.ask("*ESR?")) == 0


def test_reset_empties_the_memory_and_leaves_the_errors() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        talker.say("NONSENSE", "*RST")
        assert talker.ask(":SYSTem:ERRor:NEXT?").startswith("-113")
        talker.say(":WAVeform:DATA?")
        assert talker.ask(":SYSTem:ERRor?").startswith("-230")
        talker.say("NONSENSE", "*CLS")
        assert talker.ask(":SYSTem:ERRor?").startswith("0")


def test_a_second_talker_is_served_beside_the_first() -> None:
    with Bench(1) as bench, Talker(bench) as one, Talker(bench) as two:
        two.say("*IDN?")
        one.say("*IDN?")
        assert one.line() == two.line()


def test_talkers_come_and_go() -> None:
    with Bench(1) as bench:
        for _ in range(20):
            with Talker(bench) as talker:
                assert talker.ask("*OPC?") == "1"


def test_a_crowd_is_turned_away_and_the_first_go_on() -> None:
    with Bench(1) as bench:
        crowd = [Talker(bench) for _ in range(12)]
        served = 0
        for talker in crowd:
            try:
                served += talker.ask("*OPC?") == "1"
            except OSError:
                continue
        assert served == 8
        for talker in crowd:
            talker.socket.close()


def test_only_the_loopback_address_listens() -> None:
    with Bench(1) as bench:
        assert bench._server._listener.getsockname()[0] == "127.0.0.1"
        assert bench.resource == f"TCPIP::127.0.0.1::{bench.port}::SOCKET"


def test_a_port_that_is_taken_is_an_os_error() -> None:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        with pytest.raises(OSError, match="in use"):
            Bench(1, port=taken.getsockname()[1])


def test_a_port_can_be_chosen_and_is_free_again_at_once() -> None:
    with Bench(1) as bench:
        port = bench.port
        with Talker(bench) as talker:
            talker.ask("*OPC?")
    with Bench(2, port=port) as again:
        assert again.port == port


@pytest.mark.parametrize("busy", ["idle", "reading nothing", "waiting", "dripping"])
def test_closing_ends_every_thread_within_a_second(busy: str) -> None:
    before = set(threading.enumerate())
    bench = Bench(1, acquire_s=30.0 if busy == "waiting" else 0.0)
    with Talker(bench) as talker:
        match busy:
            case "reading nothing":
                talker.say(":ACQ:POIN 2000000;:WAV:POIN:MODE RAW;:DIG")
                talker.say(*[":WAV:DATA?"] * 8)
                time.sleep(0.3)
            case "waiting":
                talker.say(":DIGitize;*OPC?")
                time.sleep(0.1)
            case "dripping":
                bench.fail("slow-drip")
                talker.say(":WAV:DATA?")
                time.sleep(0.1)
        start = time.monotonic()
        bench.close()
        assert time.monotonic() - start < 1.0
        bench.close()
    assert [t for t in threading.enumerate() if t not in before and t.is_alive()] == []


def test_a_message_without_an_end_is_thrown_away() -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        talker.say("*CLS")
        talker.socket.sendall(b"A" * 200_000)
        talker.say("")
        assert talker.ask("*OPC?") == "1"
        assert talker.ask("SYST:ERR?").startswith("-")


def test_nothing_is_printed(capfd: pytest.CaptureFixture[str]) -> None:
    with Bench(1) as bench, Talker(bench) as talker:
        talker.say("NONSENSE", "\x00\xff;;;:", ":WAV:DATA? 1,2,3")
        talker.ask("*IDN?")
    assert capfd.readouterr() == ("", "")


@pytest.mark.parametrize("dialect", DIALECTS)
def test_no_bytes_whatever_bring_it_down(dialect: str) -> None:
    rng = np.random.default_rng(5)
    words = [b"WAV", b"DATA", b":", b";", b"?", b"*", b"C1", b"WF", b" ", b",", b"1e999", b"-1", b'"',
             b"CHAN999999999999", b"FORM", b"REAL", b"TRMD", b"CURV", b"WFSU", b"#0", b"\xff\x00",
             b"SING", b"ACQ", b"POIN", b"INF", b"NAN", b"MEM", b"HEAD", b"(@1)", b"\t"]  # fmt: skip
    with Bench(3, dialect=dialect) as bench:
        for _ in range(1500):
            picked = rng.choice(len(words), size=int(rng.integers(1, 9)))
            bench.instrument.execute(b"".join(words[i] for i in picked))
            bench.instrument.execute(rng.bytes(int(rng.integers(0, 40))))
        with Talker(bench) as talker:
            talker.say("CHDR OFF")
            assert talker.ask("*OPC?") == "1"
            assert talker.ask("*IDN?").startswith("SIMULATED")
