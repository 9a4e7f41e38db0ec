"""A USB test and measurement device without USB: a backend for the library that drives the bus.

After the USBTMC specification, revision 1.0, and chapter 9 of USB 2.0 (numbers from memory).
"""

from __future__ import annotations

import errno
import struct
import threading
import time
from types import SimpleNamespace
from typing import Any

import usb.backend
import usb.core

from tests.drivers.visa.servers.brain import Brain
from tests.drivers.visa.servers.wire import Faults, misshapen

VENDOR, PRODUCT, SERIAL = 0x1209, 0x0001, "SN0001"
OUT, IN = 0x02, 0x82
PACKET = 512


class UsbInstrument(usb.backend.IBackend):  # type: ignore[misc]
    """One device on an invented bus.

    Parameters
    ----------
    brain
        The instrument behind it.
    """

    resource = f"USB0::{VENDOR}::{PRODUCT}::{SERIAL}::0::INSTR"

    def __init__(self, brain: Brain) -> None:
        self.brain = brain
        self.faults = Faults()
        self.plugged = True
        self._text = b""
        self._reply = b""
        self._transfer = b""
        self._silent = False

    # What the bus library asks of a backend ---------------------------------------------------

    def enumerate_devices(self):
        return iter(["device"] if self.plugged else [])

    def get_device_descriptor(self, dev: Any) -> SimpleNamespace:
        return SimpleNamespace(
            bLength=18, bDescriptorType=1, bcdUSB=0x200, bDeviceClass=0, bDeviceSubClass=0,
            bDeviceProtocol=0, bMaxPacketSize0=64, idVendor=VENDOR, idProduct=PRODUCT,
            bcdDevice=0x100, iManufacturer=0, iProduct=0, iSerialNumber=1, bNumConfigurations=1,
            address=1, bus=1, port_number=1, port_numbers=(1,), speed=3,
        )  # fmt: skip

    def get_configuration_descriptor(self, dev: Any, config: int) -> SimpleNamespace:
        if config:
            raise IndexError
        return SimpleNamespace(
            bLength=9, bDescriptorType=2, wTotalLength=32, bNumInterfaces=1,
            bConfigurationValue=1, iConfiguration=0, bmAttributes=0x80, bMaxPower=50,
            extra_descriptors=b"",
        )  # fmt: skip

    def get_interface_descriptor(self, dev: Any, intf: int, alt: int, config: int):
        if intf or alt:
            raise IndexError
        return SimpleNamespace(
            bLength=9, bDescriptorType=4, bInterfaceNumber=0, bAlternateSetting=0,
            bNumEndpoints=2, bInterfaceClass=0xFE, bInterfaceSubClass=3, bInterfaceProtocol=1,
            iInterface=0, extra_descriptors=b"",
        )  # fmt: skip

    def get_endpoint_descriptor(self, dev: Any, ep: int, intf: int, alt: int, config: int):
        return SimpleNamespace(
            bLength=7, bDescriptorType=5, bEndpointAddress=(OUT, IN)[ep], bmAttributes=2,
            wMaxPacketSize=PACKET, bInterval=0, bRefresh=0, bSynchAddress=0,
            extra_descriptors=b"",
        )  # fmt: skip

    def open_device(self, dev: Any) -> str:
        self._present()
        return "handle"

    def close_device(self, dev_handle: Any) -> None:
        """Nothing to give back."""

    def get_configuration(self, dev_handle: Any) -> int:
        return 1

    def set_configuration(self, dev_handle: Any, config_value: int) -> None:
        """There is one only."""

    def claim_interface(self, dev_handle: Any, intf: int) -> None:
        """Nobody else has it."""

    def release_interface(self, dev_handle: Any, intf: int) -> None:
        """Nobody else wants it."""

    def is_kernel_driver_active(self, dev_handle: Any, intf: int) -> bool:
        return False

    def ctrl_transfer(self, dev_handle, bmRequestType, bRequest, wValue, wIndex, data, timeout):
        self._present()
        if bRequest == 6 and wValue >> 8 == 3:  # a string
            text = struct.pack("<H", 0x409) if wValue & 0xFF == 0 else SERIAL.encode("utf-16-le")
            return self._fill(data, bytes([len(text) + 2, 3]) + text)
        if bRequest == 7:  # capabilities
            return self._fill(data, bytes([1]) + bytes(13) + bytes([0b100]) + bytes(9))
        return self._fill(data, bytes([0x81]) + bytes(7))  # no transfer in progress

    def bulk_write(self, dev_handle, ep, intf, data, timeout):
        self._present()
        raw = bytes(data)
        kind, tag, _, size, attributes = struct.unpack_from("<BBBxLB", raw)
        if kind == 1:
            self._text += raw[12 : 12 + size]
            if attributes & 1:
                self._carry_out()
        elif kind == 2:
            part, self._reply = self._reply[:size], self._reply[size:]
            if part:
                head = struct.pack("<BBBxLBxxx", 2, tag, ~tag & 0xFF, len(part), not self._reply)
                self._transfer = head + part + bytes(-len(part) % 4)
        return len(raw)

    def bulk_read(self, dev_handle, ep, intf, buff, timeout):
        self._present()
        if not self._transfer or self._silent:
            self._silent = False
            self._transfer = b""
            time.sleep(min(timeout, 10_000) / 1000.0)
            self._present()
            raise usb.core.USBTimeoutError("Operation timed out", -7, errno.ETIMEDOUT)
        part, self._transfer = self._transfer[: len(buff)], self._transfer[len(buff) :]
        return self._fill(buff, part)

    # The instrument ---------------------------------------------------------------------------

    def unplug(self) -> None:
        """Take the device off the bus."""
        self.plugged = False

    def _present(self) -> None:
        if not self.plugged:
            raise usb.core.USBError(
                "No such device (it may have been disconnected)", -4, errno.ENODEV
            )

    def _fill(self, buffer: Any, data: bytes) -> int:
        count = min(len(buffer), len(data))
        memoryview(buffer).cast("B")[:count] = data[:count]
        return count

    def _carry_out(self) -> None:
        message, self._text = self._text.decode("latin-1").strip(), b""
        reply = self.brain.message(message)
        if reply is None:
            return
        fault = self.faults.take(reply)
        self._silent = fault in ("silence", "slow-drip", "late")
        self._reply = misshapen(fault, reply) + b"\n"
        if fault in ("drop", "reset"):
            threading.Timer(0.0, self.unplug).start()
