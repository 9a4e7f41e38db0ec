"""Frames a second from an instrument over each link, beside a bare socket in the same run.

Run ``python -m tests.benchmarks.visa_frames [--quick]``. It prints and asserts nothing: figures
depend on the machine. Each frame is armed, waited for, described and read; the instrument answers
from replies made beforehand, so that the time is the driver's. The bare socket reads the same bytes
with no library between, and its time is the unit of the ratios.
"""

from __future__ import annotations

import argparse
import resource
import socket
import time

import numpy as np

from drivers.contract import CaptureRequest
from drivers.visa import open_instrument
from tests.drivers.visa.servers.brain import block
from tests.drivers.visa.servers.links import HislipServer, Server, SocketServer, Vxi11Server
from tests.drivers.visa.servers.speakers import TenField

LINKS: dict[str, type[Server]] = {
    "socket": SocketServer,
    "hislip": HislipServer,
    "vxi-11": Vxi11Server,
}


class Ready(TenField):
    """Two frames made beforehand, handed out in turn."""

    def __init__(self, points: int) -> None:
        super().__init__(points=16)
        self.points = points
        self.codes = np.zeros(points, dtype=np.int64)  # only counted
        rng = np.random.default_rng(5)
        wave = 128 + 100 * np.sin(0.01 * np.arange(points))
        frames = [np.round(wave + rng.normal(0, 1, points)).astype("<u2") << 8 for _ in range(2)]
        self.replies = [block(frame.tobytes(), 9) for frame in frames]

    def new_frame(self) -> None:
        """Made beforehand."""

    def data(self) -> bytes:
        """Hand out the next, and keep no record of what was said."""
        self.log.clear()
        return self.replies[self.armed % 2]


def bare(server: SocketServer, size: int, count: int) -> float:
    """Seconds a frame over a socket without any library."""
    with socket.create_connection(("127.0.0.1", server.port)) as link:
        link.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        begun = time.perf_counter()
        for _ in range(count):
            link.sendall(b":SINGle\n:WAVeform:DATA?\n")
            got = 0
            while got < size + 1:
                got += len(link.recv(1 << 20))
        return (time.perf_counter() - begun) / count


def report(points: int, count: int) -> None:
    """Print one line for each link."""
    with SocketServer(Ready(points)) as server:
        server.brain.format = 1  # type: ignore[attr-defined]
        unit = bare(server, 2 * points + 11, count)
    print(f"{points} points: bare socket {1.0 / unit:8.1f} frames/s")
    for name, link in LINKS.items():
        with (
            link(Ready(points)) as server,
            open_instrument(server.resource, dialect="ten-field") as source,
        ):
            source.capture()
            times = []
            for _ in range(count):
                begun = time.perf_counter()
                source.capture(CaptureRequest(timeout_s=10.0))
                times.append(time.perf_counter() - begun)
        mean, worst = float(np.mean(times)), float(np.max(times))
        print(
            f"  {name:8} {1.0 / mean:8.1f} frames/s, median {1e3 * np.median(times):.2f} ms, "
            f"longest {1e3 * worst:.1f} ms, {mean / unit:.2f} bare frames"
        )


def main() -> None:
    """Print the report."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--quick", action="store_true")
    quick = parser.parse_args().quick
    report(10_000, 50 if quick else 500)
    report(1_000_000, 5 if quick else 30)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0
    print(f"peak memory {peak:.0f} MiB, instrument included")


if __name__ == "__main__":
    main()
