"""One link to one instrument: bytes out, lines and blocks in, every wait with an end.

The library below is asked for plain reads of known size only; its conveniences for binary
values are not used (they never return when a block is shorter than its header says). A *stream*
(raw socket, serial line) has no marks between messages: lines end at a newline, blocks at their
count. Every other link carries *messages* closed by END.
"""

from __future__ import annotations

import contextlib
import threading
import time
from typing import Any

from drivers.contract import SourceError, SourceLost, SourceTimeout, clean
from drivers.visa.blocks import MOST_BYTES, Block, BlockError, MessageFeed, read_block
from drivers.visa.faults import translate
from drivers.visa.guard import Guard, sockets_of
from drivers.visa.library import Opened, open_resource

_CHUNK = 1 << 20
"""Bytes asked for at once; one library sets so many aside before it reads the first."""

_MOST_LINE = 1 << 24
"""Longest line of text: a million values written out."""

_OVERSTAY_S = 0.2
"""Seconds past its deadline after which a call is cut off from outside."""

_QUIET_S = 0.1
"""Seconds without a byte after which a serial line counts as silent."""

_CLOSING_S = 0.5
"""Seconds a farewell may take."""


class Link:
    """A link to one instrument, used by one thread at a time.

    Parameters
    ----------
    opened
        The session, as the library gave it.

    Notes
    -----
    After any error but a refusal by the instrument the link is out of step: `broken` is set, and
    nothing more is asked over it until it is mended or replaced.
    """

    def __init__(self, opened: Opened) -> None:
        self.resource = opened.name
        self.kind = opened.kind
        self.stream = opened.stream
        self.broken = False
        self._session: Any = opened.session
        self._visa: Any = opened.session.visalib
        self._handle: Any = opened.session.session
        self._closed = threading.Event()
        self._guard = Guard(sockets_of(opened.interface))
        self._timeout_ms: int | None = None

    # Out -----------------------------------------------------------------------------------

    def write(self, text: str, deadline: float) -> None:
        """Send one message.

        Raises
        ------
        SourceError
            `SourceTimeout` or `SourceLost`.
        """
        with self._bounded(deadline, f"sending {text!r}"):
            self._wait_at_most(deadline)
            self._visa.write(self._handle, text.encode("ascii", "replace") + b"\n")

    # In ------------------------------------------------------------------------------------

    def line(self, deadline: float, most: int = _MOST_LINE) -> str:
        """Read one line of text, without its blanks at both ends.

        Empty lines before it are skipped on a stream: the second newline of the reply before.
        """
        with self._bounded(deadline, "reading a line"):
            if not self.stream:
                return self._message(deadline, 4096, most).decode("latin-1").strip(" \t\r\n\0")
            while True:
                text = self._stream_line(deadline, most).decode("latin-1").strip(" \t\r\n\0")
                if text:
                    return text

    def block(self, deadline: float, expect: int = 4096, most: int = MOST_BYTES) -> Block:
        """Read one IEEE 488.2 block.

        Parameters
        ----------
        deadline
            `time.monotonic()` seconds.
        expect
            Bytes probably to come, so that one read does.
        most
            Longest payload accepted.

        Raises
        ------
        BlockError
            Not a block, or not the one it said; the link is out of step then.
        SourceError
            `SourceTimeout` or `SourceLost`.
        """
        with self._bounded(deadline, "reading a block"):
            if self.stream:
                return read_block(_StreamFeed(self, deadline), most)
            return read_block(_LazyMessage(self, deadline, expect), most)

    def values(self, deadline: float, expect: int = 4096, most: int = _MOST_LINE) -> str:
        """Read text that may come as a plain line or inside a block."""
        with self._bounded(deadline, "reading values"):
            if not self.stream:
                message = self._message(deadline, expect, most)
                if message.lstrip().startswith(b"#"):
                    message = read_block(MessageFeed(message.lstrip()), most).payload
                return message.decode("latin-1").strip()
            first = b""
            while not first.strip():
                first = self._take(1, deadline)
            if first == b"#":
                return read_block(_StreamFeed(self, deadline, first), most).payload.decode(
                    "latin-1"
                )
            return (first + self._stream_line(deadline, most)).decode("latin-1").strip()

    def drain(self) -> bytes:
        """Take what has arrived on a stream and was not asked for."""
        if not self.stream or self.broken:
            return b""
        deadline = time.monotonic() + 1.0
        with self._bounded(deadline, "clearing the line"):
            return self._arrived(1 << 16)

    def resume(self) -> None:
        """Take a link up again that was silent: only where both sides still stand.

        The caller makes sure that a late answer does not pass for the next one.
        """
        if not (self._guard.gone or self._guard.overdue or self._closed.is_set()):
            self.broken = False

    def set_speed(self, baud: int) -> None:
        """Set the speed of a serial line."""
        if self.kind == "ASRL":
            with self._bounded(time.monotonic() + 1.0, f"setting the speed to {baud}"):
                self._session.baud_rate = baud

    # Ends ----------------------------------------------------------------------------------

    def freshen(self, deadline: float) -> None:
        """After opening again: drop what is pending from before, as far as this link can.

        A new connection over a network has nothing pending. A serial line may; over USB and
        GPIB a device clear drops it, where the library has one.
        """
        if self.kind == "ASRL":
            while self.drain():
                if time.monotonic() + _QUIET_S > deadline:
                    self.broken = True
                    raise SourceTimeout(f"{self.resource} does not fall silent")
                time.sleep(_QUIET_S)
        elif self.kind in ("USB", "GPIB"):
            with contextlib.suppress(SourceError), self._bounded(deadline, "clearing the device"):
                self._wait_at_most(deadline)
                self._visa.clear(self._handle)
            self.resume()

    def close(self) -> None:
        """Close; safe twice, from any thread, and never longer than a moment."""
        if self._closed.is_set():
            return
        self._closed.set()
        with contextlib.suppress(Exception), self._guard.until(time.monotonic() + _CLOSING_S):
            self._session.close()
        self._guard.close()
        # A farewell that failed leaves the session in the library's table.
        with contextlib.suppress(Exception):
            self._visa.sessions.pop(self._handle, None)

    # Inside --------------------------------------------------------------------------------

    @contextlib.contextmanager
    def _bounded(self, deadline: float, what: str) -> Any:
        """Bound a call, and give its failures the project's names."""
        what = f"{what} ({self.resource})"
        if self._closed.is_set():
            raise SourceLost(f"{what}: the link is closed")
        if self._guard.gone:
            self.broken = True
            raise SourceLost(f"{what}: the other side closed the connection")
        if self.broken or self._guard.overdue:
            self.broken = True
            raise SourceLost(f"{what}: the link is out of step")
        try:
            with self._guard.until(deadline + _OVERSTAY_S):
                yield
        except BlockError:
            self.broken = True
            raise
        except SourceError:
            self.broken = True
            raise
        except Exception as error:  # the library raises bare `Exception` too
            self.broken = True
            raise self._named(error, what) from error

    def _named(self, error: Exception, what: str) -> SourceError:
        if self._guard.gone:
            return SourceLost(f"{clean(what)}: the other side closed the connection")
        if self._guard.overdue:
            return SourceTimeout(f"{clean(what)}: no complete answer in time")
        return translate(error, clean(what))

    def _wait_at_most(self, deadline: float) -> None:
        """Tell the library how long the next call may wait; a new figure only where it matters.

        The figure is rounded up to 10 ms steps: setting it costs as much as a small read.
        """
        left = deadline - time.monotonic()
        if left <= 0.0:
            raise SourceTimeout(f"no complete answer from {self.resource} in time")
        steps_ms = max(10, int(left * 100.0 + 1.0) * 10)
        if steps_ms != self._timeout_ms:
            self._session.timeout = steps_ms
            self._timeout_ms = steps_ms

    def _read(self, count: int) -> tuple[bytes, bool]:
        """One read of the library; the flag says whether END closed the message."""
        status_full = _status_full()
        with self._visa.ignore_warning(self._handle, status_full):
            data, status = self._visa.read(self._handle, count)
        # Over USB the library says END after every read; a full read may have more behind it.
        ended = status != status_full and len(data) < count
        return bytes(data), ended

    def _take(self, count: int, deadline: float) -> bytes:
        """Exactly `count` bytes of a stream."""
        got = bytearray()
        while len(got) < count:
            self._wait_at_most(deadline)
            try:
                data, _ = self._read(min(count - len(got), _CHUNK))
            except Exception as error:
                if got and isinstance(translate(error, ""), SourceTimeout):
                    raise SourceTimeout(
                        f"{len(got)} of {count} bytes came from {self.resource}, then no more"
                    ) from error
                raise
            got += data
        return bytes(got)

    def _stream_line(self, deadline: float, most: int) -> bytes:
        if self.kind != "SOCKET":
            got = bytearray()
            while not got.endswith(b"\n"):
                got += self._take(1, deadline)
                if len(got) > most:
                    raise BlockError(f"no line end within {most} bytes")
            return bytes(got)
        got = bytearray()
        self._end_at_newline(True)
        try:
            while not got.endswith(b"\n"):
                self._wait_at_most(deadline)
                got += self._read(65536)[0]
                if len(got) > most:
                    raise BlockError(f"no line end within {most} bytes")
        finally:
            self._end_at_newline(False)
        return bytes(got)

    def _end_at_newline(self, wanted: bool) -> None:
        from pyvisa.constants import ResourceAttribute

        self._visa.set_attribute(self._handle, ResourceAttribute.termchar_enabled, wanted)

    def _arrived(self, most: int) -> bytes:
        """What has already arrived on a stream."""
        if self.kind == "ASRL":
            waiting = min(int(self._session.bytes_in_buffer), most)
            return self._read(waiting)[0] if waiting else b""
        self._session.timeout = 0
        self._timeout_ms = 0
        got = bytearray()
        while len(got) <= most:
            wanted = most + 1 - len(got)
            try:
                data, _ = self._read(wanted)
            except Exception as error:
                if isinstance(translate(error, ""), SourceTimeout):
                    break
                raise
            got += data
            if len(data) < wanted:  # given because the line fell quiet
                break
        return bytes(got)

    def _message(self, deadline: float, first: int, most: int) -> bytes:
        """A whole message, to its END."""
        got = bytearray()
        ended = False
        while not ended:
            self._wait_at_most(deadline)
            data, ended = self._read(first if not got else _CHUNK)
            got += data
            if len(got) > most:
                raise BlockError(f"a message goes beyond {most} bytes")
        return bytes(got)


class _StreamFeed:
    """The bytes of a stream, for the block parser."""

    has_end = False

    def __init__(self, link: Link, deadline: float, ahead: bytes = b"") -> None:
        self._link = link
        self._deadline = deadline
        self._ahead = ahead

    def take(self, count: int) -> bytes:
        ahead, self._ahead = self._ahead[:count], self._ahead[count:]
        if len(ahead) == count:
            return ahead
        return ahead + self._link._take(count - len(ahead), self._deadline)

    def rest(self, most: int) -> bytes:
        return self._link._arrived(most)


class _LazyMessage:
    """The bytes of one message, read as they are asked for, up to its END."""

    has_end = True

    def __init__(self, link: Link, deadline: float, expect: int) -> None:
        self._link = link
        self._deadline = deadline
        self._expect = expect
        self._got = bytearray()
        self._ended = False

    def take(self, count: int) -> bytes:
        while len(self._got) < count:
            if self._ended:
                raise BlockError(
                    f"the message ended {count - len(self._got)} bytes short of {count}"
                )
            self._more(count - len(self._got))
        taken = bytes(self._got[:count])
        del self._got[:count]
        return taken

    def rest(self, most: int) -> bytes:
        while not self._ended and len(self._got) <= most:
            self._more(1)
        taken = bytes(self._got[: most + 1])
        self._got.clear()
        return taken

    def _more(self, count: int) -> None:
        """Read on, always for more than is needed: a read that comes back short has met END."""
        self._link._wait_at_most(self._deadline)
        wanted = max(self._expect, count) + 4096
        self._expect = 0
        data, self._ended = self._link._read(min(wanted, _CHUNK))
        self._got += data


def _status_full() -> Any:
    from pyvisa.constants import StatusCode

    return StatusCode.success_max_count_read


def open_link(resource: str, timeout_s: float, *, again: bool = False) -> Link:
    """Open a link.

    Parameters
    ----------
    resource
        A VISA resource.
    timeout_s
        Longest wait.
    again
        True where it was open before: what is not there now is *lost*, not *not found*.

    Raises
    ------
    SourceError
        One of its leaves.
    """
    return Link(open_resource(resource, timeout_s, again=again))
