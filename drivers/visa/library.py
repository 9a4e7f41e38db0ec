"""The VISA library below: loaded when first used, opened within a bounded time, kept quiet."""

from __future__ import annotations

import contextlib
import os
import socket
import threading
import traceback
from dataclasses import dataclass
from typing import Any, Literal

from drivers.contract import SourceError, SourceNotFound, SourceRefused, SourceTimeout, clean
from drivers.visa.bounded import Overdue, bounded
from drivers.visa.faults import translate
from drivers.visa.guard import sockets_of

LinkKind = Literal["SOCKET", "ASRL", "INSTR", "USB", "GPIB"]

_lock = threading.Lock()
_manager: Any = None


@dataclass(frozen=True, slots=True)
class Opened:
    """A session of the library, ready to read and write."""

    name: str
    """The resource, cleaned."""
    kind: LinkKind
    """What kind of link."""
    stream: bool
    """True where nothing marks the end of a message."""
    session: Any
    """The library's resource object."""
    interface: Any
    """What it works on (sockets, a serial port), where the library shows it."""


def manager() -> Any:
    """Give the library's resource manager, loaded once.

    Raises
    ------
    SourceRefused
        The library cannot be loaded.
    """
    global _manager
    with _lock:
        if _manager is None:
            try:
                import pyvisa
                from pyvisa_py.protocols import hislip

                # It prints a remark on standard output when a peer prefers overlapped
                # messages, where only lines of JSON may stand.
                setattr(hislip, "print", lambda *_args, **_named: None)  # noqa: B010
                _manager = pyvisa.ResourceManager("@py")
            except Exception as error:
                raise SourceRefused(
                    f"the VISA library does not load: {clean(str(error))}",
                    "Install the project again with its dependencies.",
                ) from error
        return _manager


def open_resource(resource: str, timeout_s: float, *, again: bool = False) -> Opened:
    """Open a resource in a thread of its own, so that a slow opening has an end too.

    Name look-ups and handshakes inside the library have waits that nothing bounds; an opening
    that comes too late is closed by its own thread.
    """
    shown = clean(resource)
    visa = manager()

    def close(late: Opened) -> None:
        with contextlib.suppress(Exception):
            late.session.close()

    try:
        opened: Opened = bounded(
            lambda: _open(visa, resource, timeout_s), timeout_s + 0.5, too_late=close
        )
    except Overdue as error:
        raise SourceTimeout(
            f"{shown} did not open within {timeout_s:g} s",
            "Check the address, the cable and that the instrument is on.",
        ) from error
    except Exception as error:
        raise _named(error, shown, again) from error
    return opened


def _named(error: Exception, shown: str, again: bool) -> SourceError:
    if isinstance(error, ValueError) and not again:
        return SourceNotFound(f"{shown}: {clean(str(error))}")
    return translate(error, f"opening {shown}", opening=not again)


def _open(visa: Any, resource: str, timeout_s: float) -> Opened:
    from pyvisa.constants import InterfaceType, ResourceAttribute

    try:
        session = visa.open_resource(resource, open_timeout=max(1, int(timeout_s * 1000.0)))
    except Exception as error:
        _close_left_open(error)
        raise
    try:
        held = getattr(session.visalib, "sessions", {}).get(session.session)
        interface = getattr(held, "interface", None)
        for used in sockets_of(interface):
            refused = used.getsockopt(socket.SOL_SOCKET, socket.SO_ERROR)
            if refused:  # the library calls a refused connection open
                raise OSError(refused, os.strerror(refused))
            # Two short messages in a row would wait for a delayed acknowledgement: 40 ms.
            used.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        kind = _kind(session)
        if kind == "SOCKET":
            # Reads give what has come when the line falls quiet, instead of losing it.
            session.set_visa_attribute(ResourceAttribute.suppress_end_enabled, False)
            session.set_visa_attribute(ResourceAttribute.termchar, 10)
        if kind == "ASRL":
            from pyvisa.constants import SerialTermination

            session.set_visa_attribute(ResourceAttribute.asrl_end_in, SerialTermination.none)
        if session.interface_type != InterfaceType.asrl:
            with contextlib.suppress(Exception):
                session.set_visa_attribute(ResourceAttribute.termchar_enabled, False)
    except BaseException:
        with contextlib.suppress(Exception):
            session.close()
        raise
    return Opened(clean(resource), kind, kind in ("SOCKET", "ASRL"), session, interface)


def _close_left_open(error: Exception) -> None:
    """Close the sockets of an opening that failed half way.

    The library leaves them to the garbage collector: only the frames of the failure know them.
    """
    failures: list[BaseException] = [error]
    while failures:
        failure = failures.pop()
        failures += [one for one in (failure.__cause__, failure.__context__) if one is not None]
        for frame, _ in traceback.walk_tb(failure.__traceback__):
            for used in sockets_of(frame.f_locals.get("self")):
                with contextlib.suppress(OSError):
                    used.close()


def _kind(session: Any) -> LinkKind:
    from pyvisa.constants import InterfaceType

    if session.resource_class == "SOCKET":
        return "SOCKET"
    if session.interface_type == InterfaceType.asrl:
        return "ASRL"
    if session.interface_type == InterfaceType.usb:
        return "USB"
    if session.interface_type == InterfaceType.gpib:
        return "GPIB"
    return "INSTR"
