"""Servers of the tests: a raw socket, HiSLIP, VXI-11 and a serial line, on loopback.

Each carries the same instrument and the same faults. HiSLIP after IVI-6.1, VXI-11 after the
TCP/IP Instrument Protocol specification, revision 1.0, RPC after RFC 5531 and RFC 4506 (numbers
from memory).
"""

from __future__ import annotations

import contextlib
import os
import select
import socket
import struct
import threading
import tty
from collections.abc import Callable
from typing import Self

from tests.drivers.visa.servers.brain import Brain
from tests.drivers.visa.servers.wire import Dropped, Faults, misshapen, put_on

_END = b"\n"


class Server:
    """What all have in common: an instrument, faults, a listener and its threads."""

    after_block = b"\n"

    def __init__(self, brain: Brain) -> None:
        self.brain = brain
        self.faults = Faults()
        self.turn = threading.Lock()
        self.connections = 0
        self._open: set[socket.socket] = set()
        self._closing = False
        self._listen(0)

    resource: str

    def _listen(self, port: int) -> None:
        self._listener = socket.create_server(("127.0.0.1", port))
        self.port = self._listener.getsockname()[1]
        self._thread = threading.Thread(target=self._accept, daemon=True)
        self._thread.start()

    def _accept(self) -> None:
        listener = self._listener
        while True:
            try:
                connection, _ = listener.accept()
            except OSError:
                return
            connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            self._open.add(connection)
            self.connections += 1
            threading.Thread(target=self._serve, args=(connection,), daemon=True).start()

    def _serve(self, connection: socket.socket) -> None:
        with contextlib.suppress(OSError, Dropped, EOFError, struct.error):
            self.converse(connection)
        self._open.discard(connection)
        connection.close()

    def converse(self, connection: socket.socket) -> None:
        raise NotImplementedError

    def go_away(self) -> None:
        """Hang up on everybody and refuse connections, as when switched off."""
        with contextlib.suppress(OSError):
            self._listener.shutdown(socket.SHUT_RDWR)
        self._listener.close()
        self._thread.join(1.0)
        for connection in list(self._open):
            with contextlib.suppress(OSError):
                connection.shutdown(socket.SHUT_RDWR)

    def come_back(self) -> None:
        """Answer again at the same port."""
        self._listen(self.port)

    def answer(self, text: str) -> bytes | None:
        with self.turn:
            return self.brain.message(text)

    def close(self) -> None:
        self.go_away()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()


def exactly(connection: socket.socket, count: int) -> bytes:
    got = b""
    while len(got) < count:
        more = connection.recv(count - len(got))
        if not more:
            raise EOFError
        got += more
    return got


class SocketServer(Server):
    """Lines in, lines and blocks out."""

    @property
    def resource(self) -> str:
        return f"TCPIP::127.0.0.1::{self.port}::SOCKET"

    def converse(self, connection: socket.socket) -> None:
        kept = b""
        while True:
            more = connection.recv(65536)
            if not more:
                return
            *lines, kept = (kept + more).split(b"\n")
            for line in lines:
                reply = self.answer(line.decode("latin-1").strip())
                if reply is None:
                    continue
                fault = self.faults.take(reply)
                short = fault == "short-block"
                end = b"" if short else self.after_block
                put_on(connection, misshapen(fault, reply) + end, fault)


class HislipServer(Server):
    """Synchronous and asynchronous channel, sessions paired by number."""

    overlap = 0

    def __init__(self, brain: Brain) -> None:
        self._sessions = 0
        super().__init__(brain)

    @property
    def resource(self) -> str:
        return f"TCPIP::127.0.0.1::hislip0,{self.port}::INSTR"

    def converse(self, connection: socket.socket) -> None:
        kind, _, _, _ = self._receive(connection)
        if kind == 0:
            self._sessions += 1
            self._send(connection, 1, self.overlap, (0x0100 << 16) | self._sessions)
            self._synchronous(connection)
        elif kind == 17:
            self._send(connection, 18, 0, 0x4558)
            self._asynchronous(connection)

    def _receive(self, connection: socket.socket) -> tuple[int, int, int, bytes]:
        head = exactly(connection, 16)
        mark, kind, control, parameter, length = struct.unpack("!2sBBIQ", head)
        if mark != b"HS":
            raise EOFError
        return kind, control, parameter, exactly(connection, length)

    def _send(
        self, connection: socket.socket, kind: int, control: int, parameter: int, body: bytes = b""
    ) -> None:
        head = struct.pack("!2sBBIQ", b"HS", kind, control, parameter, len(body))
        connection.sendall(head + body)

    def _synchronous(self, connection: socket.socket) -> None:
        text = b""
        while True:
            kind, control, parameter, body = self._receive(connection)
            if kind == 8:
                self._send(connection, 9, control, 0)
                continue
            text += body
            if kind != 7:
                continue
            message, text = text, b""
            reply = self.answer(message.decode("latin-1").strip())
            if reply is None:
                continue
            fault = self.faults.take(reply)
            shaped = misshapen(fault, reply) + _END
            # Two messages: data first, then the data with END.
            cut = len(shaped) // 3
            raw = b"".join(
                struct.pack("!2sBBIQ", b"HS", number, 0, parameter, len(part)) + part
                for number, part in ((6, shaped[:cut]), (7, shaped[cut:]))
            )
            put_on(connection, raw, fault)

    def _asynchronous(self, connection: socket.socket) -> None:
        while True:
            kind, _, _, body = self._receive(connection)
            if kind == 15:
                self._send(connection, 16, 0, 0, body)
            elif kind == 19:
                self._send(connection, 23, 0, 0)
            elif kind == 21:
                self._send(connection, 22, 0, 0)


class Vxi11Server(Server):
    """The core channel: create link, write, read, clear, destroy link."""

    max_receive = 1 << 20

    @property
    def resource(self) -> str:
        return f"TCPIP::127.0.0.1,{self.port}::inst0::INSTR"

    def converse(self, connection: socket.socket) -> None:
        pending: list[bytes] = []
        fault: list[str] = ["none"]
        while True:
            record = self._record(connection)
            number, _, _, _, _, procedure = struct.unpack_from("!6I", record)
            at = 24
            for _ in range(2):  # credentials and verifier
                _, length = struct.unpack_from("!2I", record, at)
                at += 8 + (length + 3) // 4 * 4
            result, how = self._call(procedure, record[at:], pending, fault)
            if result is None:
                continue
            reply = struct.pack("!6I", number, 1, 0, 0, 0, 0) + result
            raw = struct.pack("!I", 0x80000000 | len(reply)) + reply
            put_on(connection, raw, how)  # type: ignore[arg-type]

    def _record(self, connection: socket.socket) -> bytes:
        got = b""
        while True:
            (mark,) = struct.unpack("!I", exactly(connection, 4))
            got += exactly(connection, mark & 0x7FFFFFFF)
            if mark & 0x80000000:
                return got

    def _call(
        self, procedure: int, body: bytes, pending: list[bytes], fault: list[str]
    ) -> tuple[bytes | None, str]:
        match procedure:
            case 10:
                return struct.pack("!iiII", 0, 7, 0, self.max_receive), "none"
            case 11:
                _, _, _, _, length = struct.unpack_from("!iIIiI", body)
                text = body[20 : 20 + length].decode("latin-1").strip()
                reply = self.answer(text)
                if reply is not None:
                    fault[0] = self.faults.take(reply)
                    pending[:] = [misshapen(fault[0], reply) + _END]  # type: ignore[arg-type]
                return struct.pack("!iI", 0, length), "none"
            case 12:
                return self._read(body, pending, fault)
            case 15:
                pending.clear()
        return struct.pack("!i", 0), "none"

    def _read(
        self, body: bytes, pending: list[bytes], fault: list[str]
    ) -> tuple[bytes | None, str]:
        _, wanted, timeout_ms, _, _, _ = struct.unpack_from("!iIIIii", body)
        if not pending:
            threading.Event().wait(timeout_ms / 1000.0)
            return struct.pack("!iiI", 15, 0, 0), "none"
        if fault[0] == "silence":
            return None, "none"
        data, rest = pending[0][:wanted], pending[0][wanted:]
        pending[:] = [rest] if rest else []
        padded = data + b"\0" * (-len(data) % 4)
        how, fault[0] = fault[0], "none"
        return struct.pack("!iiI", 0, 0 if rest else 4, len(data)) + padded, how


class SerialServer:
    """A serial line: the far end of a pseudo-terminal."""

    after_block = b"\n"

    def __init__(self, brain: Brain) -> None:
        self.brain = brain
        self.faults = Faults()
        self._far, self._near = os.openpty()
        tty.setraw(self._near)
        self.resource = f"ASRL{os.ttyname(self._near)}::INSTR"
        self._stop, self._stopper = os.pipe()
        self._thread = threading.Thread(target=self._serve, daemon=True)
        self._thread.start()

    def sendall(self, raw: bytes) -> None:
        """Write it all, unless the server ends."""
        left = memoryview(raw)
        while left:
            ready, writable, _ = select.select([self._stop], [self._far], [], 5.0)
            if ready or not writable:
                raise Dropped
            left = left[os.write(self._far, left[:1024]) :]

    def setsockopt(self, *_: object) -> None:
        """A line has none."""

    def _serve(self) -> None:
        kept = b""
        while True:
            ready, _, _ = select.select([self._far, self._stop], [], [])
            if self._stop in ready:
                return
            try:
                kept += os.read(self._far, 4096)
            except OSError:
                return
            *lines, kept = kept.split(b"\n")
            for line in lines:
                reply = self.brain.message(line.decode("latin-1").strip())
                if reply is None:
                    continue
                fault = self.faults.take(reply)
                end = b"" if fault == "short-block" else self.after_block
                with contextlib.suppress(Dropped):
                    put_on(self, misshapen(fault, reply) + end, fault)  # type: ignore[arg-type]

    def unplug(self) -> None:
        """Take the line away: what is read or written at the near end fails from now on."""
        self.close()

    def close(self) -> None:
        if self._far < 0:
            return
        os.write(self._stopper, b"x")
        self._thread.join(2.0)
        for number in (self._far, self._near, self._stop, self._stopper):
            os.close(number)
        self._far = -1

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()


Maker = Callable[[Brain], Server | SerialServer]
