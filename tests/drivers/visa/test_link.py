"""The link: opened lazily and in bounded time, quiet, one thread at a time, nothing left behind."""

from __future__ import annotations

import contextlib
import gc
import os
import socket
import subprocess
import sys
import threading
import time

import numpy as np
import pytest

from drivers.contract import (
    CaptureRequest,
    SourceBusy,
    SourceError,
    SourceLost,
    SourceNotFound,
    SourceRefused,
    SourceTimeout,
    WaveformSource,
)
from drivers.visa import open_instrument
from drivers.visa.faults import translate
from drivers.visa.link import open_link
from tests.drivers.visa.servers.links import HislipServer, SerialServer, SocketServer, Vxi11Server
from tests.drivers.visa.servers.speakers import TenField


def soon(seconds: float = 3.0) -> float:
    return time.monotonic() + seconds


def test_importing_the_package_loads_no_library() -> None:
    heavy = "pyvisa", "pyvisa_py", "pydantic", "serial", "usb", "numpy.testing"
    script = f"import sys, drivers.visa; print([m for m in {heavy} if m in sys.modules])"
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "[]"


@pytest.mark.parametrize("kind", ["SOCKET", "hislip", "vxi-11"])
def test_a_refused_port_is_told_at_opening(kind) -> None:
    with socket.create_server(("127.0.0.1", 0)) as taken:
        port = taken.getsockname()[1]
    resource = {
        "SOCKET": f"TCPIP::127.0.0.1::{port}::SOCKET",
        "hislip": f"TCPIP::127.0.0.1::hislip0,{port}::INSTR",
        "vxi-11": f"TCPIP::127.0.0.1,{port}::inst0::INSTR",
    }[kind]
    before = time.monotonic()
    with pytest.raises(SourceNotFound) as caught:
        open_instrument(resource, timeout_s=1.0)
    assert time.monotonic() - before < 2.0
    assert "address" in caught.value.remedy


@pytest.mark.parametrize(
    "resource",
    [
        "ASRL/dev/no-such-port::INSTR",
        "USB0::0x1234::0x5678::NONE::0::INSTR",
        "TCPIP::no.such.host.invalid::5025::SOCKET",
        "NONSENSE::1",
        "TCPIP::",
        "TCPIP::127.0.0.1::no-port::SOCKET",
        "GPIB0::99::INSTR",
        "\x1b[31mTCPIP::x",
    ],
)
def test_what_is_not_there_is_a_source_error_with_a_remedy(resource) -> None:
    before = time.monotonic()
    with pytest.raises(SourceError) as caught:
        open_instrument(resource, timeout_s=2.0)
    assert time.monotonic() - before < 3.0
    assert caught.value.remedy
    assert "\x1b" not in str(caught.value)


@pytest.mark.parametrize("kind", ["hislip", "vxi-11"])
def test_a_peer_that_never_shakes_hands_is_given_up(kind) -> None:
    with socket.create_server(("127.0.0.1", 0)) as mute:
        port = mute.getsockname()[1]
        resource = {
            "hislip": f"TCPIP::127.0.0.1::hislip0,{port}::INSTR",
            "vxi-11": f"TCPIP::127.0.0.1,{port}::inst0::INSTR",
        }[kind]
        before = time.monotonic()
        with pytest.raises(SourceTimeout):
            open_instrument(resource, timeout_s=0.5)
        assert time.monotonic() - before < 1.5
        time.sleep(0.1)
        shaken, _ = mute.accept()
        shaken.close()
        time.sleep(0.3)  # the abandoned opening ends by itself


def test_nothing_is_printed_when_things_go_wrong() -> None:
    """Standard output may carry lines of JSON only."""
    script = """
import contextlib
from drivers.contract import SourceError
from drivers.visa import open_instrument
from tests.drivers.visa.servers.links import HislipServer
from tests.drivers.visa.servers.speakers import TenField
with contextlib.suppress(SourceError):
    open_instrument("TCPIP::127.0.0.1::hislip0,1::INSTR", timeout_s=0.5)
HislipServer.overlap = 1  # the library below has a remark on that
with HislipServer(TenField()) as server, open_instrument(server.resource) as source:
    source.capture()
"""
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, check=True
    )
    assert done.stdout == ""
    assert done.stderr == ""


def test_an_instrument_is_a_source_of_waveforms() -> None:
    with SocketServer(TenField()) as server:
        source = open_instrument(server.resource)
        assert isinstance(source, WaveformSource)
        source.close()
        source.close()
        with pytest.raises(SourceLost):
            source.capture()


@pytest.mark.parametrize("link", [SocketServer, HislipServer, Vxi11Server])
def test_two_threads_take_turns_and_both_read_right(link) -> None:
    """Two threads on one session of the library read each other's answers."""
    wrong: list[str] = []

    class Marked(TenField):
        """Every frame is a step at a place of its own."""

        def new_frame(self) -> None:
            super().new_frame()
            self.codes = np.full(self.points, 30)
            self.codes[self.armed % self.points :] = 200

    with link(Marked(points=300)) as server, open_instrument(server.resource) as source:

        def many() -> None:
            for _ in range(25):
                try:
                    samples = source.capture(CaptureRequest(timeout_s=10.0)).samples
                except SourceError as error:
                    wrong.append(str(error))
                    continue
                if samples.size != 300 or len(set(samples)) != 2:
                    wrong.append(f"{samples.size} samples, {set(samples)}")

        threads = [threading.Thread(target=many) for _ in range(2)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
    assert wrong == []


def test_a_source_can_be_closed_from_another_thread_while_it_waits() -> None:
    with SocketServer(TenField()) as server:
        source = open_instrument(server.resource)
        source.capture()
        server.faults.put("silence")
        failed: list[SourceError] = []

        def wait() -> None:
            try:
                source.capture(CaptureRequest(timeout_s=8.0))
            except SourceError as error:
                failed.append(error)

        thread = threading.Thread(target=wait)
        thread.start()
        time.sleep(0.2)
        before = time.monotonic()
        source.close()
        thread.join()
        assert time.monotonic() - before < 4.0
        assert failed


def test_settings_are_put_back_even_when_a_waiting_capture_is_ended() -> None:
    brain = TenField()
    with SocketServer(brain) as server:
        source = open_instrument(server.resource, dialect="ten-field")
        source.capture()
        brain.settings[":ACQuire:COUNt"] = "7"
        source.capture(CaptureRequest(average=16))
        assert brain.settings[":ACQuire:COUNt"] == "16"
        server.faults.put("silence")

        def wait() -> None:
            with contextlib.suppress(SourceError):
                source.capture(CaptureRequest(timeout_s=8.0, average=16))

        thread = threading.Thread(target=wait)
        thread.start()
        time.sleep(0.2)
        source.close()
        thread.join()
        assert brain.settings[":ACQuire:COUNt"] == "7"


@pytest.mark.parametrize("link", [SocketServer, HislipServer, Vxi11Server, SerialServer])
def test_nothing_is_left_behind_when_a_source_is_closed(link) -> None:
    def descriptors() -> int:
        gc.collect()
        return len(os.listdir("/proc/self/fd"))

    with link(TenField(points=50)) as server:
        with open_instrument(server.resource, dialect="ten-field") as source:
            source.capture()
        time.sleep(0.1)
        before, threads = descriptors(), threading.active_count()
        for _ in range(5):
            with open_instrument(server.resource, dialect="ten-field") as source:
                source.capture()
        time.sleep(0.3)
        assert descriptors() <= before
        assert threading.active_count() <= threads


def test_a_flood_without_a_line_end_is_cut_off() -> None:
    def flood(listener: socket.socket) -> None:
        connection, _ = listener.accept()
        with connection:
            try:
                while True:
                    connection.sendall(b"x" * 65536)
            except OSError:
                return

    with socket.create_server(("127.0.0.1", 0)) as listener:
        thread = threading.Thread(target=flood, args=(listener,), daemon=True)
        thread.start()
        with pytest.raises(SourceError):
            open_instrument(f"TCPIP::127.0.0.1::{listener.getsockname()[1]}::SOCKET", timeout_s=1.0)
        thread.join(3.0)
        assert not thread.is_alive()


def test_bytes_that_were_not_asked_for_are_drained() -> None:
    with socket.create_server(("127.0.0.1", 0)) as listener:
        link = open_link(f"TCPIP::127.0.0.1::{listener.getsockname()[1]}::SOCKET", 1.0)
        connection, _ = listener.accept()
        with connection:
            connection.sendall(b"left over\nmore")
            time.sleep(0.1)
            assert link.drain() == b"left over\nmore"
            assert link.drain() == b""
            connection.sendall(b"an answer\n")
            assert link.line(soon()) == "an answer"
            link.close()


def test_a_link_out_of_step_is_not_asked_again() -> None:
    with socket.create_server(("127.0.0.1", 0)) as listener:
        link = open_link(f"TCPIP::127.0.0.1::{listener.getsockname()[1]}::SOCKET", 1.0)
        connection, _ = listener.accept()
        with connection:
            with pytest.raises(SourceTimeout):
                link.line(soon(0.05))
            connection.sendall(b"late\n")
            with pytest.raises(SourceLost, match="out of step"):
                link.line(soon())
            link.close()


@pytest.mark.parametrize(
    ("error", "kind"),
    [
        (TimeoutError("slow"), SourceTimeout),
        (ConnectionResetError(104, "reset"), SourceLost),
        (BrokenPipeError(32, "pipe"), SourceLost),
        (OSError(16, "Device or resource busy"), SourceBusy),
        (OSError(13, "Permission denied"), SourceRefused),
        (PermissionError(13, "Permission denied"), SourceRefused),
        (OSError(5, "Input/output error"), SourceLost),
        (OSError(19, "No such device"), SourceLost),
        (RuntimeError("Connection was dropped by server."), SourceLost),
        (Exception("could not connect: StatusCode.error_timeout"), SourceLost),
        (AssertionError(), SourceLost),
    ],
)
def test_every_failure_below_becomes_a_leaf_with_a_remedy(error, kind) -> None:
    named = translate(error, "reading")
    assert type(named) is kind
    assert named.remedy
    assert str(named)


def test_each_status_of_the_library_has_a_leaf() -> None:
    from pyvisa.constants import StatusCode
    from pyvisa.errors import VisaIOError

    kinds = {
        StatusCode.error_timeout: SourceTimeout,
        StatusCode.error_connection_lost: SourceLost,
        StatusCode.error_io: SourceLost,
        StatusCode.error_resource_busy: SourceBusy,
        StatusCode.error_resource_locked: SourceBusy,
    }
    for status in StatusCode:
        if status < 0:
            named = translate(VisaIOError(status), "reading")
            assert type(named) is kinds.get(status, type(named))
            assert isinstance(named, SourceError)
            assert named.remedy
    assert type(translate(VisaIOError(StatusCode.error_resource_not_found), "", opening=True)) is (
        SourceNotFound
    )
