"""The real command under hard use: odd words, odd names, closed pipes, kills, a plain instrument."""

from __future__ import annotations

import json
import os
import signal
import socket
import subprocess
import sys
import threading
from collections.abc import Iterator
from dataclasses import dataclass, field
from datetime import datetime
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tests.command import Running, trimmer
from trimmer.commands.opening import shape_of
from trimmer.errors import CommandError

POINTS, INTERVAL_S, VOLTS_A_CODE = 10_000, 1e-6, 0.02
COMMAND = f"'{sys.executable}' -m trimmer"


@dataclass
class PlainScope:
    """The least instrument with a ten-field preamble, written from the manuals' common ground.

    It answers only what it knows, and unknown questions not at all. Its wave is 2 V peak at 1 kHz
    with a second crest part of 1 %.
    """

    arms: tuple[str, ...] = ("SINGLE",)
    poll: str = "OPER"
    queue: bool = True
    tail: bytes = b"\n"
    errors: list[str] = field(default_factory=list)

    def __post_init__(self) -> None:
        self._random = np.random.default_rng(20)
        self._codes = b""
        self._server = socket.create_server(("127.0.0.1", 0))
        threading.Thread(target=self._accept, daemon=True).start()

    @property
    def resource(self) -> str:
        return f"TCPIP::127.0.0.1::{self._server.getsockname()[1]}::SOCKET"

    def close(self) -> None:
        self._server.close()

    def _accept(self) -> None:
        try:
            while True:
                link, _ = self._server.accept()
                threading.Thread(target=self._serve, args=(link,), daemon=True).start()
        except OSError:  # closed: the test is over
            return

    def _serve(self, link: socket.socket) -> None:
        with link, link.makefile("rb") as lines:
            for line in lines:
                if (answer := self._answer(line.decode().strip().upper().lstrip(":"))) is not None:
                    link.sendall(answer)

    def _arm(self) -> None:
        theta = 2 * np.pi * (1e3 * INTERVAL_S * np.arange(POINTS) + self._random.uniform())
        volts = 2 * (np.cos(theta) + 0.01 * np.cos(2 * theta))
        codes = np.round((volts + self._random.normal(0, 0.01, POINTS)) / VOLTS_A_CODE) + 128
        self._codes = codes.astype(np.uint8).tobytes()

    def _answer(self, said: str) -> bytes | None:
        verb = said.split(" ")[0]
        if verb == "*IDN?":
            return b"NOBODY,Plain scope,7,1.0\n"
        if verb == "*OPC?":
            return b"1\n"
        if verb == "SYSTEM:ERROR?" and self.queue:
            return (self.errors.pop(0) if self.errors else '0,"No error"').encode() + b"\n"
        if verb == "WAVEFORM:PREAMBLE?":
            return f"0,0,{POINTS},1,{INTERVAL_S},0,0,{VOLTS_A_CODE},0.0,128\n".encode()
        if verb == "WAVEFORM:DATA?":
            return b"#800%06d" % len(self._codes) + self._codes + self.tail
        if verb.startswith(self.poll) and verb.endswith("CONDITION?"):
            return b"0\n"
        if verb.startswith(self.poll) and verb.endswith("STATUS?"):
            return b"STOP\n"
        self._act(verb, said)
        return None

    def _act(self, verb: str, said: str) -> None:
        known = ("WAVEFORM:SOURCE", "WAVEFORM:POINTS", "WAVEFORM:FORMAT")
        if verb in self.arms:
            self._arm()
        elif verb == "*CLS":
            self.errors.clear()
        elif not (verb in known and "WORD" not in said and "ASC" not in said):
            self.errors.append('-113,"Undefined header"')


SCOPES = {
    "single, old errors queued, two newlines after the block": {
        "errors": ['-113,"Undefined header"'] * 3,
        "tail": b"\n\n",
    },
    "single, trigger status, nothing after the block": {"poll": "TRIG", "tail": b""},
    "digitize alone, no error queue": {"arms": ("DIGITIZE",), "poll": "none", "queue": False},
}


@pytest.fixture
def scope(request: pytest.FixtureRequest) -> Iterator[PlainScope]:
    made = PlainScope(**request.param)
    yield made
    made.close()


@pytest.mark.parametrize("scope", SCOPES.values(), ids=SCOPES.keys(), indirect=True)
def test_a_plain_instrument_is_read_whatever_it_leaves_out(scope: PlainScope) -> None:
    read = trimmer("measure", scope.resource, "--json")
    assert read.returncode == 0, read.stderr
    (event,) = map(json.loads, read.stdout.splitlines())
    assert event["thd"] == pytest.approx(0.01, abs=4 * event["thd_sigma"])
    assert event["amplitude_v"] == pytest.approx(2.0, abs=0.01)
    assert event["fundamental_hz"] == pytest.approx(1000.0, abs=0.1)


def shelled(line: str) -> subprocess.CompletedProcess[str]:
    """Run the command by a shell's line."""
    return subprocess.run(
        ["sh", "-c", line], capture_output=True, text=True, timeout=60, check=False, env=os.environ
    )


def test_a_closed_stdin_ends_a_session_as_an_empty_one_does() -> None:
    ended = shelled(f"{COMMAND} tune bench --seed 1 --json <&-")
    assert ended.returncode == 0, ended.stderr
    assert "Traceback" not in ended.stderr
    assert json.loads(ended.stdout.splitlines()[-1])["verdict"] == "stopped"


def test_a_reader_that_leaves_ends_the_session_and_closes_its_sheet() -> None:
    ended = shelled(f"({COMMAND} demo --hands auto --seed 2 --json; echo $? >&2) | head -1")
    assert ended.stderr.splitlines()[-1] == "0", ended.stderr
    assert "Traceback" not in ended.stderr
    sheet = next(line for line in ended.stderr.splitlines() if " sheet " in line)
    book = sheet.rpartition(" in ")[2]
    listed = trimmer("log", "list", "--json", "--book", book)
    assert json.loads(listed.stdout)["finished"] is True


def test_no_source_is_no_source() -> None:
    done = trimmer("measure", "")
    assert done.returncode == 2
    assert len(done.stderr.splitlines()) == 2
    with pytest.raises(CommandError):
        shape_of("")


@pytest.mark.parametrize(
    "resource",
    ["ASRL3::INSTR", "ASRL/dev/ttyS0::INSTR", "PRLGX-ASRL::/dev/ttyS0::INTFC", "tcpip0::h::INSTR"],
)
def test_a_resource_that_the_library_lists_can_be_named(resource: str) -> None:
    assert shape_of(resource) == "visa"


def test_a_session_killed_outright_has_each_told_reading_in_its_book(own_home: Path) -> None:
    with Running("tune", "bench", "--seed", "3", "--json") as session:
        told = 0
        for event in session.events():
            told += event["event"] == "reading"
            if told == 3:
                session.process.send_signal(signal.SIGKILL)
                break
            if event["event"] == "advice":
                session.say()
        session.end()
    (sheet,) = map(json.loads, trimmer("log", "list", "--json").stdout.splitlines())
    shown = json.loads(trimmer("log", "show", sheet["id"], "--json").stdout)
    assert len(shown["readings"]) >= 3
    assert sheet["finished"] is False


def test_names_with_blanks_marks_and_controls_go_through_the_book() -> None:
    unit = "no. 7 [/] [red] \u00e9 \u03a9 \x1b[2J"
    words = ("--unit", unit, "--kind", "k [b]", "--note", "load=50 [/] ohm")
    assert trimmer("tune", "bench", "--seed", "1", "--json", *words, stdin="").returncode == 0
    shown = json.loads(trimmer("log", "show", unit, "--json").stdout)
    assert (shown["unit"], shown["kind"]) == (unit.replace("\x1b", "\ufffd"), "k [b]")
    assert shown["notes"] == {"load": "50 [/] ohm"}
    assert "\x1b" not in trimmer("log", "show", unit).stdout


def figures(value: Any) -> Iterator[float]:
    """Every number below a JSON value."""
    if isinstance(value, dict):
        value = list(value.values())
    if isinstance(value, list):
        for each in value:
            yield from figures(each)
    elif isinstance(value, float):
        yield value


def test_every_line_of_a_whole_session_keeps_to_its_fields() -> None:
    session = trimmer("demo", "--hands", "auto", "--seed", "5", "--json")
    events = [json.loads(line) for line in session.stdout.splitlines()]
    assert {event["event"] for event in events} == {"reading", "advice", "done"}
    for event in events:
        assert all(np.isfinite(figure) for figure in figures(event))
    for reading in (event for event in events if event["event"] == "reading"):
        assert datetime.fromisoformat(reading["taken_at"]).utcoffset() is not None
        assert reading["thd_low"] <= reading["thd"] <= reading["thd_high"]
        crests = reading["crests"]
        assert crests["asymmetry"] == pytest.approx(crests["upper"] - crests["lower"])
        assert [part["order"] for part in reading["harmonics"]] == list(range(2, 16))
    for advice in (event for event in events if event["event"] == "advice"):
        assert advice["degrees"] == pytest.approx(360 * advice["turns"], abs=0.06)
        assert (advice["floor_thd"] is None) == (advice["floor_sigma"] is None)
    done = events[-1]
    assert set(done["net_turns"]) == {"upper", "lower"}
    assert done["turns_made"] == max(e["turn"] for e in events if e["event"] == "reading")
