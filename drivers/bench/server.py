"""The socket under the simulated instrument: lines in, answers out, on the loopback address only."""

from __future__ import annotations

import contextlib
import socket
import struct
import threading
import time

from drivers.bench.faults import DRIP_BYTES, DRIP_S, Delivery, FaultSwitch
from drivers.bench.instrument import Instrument
from drivers.bench.scpi import LONGEST_MESSAGE

LOOPBACK = "127.0.0.1"
LOOK_UP_S = 0.1
"""How often a waiting thread looks up whether the bench closes."""
MOST_CONNECTIONS = 8
"""More are turned away."""
REBOOT_S = 1.5
"""How long nobody answers while the instrument restarts."""
SEND_BYTES = 1 << 18


class Server:
    """Serve one instrument to whoever connects.

    Parameters
    ----------
    instrument
        Carries out the messages, one at a time.
    faults
        What goes wrong on the wire.
    port
        TCP port; 0 lets the system choose.
    halt
        Set to end every wait.

    Raises
    ------
    OSError
        The port cannot be had.
    """

    def __init__(
        self, instrument: Instrument, faults: FaultSwitch, port: int, halt: threading.Event
    ) -> None:
        self._instrument = instrument
        self._faults = faults
        self._halt = halt
        self._lock = threading.Lock()
        self._connections: dict[socket.socket, threading.Thread] = {}
        self._away_until_s = 0.0
        self._listener = self._listen(port)
        self.port: int = self._listener.getsockname()[1]
        self._thread = threading.Thread(target=self._accept, name="bench-listener", daemon=True)
        self._thread.start()

    @staticmethod
    def _listen(port: int) -> socket.socket:
        listener = socket.socket(socket.AF_INET, socket.SOCK_STREAM)
        try:
            listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
            listener.bind((LOOPBACK, port))
            listener.listen(4)
            listener.settimeout(LOOK_UP_S)
        except OSError:
            listener.close()
            raise
        return listener

    def close(self) -> None:
        """Stop serving; every thread is gone within a second."""
        self._halt.set()
        self._hang_up()
        self._thread.join(1.0)
        self._listener.close()

    def _hang_up(self) -> None:
        with self._lock:
            now = dict(self._connections)
        for connection in now:
            with contextlib.suppress(OSError):
                connection.shutdown(socket.SHUT_RDWR)
        for thread in now.values():
            if thread is not threading.current_thread():
                thread.join(1.0)

    # -- connections --------------------------------------------------------------------------

    def _accept(self) -> None:
        while not self._halt.is_set():
            if self._away_until_s:
                self._stay_away()
                continue
            try:
                connection, _ = self._listener.accept()
            except TimeoutError:
                continue
            except OSError:
                self._halt.wait(LOOK_UP_S)
                continue
            self._welcome(connection)

    def _welcome(self, connection: socket.socket) -> None:
        with self._lock:
            if len(self._connections) >= MOST_CONNECTIONS or self._halt.is_set():
                connection.close()
                return
            connection.settimeout(LOOK_UP_S)
            connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            thread = threading.Thread(
                target=self._serve, args=(connection,), name="bench-connection", daemon=True
            )
            self._connections[connection] = thread
            thread.start()

    def _stay_away(self) -> None:
        """Refuse connections while the instrument restarts, then come back on the same port."""
        self._listener.close()
        while not self._halt.is_set() and time.monotonic() < self._away_until_s:
            self._halt.wait(LOOK_UP_S)
        while not self._halt.is_set():
            try:
                self._listener = self._listen(self.port)
            except OSError:
                self._halt.wait(LOOK_UP_S)
            else:
                break
        self._away_until_s = 0.0

    def _serve(self, connection: socket.socket) -> None:
        with contextlib.suppress(OSError), connection:
            self._converse(connection)
        with self._lock:
            self._connections.pop(connection, None)

    def _converse(self, connection: socket.socket) -> None:
        kept = bytearray()
        while not self._halt.is_set():
            try:
                came = connection.recv(1 << 16)
            except TimeoutError:
                continue
            if not came:
                return
            kept += came
            while (end := kept.find(b"\n")) >= 0:
                message = bytes(kept[:end])
                del kept[: end + 1]
                if not self._answer(connection, message):
                    return
            if len(kept) > LONGEST_MESSAGE:
                self._instrument.status.fail(-223)
                kept.clear()

    def _answer(self, connection: socket.socket, message: bytes) -> bool:
        """Carry out one message and send what it answers; False ends the connection."""
        replies = self._instrument.execute(message)
        if not replies:
            return True
        delivery = self._faults.spoil(replies, self._instrument.render(replies))
        self._halt.wait(delivery.late_s) if delivery.late_s else None
        self._send(connection, delivery)
        match delivery.then:
            case "reset":
                # Lingering for no time makes close() send a reset instead of an orderly end.
                linger = struct.pack("ii", 1, 0)
                connection.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, linger)
            case "reboot":
                self._reboot(connection)
        return not delivery.then

    def _send(self, connection: socket.socket, delivery: Delivery) -> None:
        left = memoryview(delivery.data)
        size = DRIP_BYTES if delivery.drip else SEND_BYTES
        while left and not self._halt.is_set():
            try:
                sent = connection.send(left[:size])
            except TimeoutError:
                continue  # the other end does not read: wait on, but look up
            left = left[sent:]
            if delivery.drip:
                self._halt.wait(DRIP_S)

    def _reboot(self, own: socket.socket) -> None:
        self._away_until_s = time.monotonic() + REBOOT_S
        self._instrument.reboot()
        with self._lock:
            others = [each for each in self._connections if each is not own]
        for connection in others:
            with contextlib.suppress(OSError):
                connection.shutdown(socket.SHUT_RDWR)
