"""IEEE 488.2 arbitrary blocks: what stands before the bytes, how many there are, what follows.

The grammar (IEEE Std 488.2-1992, 8.7.9 and 8.7.10; clause numbers from memory):

* definite: ``#``, one digit 1 to 9, so many digits of byte count, that many bytes, and then the
  message terminator, which the count leaves out;
* indefinite: ``#0``, bytes, newline with END. Only END ends it, so a link without END (a raw
  socket, a serial line) cannot carry one, and it is refused there.

Text may stand before the ``#``: a header that was left on, or a preamble that travels with its
data. The parser pulls bytes from the link as it learns how many there are, so that a declared
length is judged before anything is set aside for it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

MOST_BYTES = 1 << 27
"""Longest block accepted: 64 million samples of two bytes, far above what a reading needs."""

MOST_PREFIX = 4096
"""Longest text before a block."""

_NEWLINES = b"\r\n"
_BLANKS = b" \t\r\n\0"
_CONTINUES = (b";", b",", b":")


class BlockError(Exception):
    """What came is no block, or not the block it said it was."""


class BlockTooLong(BlockError):
    """The declared length is beyond what is accepted; nothing was set aside for it."""


class ByteFeed(Protocol):
    """Where a block's bytes come from."""

    @property
    def has_end(self) -> bool:
        """True where the link itself marks the end of a message (END, EOI)."""
        ...

    def take(self, count: int) -> bytes:
        """Give exactly `count` bytes.

        Raises
        ------
        BlockError
            The message ended before.
        """
        ...

    def rest(self, most: int) -> bytes:
        """Give what is left of this message, at most `most` bytes and one more to tell.

        On a link without END: what has already arrived.
        """
        ...


@dataclass(frozen=True, slots=True)
class Block:
    """One block and the text it came with."""

    prefix: str
    """Text before the `#`, without its blanks."""
    payload: bytes
    """The bytes counted, or up to END."""


def read_block(feed: ByteFeed, most_bytes: int = MOST_BYTES) -> Block:
    """Read one block from a link.

    Parameters
    ----------
    feed
        The link, at the start of a reply.
    most_bytes
        Longest payload accepted.

    Returns
    -------
    Block
        Prefix and payload. What follows the payload has been taken off the link as far as it
        has arrived.

    Raises
    ------
    BlockTooLong
        The declared length is above `most_bytes`.
    BlockError
        Not a block, shorter or longer than declared, or indefinite on a link without END.
    """
    prefix = _prefix(feed)
    digit = feed.take(1)
    if digit == b"0":
        return Block(prefix, _indefinite(feed, most_bytes))
    if digit not in b"123456789":
        raise BlockError(f"after '#' comes {digit!r}, which is no digit")
    return Block(prefix, _definite(feed, int(digit), most_bytes))


def _definite(feed: ByteFeed, digits: int, most_bytes: int) -> bytes:
    written = feed.take(digits)
    if not (written.isascii() and written.isdigit()):
        raise BlockError(f"the byte count of a block reads {written!r}")
    length = int(written)
    if length > most_bytes:
        raise BlockTooLong(f"a block claims {length} bytes; at most {most_bytes} are accepted")
    payload = feed.take(length) if length else b""
    after = feed.rest(MOST_PREFIX)
    surplus = after.strip(_BLANKS)
    if surplus:
        raise BlockError(f"a block of {length} bytes goes on after its end: {surplus[:20]!r}")
    return payload


def _indefinite(feed: ByteFeed, most_bytes: int) -> bytes:
    if not feed.has_end:
        raise BlockError("an indefinite block (#0) cannot be told from what follows on this link")
    payload = feed.rest(most_bytes)
    if len(payload) > most_bytes:
        raise BlockTooLong(f"an indefinite block goes beyond {most_bytes} bytes")
    return payload[:-1] if payload.endswith(b"\n") else payload


def _prefix(feed: ByteFeed) -> str:
    """Take the text before `#`; a line that ends without one is no block.

    A newline may stand in the text only where more must follow it (after a separator) or before
    any text: the second newline of the reply before.
    """
    text = bytearray()
    while True:
        byte = feed.take(1)
        if byte == b"#":
            return text.decode("latin-1").strip()
        text += byte
        said = text.rstrip(_BLANKS)
        if byte in _NEWLINES and said and not said.endswith(_CONTINUES):
            raise BlockError(f"text came in place of a block: {bytes(text[:60])!r}")
        if len(text) > MOST_PREFIX:
            raise BlockError(f"no block within {MOST_PREFIX} bytes")


class MessageFeed:
    """A whole message in memory, as a feed: for replies that have already been read to END."""

    def __init__(self, message: bytes, *, has_end: bool = True) -> None:
        self._message = message
        self._at = 0
        self._has_end = has_end

    @property
    def has_end(self) -> bool:
        """True where END closed the message."""
        return self._has_end

    def take(self, count: int) -> bytes:
        """Give exactly `count` bytes."""
        taken = self._message[self._at : self._at + count]
        if len(taken) < count:
            raise BlockError(f"the reply ended {count - len(taken)} bytes short of {count}")
        self._at += count
        return taken

    def rest(self, most: int) -> bytes:
        """Give what is left, at most `most` bytes and one more to tell."""
        taken = self._message[self._at : self._at + most + 1]
        self._at += len(taken)
        return taken
