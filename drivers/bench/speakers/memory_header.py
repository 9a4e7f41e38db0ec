"""Speaker whose waveform comes with a header of key and value: `v = code / 25 vertical scale`.

Codes are 16 bits, signed, most significant byte first, and count from zero volts: an offset
is in them already.
"""

from __future__ import annotations

import numpy as np

from drivers.bench.digitiser import CODES
from drivers.bench.instrument import STOPPED, Instrument
from drivers.bench.scpi import Block, Call, Reply, ScpiError, real

CODES_A_DIVISION = 25
TIME_DIVISIONS = 10


class MemoryHeader(Instrument):
    """Header and data are one answer."""

    dialect = "memory-header"

    def add_commands(self) -> None:
        """Add the dialect's own commands."""
        add = self.commands.add
        add("RUN", lambda _: self.run())
        add("SINGle", lambda _: self.arm())
        add("STOP", lambda _: self.stop())
        add("ACQuire<n>:STATe?", lambda _: "1" if self.state == STOPPED else "0")
        add("ACQuire<n>:MEMory?", self._memory)
        add("ACQuire:RECOrdlength", self.points_from)
        add("ACQuire:RECOrdlength?", lambda _: str(self.settings.points))
        add("ACQuire:AVERage", self.average_from)
        add("ACQuire:AVERage?", lambda _: str(self.count))
        add("ACQuire:MODe", self._set_mode)
        add("ACQuire:MODe?", lambda _: "AVER" if self.averaging else "SAMP")
        add("TIMebase:SCALe", self._set_time_scale)
        add("TIMebase:SCALe?", lambda _: real(self._record_s() / TIME_DIVISIONS))
        add("CHANnel<n>:SCALe", self._set_scale)
        add("CHANnel<n>:SCALe?", lambda _: real(self.settings.code_v * CODES_A_DIVISION))
        add("CHANnel<n>:OFFSet", self.offset_from)
        add("CHANnel<n>:OFFSet?", lambda _: real(self.settings.offset_v))
        add("CHANnel<n>:COUPling", self.coupling_from)
        add("CHANnel<n>:COUPling?", lambda _: "AC" if self.settings.ac else "DC")

    def _record_s(self) -> float:
        return self.settings.interval_s * self.settings.points

    def _set_mode(self, call: Call) -> None:
        self.set_averaging(call.word("SAMPle", "AVERage") == "AVER")

    def _set_time_scale(self, call: Call) -> None:
        self.set_record_s(TIME_DIVISIONS * call.number(1e-9, 50.0))

    def _set_scale(self, call: Call) -> None:
        self.set_to(full_scale_v=CODES / CODES_A_DIVISION * call.number(1e-3, 80.0))

    def _memory(self, call: Call) -> Reply:
        if call.suffixes != (1,):
            raise ScpiError(-221)
        frame = self.frame()
        settings = frame.settings
        shift = round(settings.offset_v / settings.code_v) - CODES // 2
        codes = (frame.words >> 8).astype(np.int32) + shift
        head = {
            "Format": "1.0",
            "Source": "CH1",
            "Memory Length": str(codes.size),
            "Vertical Units": "V",
            "Vertical Scale": real(settings.code_v * CODES_A_DIVISION),
            "Vertical Offset": real(settings.offset_v),
            "Coupling": "AC" if settings.ac else "DC",
            "Horizontal Units": "S",
            "Horizontal Scale": real(settings.interval_s * settings.points / TIME_DIVISIONS),
            "Sampling Period": real(settings.interval_s),
        }
        text = "".join(f"{key},{value};" for key, value in head.items()) + "Waveform Data;"
        payload = codes.astype(">i2").tobytes()
        return Block(payload, before=text.encode(), digits=len(str(len(payload))))
