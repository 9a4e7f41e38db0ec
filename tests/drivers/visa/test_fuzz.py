"""Whatever an instrument answers, what comes out is a sound capture or a `SourceError`."""

from __future__ import annotations

import contextlib
import random
import struct

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.contract import CaptureRequest, SourceError, SourceTimeout
from drivers.visa import dialect_names, open_instrument
from drivers.visa.blocks import Block, MessageFeed, read_block
from tests.drivers.visa.servers.brain import Brain
from tests.drivers.visa.test_probing import SPEAKERS

WORDS = [
    "", "0", "1", "+0", "-113,\"Undefined header\"", "0,\"No error\"", "STOP", "nan", "9.9E37",
    "1e308", "-1e308", "1E-400", "AC", "DC", "\x00\x1b[2J", "REAL,64", "ENV", "1,2", "#15ABCDE",
    "0,0,4,1,1E-6,0,0,1E-3,0,128", "1,0,2,1,1E-6,0,0,1E-3,0,32768", "2,0,4,1,1E-6,0,0,1E-3,0,127",
    "0,0,1e300,1,1E-6,0,0,1E-3,0,128", "0,0,-4,1,1E-6,0,0,1E-3,0,128", "0,0,4,1,0,0,0,0,0,0",
    "0,0,4,1e300,1E-6,0,0,1e308,1e308,-1e308", "-1E-6,1E-6,1,1", "0,0,4,1", "1;2;3;4;5;6;7;8",
    ":WFMOUTPRE:BYT_NR 1;BIT_NR 8;BN_FMT RI;BYT_OR MSB;NR_PT 4;PT_FMT Y;XINCR 1E-6;YMULT 1;YOFF 0;YZERO 0",
    ":WFMOUTPRE:BYT_NR 7;BIT_NR x;BN_FMT RI;BYT_OR MSB;NR_PT y;PT_FMT Y;XINCR 1E-6;YMULT 1;YOFF 0;YZERO 0",
    "500mV", "1GSa/s", "0V", "0Sa/s", "-1Sa/s", "2 parsec",
]  # fmt: skip


def descriptor(rng: random.Random) -> bytes:
    head = bytearray(rng.choice([20, 340, 360]))
    for at, form in ((32, "<h"), (34, "<h"), (36, "<i"), (40, "<i"), (60, "<i"), (172, "<h")):
        if at + 4 <= len(head):
            struct.pack_into(form, head, at, rng.choice([0, 1, 4, 340, 346, -1, 2**15 - 1]))
    for at in (156, 160, 176):
        if at + 4 <= len(head):
            value = rng.choice([0.0, 1e-6, float("nan"), float("inf"), 1.0])
            struct.pack_into("<f", head, at, value)
    return bytes(head) + bytes(rng.randrange(8))


BLOCKS = [
    b"#10", b"#14\x01\x02\x03\x04", b"#14\x00\x00\x00\x00", b"#19\x01", b"#0AB", b"#A", b"",
    b"text\n", b"#14\xff\xff\xff\xff", b"#18" + struct.pack(">d", float("nan")),
    b"#18" + struct.pack(">d", 9.91e37), b"#216" + struct.pack(">2d", 1e308, -1e308),
    b"Vertical Scale,0.2;Sampling Period,1E-6;Waveform Data;#14\x01\x02\x03\x04",
    b"Vertical Scale,x;Sampling Period,y;#14\x01\x02\x03\x04", b"Vertical Scale;#14\x01\x02\x03\x04",
]  # fmt: skip


class Babbling:
    """A link at whose other end anything is said."""

    resource, kind, stream = "BABBLE", "SOCKET", True

    def __init__(self, rng: random.Random) -> None:
        self.rng = rng
        self.broken = False
        self.said = 0

    def write(self, text: str, deadline: float) -> None:
        self.idn = text == "*IDN?"

    def line(self, deadline: float, most: int = 0) -> str:
        self.said += 1
        if self.idn:
            return "EXAMPLE WORKS,SCOPE 10,SN0001,1.00"
        if self.said > 400 or self.rng.random() < 0.05:
            raise SourceTimeout("nothing is said")
        if self.rng.random() < 0.3:
            return self.rng.choice(['0,"No error"', "1", "STOP", "0"])
        return self.rng.choice(WORDS)

    def values(self, deadline: float, expect: int = 0, most: int = 0) -> str:
        return self.line(deadline)

    def block(self, deadline: float, expect: int = 0, most: int = 1 << 20) -> Block:
        self.said += 1
        if self.said > 400:
            raise SourceTimeout("nothing is said")
        if self.rng.random() < 0.3:
            payload = descriptor(self.rng)
            return read_block(MessageFeed(b"#9%09d" % len(payload) + payload), most)
        return read_block(MessageFeed(self.rng.choice(BLOCKS)), most)

    def drain(self) -> bytes:
        return b""

    def resume(self) -> None:
        self.broken = False

    def freshen(self, deadline: float) -> None:
        """Nothing to drop."""

    def close(self) -> None:
        """Nothing to close."""


class Mutating(Babbling):
    """A link to a sound instrument, whose answers are sometimes spoilt on their way."""

    def __init__(self, rng: random.Random, brain: Brain) -> None:
        super().__init__(rng)
        self.brain = brain
        self.pending: bytes | None = None

    def write(self, text: str, deadline: float) -> None:
        self.pending = self.spoilt(self.brain.message(text))

    def spoilt(self, reply: bytes | None) -> bytes | None:
        if reply is None or self.rng.random() > 0.03:
            return reply
        cut = self.rng.randrange(len(reply) + 1)
        letter = bytes([self.rng.randrange(256)])
        return self.rng.choice(
            [
                None,
                reply[:cut],
                reply[cut:],
                reply + reply,
                reply[:cut] + letter + reply[cut + 1 :],
                reply[:cut] + letter + reply[cut:],
                self.rng.choice(WORDS).encode(),
            ]
        )

    def taken(self) -> bytes:
        self.said += 1
        reply, self.pending = self.pending, None
        if reply is None or self.said > 2000:
            raise SourceTimeout("nothing is said")
        return reply

    def line(self, deadline: float, most: int = 0) -> str:
        return self.taken().decode("latin-1").strip()

    def block(self, deadline: float, expect: int = 0, most: int = 1 << 20) -> Block:
        return read_block(MessageFeed(self.taken(), has_end=False), most)


def converse(link: Babbling, dialect: str | None, captures: int, set_range: bool = False) -> int:
    """Open, capture a few times, close; give the captures that were sound.

    Anything but a `SourceError` comes out as it is, and fails the test.
    """
    sound = 0
    with (
        pytest.MonkeyPatch.context() as patch,
        contextlib.suppress(SourceError),
    ):
        patch.setattr("drivers.visa.source.open_link", lambda *_, **__: link)
        patch.setattr("time.sleep", lambda _: None)
        with open_instrument("BABBLE", dialect=dialect, set_range=set_range) as source:
            for turn in range(captures):
                link.broken = False
                with contextlib.suppress(SourceError):
                    taken = source.capture(CaptureRequest(timeout_s=0.2, average=1 + 7 * turn))
                    assert np.isfinite(taken.samples).all()
                    assert taken.interval_s > 0.0
                    assert taken.samples.size > 0
                    sound += 1
    return sound


def spoilt_conversation(seed: int, dialect: str) -> int:
    """Talk to a sound instrument over a line that spoils three answers of a hundred."""
    brain = SPEAKERS[dialect]()
    brain.points = 16
    named = dialect if seed % 3 else None
    return converse(Mutating(random.Random(seed), brain), named, captures=4)


@pytest.mark.parametrize("dialect", SPEAKERS)
@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 2**32))
def test_spoilt_answers_give_a_capture_or_a_source_error(dialect, seed) -> None:
    spoilt_conversation(seed, dialect)


@pytest.mark.parametrize("dialect", SPEAKERS)
def test_most_spoilt_conversations_still_give_captures(dialect) -> None:
    """Without this the tests above could pass with nothing ever read."""
    assert sum(spoilt_conversation(seed, dialect) for seed in range(20)) > 20


@pytest.mark.parametrize("dialect", [None, *dialect_names()])
@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 2**32))
def test_babble_is_a_capture_or_a_source_error(dialect, seed) -> None:
    converse(Babbling(random.Random(seed)), dialect, captures=2, set_range=bool(seed % 2))
