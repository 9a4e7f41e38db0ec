"""A loopback relay to a server that can lose the server's answer at the worst moment."""

from __future__ import annotations

import socket
import threading
from types import TracebackType
from typing import Self


class Proxy:
    """Relays connections; on demand it breaks one off after the server has answered, unheard."""

    def __init__(self, port: int) -> None:
        self._target = port
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.port = int(self._listener.getsockname()[1])
        self.swallowed = 0
        self._trigger = b""
        self._open = True
        self._lock = threading.Lock()
        self._threads = [threading.Thread(target=self._accept, daemon=True)]
        self._threads[0].start()

    def swallow_answer_to(self, word: bytes) -> None:
        """Break off the next connection that sends `word`, once the server has answered it."""
        with self._lock:
            self._trigger = word

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self._open = False
        self._listener.close()

    def _accept(self) -> None:
        while self._open:
            try:
                client, _ = self._listener.accept()
            except OSError:
                return
            relay = threading.Thread(target=self._relay, args=(client,), daemon=True)
            relay.start()

    def _relay(self, client: socket.socket) -> None:
        with client, socket.create_connection(("127.0.0.1", self._target)) as server:
            back = threading.Thread(target=_copy, args=(server, client), daemon=True)
            muted = False
            back.start()
            while data := _receive(client):
                with self._lock:
                    muted = bool(self._trigger) and self._trigger in data
                    if muted:
                        self._trigger = b""
                if muted:
                    client.shutdown(socket.SHUT_WR)  # whatever the server says now is not heard
                    server.sendall(data)
                    server.settimeout(0.5)
                    break
                server.sendall(data)
            if muted:
                threading.Event().wait(0.3)  # time for the server to commit
                self.swallowed += 1


def _receive(peer: socket.socket) -> bytes:
    try:
        return peer.recv(65536)
    except OSError:
        return b""


def _copy(source: socket.socket, target: socket.socket) -> None:
    while data := _receive(source):
        try:
            target.sendall(data)
        except OSError:
            return
