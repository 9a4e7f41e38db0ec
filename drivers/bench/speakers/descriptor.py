"""Speaker of the binary descriptor that travels with its data: `v = gain code - offset`.

The descriptor is at least 346 bytes; texts and further arrays may stand between it and the data,
and their lengths are in it.
"""

from __future__ import annotations

import struct
from typing import Literal

import numpy as np

from drivers.bench.digitiser import CODES, Frame
from drivers.bench.scpi import Block, Call, Reply, ScpiError
from drivers.bench.speakers.classic import Classic

LENGTH = 346
NAME = b"DESCRIPTOR"
REMARK = b"simulated bench, no instrument\0\0"
"""A user text between descriptor and data: data do not start where the descriptor ends."""


class Descriptor(Classic):
    """Waveforms come as one block: descriptor, user text, data."""

    dialect = "descriptor"

    def add_commands(self) -> None:
        """Add the format of the block."""
        super().add_commands()
        add = self.commands.add
        add("CORD", self._set_order)
        add("CORD?", lambda _: self.headed("CORD", self._order))
        add("CFMT", self._set_format)
        add("CFMT?", lambda _: self.headed("CFMT", f"DEF9,{self._format},BIN"))
        add("MSIZ?", lambda _: self.headed("MSIZ", str(self.settings.points)))

    def reset_dialect(self) -> None:
        """Most significant byte first, bytes."""
        super().reset_dialect()
        self._order: Literal["HI", "LO"] = "HI"
        self._format: Literal["BYTE", "WORD"] = "BYTE"

    def quantity(self, value: float, unit: str) -> str:
        """In powers of ten; the unit goes with the header."""
        return f"{value:.6E}" if self._header == "OFF" else f"{value:.6E} {unit}"

    def _set_order(self, call: Call) -> None:
        self._order = call.word("HI", "LO")  # type: ignore[assignment]

    def _set_format(self, call: Call) -> None:
        if len(call.arguments) != 3:
            raise ScpiError(-109)
        block, width, coding = (Call((each,), ()) for each in call.arguments)
        block.word("DEF9")
        coding.word("BIN")
        self._format = width.word("BYTE", "WORD")  # type: ignore[assignment]

    def waveform(self, call: Call) -> Reply:
        """Answer with everything, the descriptor alone, or the data alone."""
        part = call.word("ALL", "DESC", "DAT1") if call.arguments else "ALL"
        frame = self.frame()
        data = self._encode(frame)
        payload = {"ALL": self._describe(frame, len(data)) + REMARK + data, "DAT1": data}
        text = "" if self._header == "OFF" else f"C1:WF {part},"
        described = payload.get(part) or self._describe(frame, len(data))
        return Block(described, before=text.encode())

    def _encode(self, frame: Frame) -> bytes:
        words = self.sparse(frame.words) ^ 0x8000
        if self._format == "BYTE":
            return (words >> 8).astype(np.uint8).tobytes()
        return words.astype("<u2" if self._order == "LO" else ">u2").tobytes()

    def _describe(self, frame: Frame, data_bytes: int) -> bytes:
        settings, word = frame.settings, self._format == "WORD"
        points = data_bytes // (2 if word else 1)
        order = "<" if self._order == "LO" else ">"
        made = bytearray(LENGTH)
        made[: len(NAME)] = NAME
        made[16:26] = b"SIMULATED\0"
        # Names of the trade for what stands there: width, byte order, lengths of all parts.
        struct.pack_into(order + "hh", made, 32, int(word), int(self._order == "LO"))
        struct.pack_into(order + "ii", made, 36, LENGTH, len(REMARK))
        struct.pack_into(order + "i", made, 60, data_bytes)
        struct.pack_into(order + "ii", made, 116, points, points)
        struct.pack_into(order + "ii", made, 124, 0, points - 1)
        struct.pack_into(order + "i", made, 136, self.stride())
        struct.pack_into(order + "i", made, 148, settings.average)
        gain = settings.full_scale_v / (CODES << 8 if word else CODES)
        struct.pack_into(order + "ff", made, 156, gain, -settings.offset_v)
        struct.pack_into(order + "h", made, 172, settings.bits)
        struct.pack_into(order + "f", made, 176, settings.interval_s * self.stride())
        start_s = -0.5 * settings.interval_s * settings.points
        struct.pack_into(order + "d", made, 180, start_s)
        struct.pack_into(order + "h", made, 316, 0)
        return bytes(made)
