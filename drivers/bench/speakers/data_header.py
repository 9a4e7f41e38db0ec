"""Speaker that puts a header beside each channel's data: first and last instant, points, values.

The interval is `(last - first) / (points - 1)`. REAL is volts; whole numbers take an origin and an
increment that belong to the format set at the moment.
"""

from __future__ import annotations

import numpy as np

from drivers.bench.digitiser import Settings
from drivers.bench.instrument import Instrument
from drivers.bench.scpi import Block, Call, Reply, ScpiError, real

SCALE_DIVISIONS = 10
TIME_DIVISIONS = 10


class DataHeader(Instrument):
    """Formats REAL,32, UINT,8, UINT,16 and ASCii."""

    dialect = "data-header"

    def add_commands(self) -> None:
        """Add the dialect's own commands."""
        self.reset_dialect()
        add = self.commands.add
        add("FORMat[:DATA]", self._set_format)
        add("FORMat[:DATA]?", lambda _: ",".join(map(str, self._format)))
        add("FORMat:BORDer", self._set_order)
        add("FORMat:BORDer?", lambda _: "LSBF" if self._least_first else "MSBF")
        add("RUN", lambda _: self.run())
        add("SINGle", lambda _: self.arm())
        add("STOP", lambda _: self.stop())
        add("CHANnel<n>:DATA?", self._data)
        add("CHANnel<n>:DATA:HEADer?", self._head)
        add("CHANnel<n>:DATA:YINCrement?", lambda call: real(self._y_scale(call)[1]))
        add("CHANnel<n>:DATA:YORigin?", lambda call: real(self._y_scale(call)[0]))
        add("CHANnel<n>:DATA:YRESolution?", self._resolution)
        self._add_front_end()

    def _add_front_end(self) -> None:
        add = self.commands.add
        add("CHANnel<n>:STATe?", lambda call: "1" if call.suffixes == (1,) else "0")
        add("CHANnel<n>:SCALe", self._set_scale)
        add("CHANnel<n>:SCALe?", lambda _: real(self.settings.full_scale_v / SCALE_DIVISIONS))
        add("CHANnel<n>:RANGe", self._set_range)
        add("CHANnel<n>:RANGe?", lambda _: real(self.settings.full_scale_v))
        add("CHANnel<n>:OFFSet", self.offset_from)
        add("CHANnel<n>:OFFSet?", lambda _: real(self.settings.offset_v))
        add("CHANnel<n>:COUPling", self.coupling_from)
        add("CHANnel<n>:COUPling?", lambda _: "AC" if self.settings.ac else "DC")
        add("CHANnel<n>:TYPE", self._set_type)
        add("CHANnel<n>:TYPE?", lambda _: "PDET" if self.settings.peak else "SAMP")
        add("TIMebase:SCALe", self._set_time_scale)
        add("TIMebase:SCALe?", lambda _: real(self._record_s() / TIME_DIVISIONS))
        add("TIMebase:RANGe", lambda call: self.set_record_s(call.number(1e-8, 500.0)))
        add("TIMebase:RANGe?", lambda _: real(self._record_s()))
        add("ACQuire:POINts[:VALue]", self.points_from)
        add("ACQuire:POINts[:VALue]?", lambda _: str(self.settings.points))
        add("ACQuire:SRATe?", lambda _: real(1.0 / self.settings.interval_s))
        add("ACQuire:AVERage:COUNt", self.average_from)
        add("ACQuire:AVERage:COUNt?", lambda _: str(self.count))
        add("CHANnel<n>:ARIThmetics", self._set_arithmetics)
        add("CHANnel<n>:ARIThmetics?", lambda _: "AVER" if self.averaging else "OFF")

    def reset_dialect(self) -> None:
        """ASCII, least significant byte first."""
        self._format: tuple[str, int] = ("ASC", 0)
        self._least_first = True

    def _record_s(self) -> float:
        return self.settings.interval_s * self.settings.points

    def _set_scale(self, call: Call) -> None:
        self.set_to(full_scale_v=SCALE_DIVISIONS * call.number(1e-3, 80.0))

    def _set_range(self, call: Call) -> None:
        self.set_to(full_scale_v=call.number(1e-2, 800.0))

    def _set_time_scale(self, call: Call) -> None:
        self.set_record_s(TIME_DIVISIONS * call.number(1e-9, 50.0))

    def _set_type(self, call: Call) -> None:
        self.set_to(peak=call.word("SAMPle", "PDETect") == "PDET")

    def _set_arithmetics(self, call: Call) -> None:
        self.set_averaging(call.word("OFF", "AVERage") == "AVER")

    def _set_order(self, call: Call) -> None:
        self._least_first = call.word("LSBFirst", "MSBFirst") == "LSBF"

    def _set_format(self, call: Call) -> None:
        if not call.arguments:
            raise ScpiError(-109)
        kind = Call(call.arguments[:1], ()).word("ASCii", "REAL", "UINT")
        width = Call(call.arguments[1:], ()).whole(0, 32) if len(call.arguments) > 1 else 0
        wanted = (kind, width)
        if wanted not in (("ASC", 0), ("REAL", 32), ("UINT", 8), ("UINT", 16)):
            raise ScpiError(-224)
        self._format = wanted

    # -- data ---------------------------------------------------------------------------------

    def _check_channel(self, call: Call) -> None:
        if call.suffixes != (1,):
            raise ScpiError(-221)

    def _head(self, call: Call) -> str:
        self._check_channel(call)
        settings = self.described()
        values = 2 if settings.peak else 1
        points = settings.points // values
        interval_s = settings.interval_s * values
        first_s = -0.5 * settings.interval_s * settings.points
        last_s = first_s + interval_s * (points - 1)
        return f"{real(first_s)},{real(last_s)},{points},{values}"

    def _y_scale(self, call: Call) -> tuple[float, float]:
        """Volts of code 0, and from one code to the next, in the format set at the moment."""
        self._check_channel(call)
        settings = self.described()
        if self._format[0] != "UINT":
            return 0.0, settings.full_scale_v / (1 << settings.bits)
        return settings.low_v, settings.full_scale_v / (1 << self._format[1])

    def _resolution(self, call: Call) -> str:
        self._check_channel(call)
        settings: Settings = self.described()
        return str(settings.bits)

    def _data(self, call: Call) -> Reply:
        self._check_channel(call)
        frame = self.frame()
        order = "<" if self._least_first else ">"
        match self._format:
            case ("ASC", _):
                return ",".join(f"{v:.9E}" for v in frame.volts())
            case ("REAL", _):
                payload = frame.volts().astype(order + "f4").tobytes()
            case (_, 8):
                payload = (frame.words >> 8).astype(np.uint8).tobytes()
            case _:
                payload = frame.words.astype(order + "u2").tobytes()
        return Block(payload, digits=len(str(len(payload))))
