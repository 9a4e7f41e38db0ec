"""Speaker of the FORMat, TRACe and FETCh subsystems of SCPI-1999: values are volts."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import NDArray

from drivers.bench.digitiser import CODES, Frame
from drivers.bench.instrument import ARMED, Instrument
from drivers.bench.scpi import Block, Call, Reply, ScpiError, real

OVER, UNDER = 9.9e37, -9.9e37
"""What stands for a value above or below the range (SCPI-1999 volume 1, 7.2.1.4 and 7.2.1.5)."""
SWEEPING = 8
"""Bit 3 of the operation status: sweeping (SCPI-1999 volume 1, 9.3)."""
TRACE_NAMES = {"", "CH1", "CHAN1", "CHANNEL1", "TRACE1", "TRAC1", "VOLTAGE1", "(@1)"}


class FormatTrace(Instrument):
    """Idle until initiated; what is fetched is in volts."""

    dialect = "format-trace"

    def add_commands(self) -> None:
        """Add the dialect's own commands."""
        self.reset_dialect()
        self.stand()
        add = self.commands.add
        add("FORMat[:DATA]", self._set_format)
        add("FORMat[:DATA]?", self._format_words)
        add("FORMat:BORDer", self._set_order)
        add("FORMat:BORDer?", lambda _: "SWAP" if self._swapped else "NORM")
        add("INITiate[:IMMediate]", lambda _: self.arm())
        add("INITiate:CONTinuous", self._set_continuous)
        add("ABORt", lambda _: self.stop())
        add("STATus:OPERation:CONDition?", lambda _: str(SWEEPING * (self.state == ARMED)))
        add("FETCh?", self._fetch)
        add("READ?", self._read)
        add("TRACe[:DATA]?", self._trace)
        add("TRACe:POINts?", lambda _: str(self.described().points))
        self._add_sense()

    def _add_sense(self) -> None:
        add = self.commands.add
        add("[SENSe:]VOLTage[:DC]:RANGe[:UPPer]", self._set_range)
        add("[SENSe:]VOLTage[:DC]:RANGe[:UPPer]?", lambda _: real(self.settings.full_scale_v / 2))
        add("[SENSe:]VOLTage[:DC]:RANGe:OFFSet", self.offset_from)
        add("[SENSe:]VOLTage[:DC]:RANGe:OFFSet?", lambda _: real(self.settings.offset_v))
        add("[SENSe:]SWEep:POINts", self._set_points)
        add("[SENSe:]SWEep:POINts?", lambda _: str(self.settings.points))
        add("[SENSe:]SWEep:TINTerval", self._set_interval)
        add("[SENSe:]SWEep:TINTerval?", lambda _: real(self.described().interval_s))
        add("[SENSe:]AVERage:COUNt", self.average_from)
        add("[SENSe:]AVERage:COUNt?", lambda _: str(self.count))
        add("[SENSe:]AVERage[:STATe]", lambda call: self.set_averaging(call.switch()))
        add("[SENSe:]AVERage[:STATe]?", lambda _: str(int(self.averaging)))
        add("INPut:COUPling", self.coupling_from)
        add("INPut:COUPling?", lambda _: "AC" if self.settings.ac else "DC")

    def reset_dialect(self) -> None:
        """ASCII, and most significant byte first."""
        self._format: Literal["ASC", "REAL"] = "ASC"
        self._width = 64
        self._swapped = False

    def _set_format(self, call: Call) -> None:
        if not call.arguments:
            raise ScpiError(-109)
        kind = Call(call.arguments[:1], ()).word("ASCii", "REAL", "INTeger")
        if kind == "INT":
            raise ScpiError(-224)  # whole numbers have no scale here
        width = Call(call.arguments[1:], ()).whole(0, 64) if len(call.arguments) > 1 else 64
        if kind == "REAL" and width not in (32, 64):
            raise ScpiError(-224)
        self._format, self._width = kind, width  # type: ignore[assignment]

    def _format_words(self, _: Call) -> str:
        return "ASC,0" if self._format == "ASC" else f"REAL,{self._width}"

    def _set_order(self, call: Call) -> None:
        self._swapped = call.word("NORMal", "SWAPped") == "SWAP"

    def _set_continuous(self, call: Call) -> None:
        self.run() if call.switch() else self.stop()

    def _set_range(self, call: Call) -> None:
        self.set_to(full_scale_v=2.0 * call.number(4e-3, 400.0))

    def _set_points(self, call: Call) -> None:
        """Here the interval stands when the points are set."""
        interval_s = self.settings.interval_s
        self.points_from(call)
        self.set_to(interval_s=interval_s)

    def _set_interval(self, call: Call) -> None:
        self.set_to(interval_s=call.number(1e-9, 1.0))

    # -- values -------------------------------------------------------------------------------

    def _trace(self, call: Call) -> Reply:
        name = call.text().upper() if call.arguments else ""
        if name not in TRACE_NAMES:
            raise ScpiError(-224)
        return self._values(self.frame())

    def _fetch(self, _: Call) -> Reply:
        self.wait()
        return self._values(self.frame())

    def _read(self, _: Call) -> Reply:
        self.arm()
        self.wait()
        return self._values(self.frame())

    def _values(self, frame: Frame) -> Reply:
        volts = frame.volts()
        volts[frame.words == 0] = UNDER
        volts[frame.words >= (CODES - 1) << 8] = OVER
        if self._format == "ASC":
            return ",".join(f"{v:.9E}" for v in volts)
        return Block(self._encode(volts), digits=len(str(volts.size * self._width // 8)))

    def _encode(self, volts: NDArray[np.float64]) -> bytes:
        order = "<" if self._swapped else ">"
        return volts.astype(f"{order}f{self._width // 8}").tobytes()
