"""IEEE 488.2 blocks: the vectors of the standard's grammar, and what is refused.

IEEE Std 488.2-1992, 8.7.9 and 8.7.10 (clause numbers from memory).
"""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.visa.blocks import MOST_PREFIX, BlockError, BlockTooLong, MessageFeed, read_block


def of_message(data: bytes, most: int = 1000) -> bytes:
    return read_block(MessageFeed(data), most).payload


def of_stream(data: bytes, most: int = 1000) -> bytes:
    return read_block(MessageFeed(data, has_end=False), most).payload


@pytest.mark.parametrize(
    ("sent", "meant"),
    [
        (b"#10", b""),
        (b"#15ABCDE", b"ABCDE"),
        (b"#205ABCDE", b"ABCDE"),
        (b"#800000005ABCDE", b"ABCDE"),
        (b"#9000000005ABCDE", b"ABCDE"),
        (b"#15#1,\n5", b"#1,\n5"),
        (b"#15ABCDE\n", b"ABCDE"),
        (b"#15ABCDE\r\n", b"ABCDE"),
        (b"#15ABCDE\n\n", b"ABCDE"),
        (b"\n#15ABCDE\n", b"ABCDE"),
        (b":CURVE #15ABCDE\n", b"ABCDE"),
        (b"C1:WF ALL,#15ABCDE\n", b"ABCDE"),
        (b"Key,1;Waveform Data;\n#15ABCDE\n", b"ABCDE"),
    ],
)
@pytest.mark.parametrize("read", [of_message, of_stream])
def test_a_definite_block_is_its_count_and_nothing_else(read, sent, meant) -> None:
    assert read(sent) == meant


@pytest.mark.parametrize(
    ("sent", "meant"), [(b"#0ABC\nDE", b"ABC\nDE"), (b"#0ABC\nDE\n", b"ABC\nDE"), (b"#0", b"")]
)
def test_an_indefinite_block_ends_at_the_end_of_its_message(sent, meant) -> None:
    assert of_message(sent) == meant


def test_an_indefinite_block_is_refused_where_nothing_ends_a_message() -> None:
    with pytest.raises(BlockError, match="indefinite"):
        of_stream(b"#0ABC\nDE\n")


@pytest.mark.parametrize(
    "sent",
    [
        b"#19ABCDE",  # short
        b"#15ABCDEF",  # long
        b"#15ABCDE\nF",  # long, after a newline
        b"#25ABCDE",  # a digit too many
        b"#35ABCDE",
        b"#A5ABCDE",
        b"#",
        b"",
        b"#1",
        b"#1-ABC",
        b"1,2,3\n",  # text in place of a block
        b'-113,"Undefined header"\n#15ABCDE',
        b"#1\xb25",  # a superscript two is a digit for some, not here
    ],
)
@pytest.mark.parametrize("read", [of_message, of_stream])
def test_what_is_no_block_is_refused(read, sent) -> None:
    with pytest.raises(BlockError):
        read(sent)


def test_text_without_a_block_is_given_up_after_a_while() -> None:
    with pytest.raises(BlockError, match="no block within"):
        of_message(b"," * (MOST_PREFIX + 10))


class Counting:
    """A feed that notes what is asked of it, and never has the bytes."""

    has_end = False

    def __init__(self, head: bytes) -> None:
        self.feed = MessageFeed(head)
        self.largest = 0

    def take(self, count: int) -> bytes:
        self.largest = max(self.largest, count)
        return self.feed.take(count)

    def rest(self, most: int) -> bytes:
        return b""


@pytest.mark.parametrize("claim", [b"#9999999999", b"#800099999", b"#41001"])
def test_a_length_beyond_the_bound_is_refused_before_a_byte_of_it_is_asked_for(claim) -> None:
    feed = Counting(claim)
    with pytest.raises(BlockTooLong):
        read_block(feed, 1000)
    assert feed.largest <= 9


def test_ten_gigabytes_cannot_even_be_written_in_nine_digits() -> None:
    with pytest.raises(BlockError):
        of_message(b"#A10000000000" + b"x" * 20)


@given(
    payload=st.binary(max_size=300),
    digits=st.integers(3, 9),
    tail=st.sampled_from(["", "\n", "\n\n"]),
)
def test_every_payload_comes_back_as_it_was(payload: bytes, digits: int, tail: str) -> None:
    sent = f"#{digits}{len(payload):0{digits}d}".encode() + payload + tail.encode()
    assert of_message(sent) == payload
    assert of_stream(sent) == payload


@given(data=st.binary(max_size=60), ends=st.booleans())
def test_whatever_comes_is_read_or_refused_and_never_longer_than_what_came(
    data: bytes, ends: bool
) -> None:
    try:
        block = read_block(MessageFeed(data, has_end=ends), 50)
    except BlockError:
        return
    assert len(block.payload) <= len(data)
    assert block.payload in data


@given(
    payload=st.binary(min_size=1, max_size=80),
    lost=st.integers(1, 80),
)
def test_a_block_cut_short_is_never_taken_for_a_whole_one(payload: bytes, lost: int) -> None:
    sent = f"#2{len(payload):02d}".encode() + payload
    with pytest.raises(BlockError):
        of_message(sent[: max(1, len(sent) - min(lost, len(payload)))])
