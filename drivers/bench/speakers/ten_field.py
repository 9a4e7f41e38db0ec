"""What the speakers of the ten-field numeric preamble share.

Format, type, points, count, x increment, origin, reference, y increment, origin, reference. The
three forms of it read alike and mean different things by the last three fields.
"""

from __future__ import annotations

from typing import ClassVar, Literal

import numpy as np
from numpy.typing import NDArray

from drivers.bench.digitiser import CODES, MOST_POINTS, Frame, Settings
from drivers.bench.instrument import STOPPED, Instrument
from drivers.bench.scpi import Block, Call, Reply, ScpiError, real

Points = NDArray[np.uint16]
DIVISIONS = 10
"""Of the time axis on the screen."""
SCALE_DIVISIONS = 8
"""Of the voltage axis."""
CHANNELS = 4
"""Channels that can be named; only the first is switched on."""


class TenField(Instrument):
    """What the three forms share."""

    screen_points: ClassVar[int] = 1000
    """Points handed out in the screen's mode, whatever the memory holds."""
    ascii_format: ClassVar[int] = 4
    """What the first field says of ASCII data."""

    def add_commands(self) -> None:
        """Add the dialect's own commands."""
        self.reset_dialect()
        add = self.commands.add
        add("RUN", lambda _: self.run())
        add("STOP", lambda _: self.stop())
        add("SINGle", lambda _: self.arm())
        self._add_waveform()
        self._add_front_end()
        self.add_own()

    def add_own(self) -> None:
        """Add what only one form has."""

    def reset_dialect(self) -> None:
        """Back to the screen's points, as bytes, of the first channel."""
        self._format: Literal["BYTE", "WORD", "ASC"] = "BYTE"
        self._mode = "NORM"
        self._wanted = 0
        self._channel = 1

    def _add_waveform(self) -> None:
        add = self.commands.add
        add("WAVeform:SOURce", self._set_source)
        add("WAVeform:SOURce?", lambda _: f"CHAN{self._channel}")
        add("WAVeform:FORMat", self._set_format)
        add("WAVeform:FORMat?", lambda _: self._format)
        add("WAVeform:PREamble?", self._preamble)
        add("WAVeform:DATA?", self._data)
        add("WAVeform:POINts", self._set_points)
        add("WAVeform:POINts?", lambda _: str(self._stride_and_points(self.described())[1]))
        add("WAVeform:XINCrement?", lambda _: real(self._interval_s(self.described())))
        add("WAVeform:YINCrement?", lambda _: real(self.y_scale(self.described())[0]))
        add("WAVeform:YORigin?", lambda _: real(self.y_scale(self.described())[1]))
        add("WAVeform:YREFerence?", lambda _: f"{self.y_scale(self.described())[2]:d}")

    def _add_front_end(self) -> None:
        add = self.commands.add
        add("CHANnel<n>:RANGe", self._set_range)
        add("CHANnel<n>:RANGe?", lambda _: real(self.settings.full_scale_v))
        add("CHANnel<n>:SCALe", self._set_scale)
        add("CHANnel<n>:SCALe?", lambda _: real(self.settings.full_scale_v / SCALE_DIVISIONS))
        add("CHANnel<n>:OFFSet", self.offset_from)
        add("CHANnel<n>:OFFSet?", lambda _: real(self.panel_offset_v()))
        add("CHANnel<n>:COUPling", self.coupling_from)
        add("CHANnel<n>:COUPling?", lambda _: "AC" if self.settings.ac else "DC")
        add("CHANnel<n>:DISPlay?", lambda call: "1" if call.suffixes == (1,) else "0")
        add("CHANnel<n>:PROBe?", lambda _: real(1.0))
        add("TIMebase:SCALe", lambda call: self.set_record_s(DIVISIONS * call.number(1e-9, 50.0)))
        add("TIMebase:SCALe?", lambda _: real(self._record_s() / DIVISIONS))
        add("ACQuire:TYPE", self._set_type)
        add("ACQuire:TYPE?", lambda _: ("NORM", "PEAK", "AVER")[self.acquisition_type()])
        add("ACQuire:SRATe?", lambda _: real(1.0 / self.settings.interval_s))

    def _record_s(self) -> float:
        return self.settings.interval_s * self.settings.points

    def _set_source(self, call: Call) -> None:
        wanted = call.text().upper()
        for channel in range(1, CHANNELS + 1):
            if wanted in (f"CHAN{channel}", f"CHANNEL{channel}"):
                self._channel = channel
                return
        raise ScpiError(-224)

    def _set_format(self, call: Call) -> None:
        self._format = call.word("BYTE", "WORD", "ASCii")  # type: ignore[assignment]

    def _set_points(self, call: Call) -> None:
        self._wanted = call.whole(1, MOST_POINTS)

    def _set_range(self, call: Call) -> None:
        self.set_to(full_scale_v=call.number(8e-3, 800.0))

    def _set_scale(self, call: Call) -> None:
        self.set_to(full_scale_v=SCALE_DIVISIONS * call.number(1e-3, 100.0))

    def panel_offset_v(self) -> float:
        """Offset as this form's front panel counts it."""
        return self.settings.offset_v

    def _set_type(self, call: Call) -> None:
        kind = call.word("NORMal", "AVERage", "PEAK")
        self.set_to(peak=kind == "PEAK")
        self.set_averaging(kind == "AVER")

    def acquisition_type(self) -> int:
        """Number of the kind of acquisition: normal 0, peak detect 1, average 2."""
        return 1 if self.settings.peak else 2 if self.averaging else 0

    # -- waveform data ------------------------------------------------------------------------

    def from_memory(self) -> bool:
        """Say whether the whole memory is handed out; of a running digitiser it never is."""
        return self._mode in ("RAW", "MAX") and self.state == STOPPED

    def _stride_and_points(self, settings: Settings) -> tuple[int, int]:
        """Every how-manieth point of memory is handed out, and how many that makes."""
        most = settings.points if self.from_memory() else min(self.screen_points, settings.points)
        wanted = min(self._wanted or most, most)
        stride = -(-settings.points // wanted)
        return stride, -(-settings.points // stride)

    def _interval_s(self, settings: Settings) -> float:
        return settings.interval_s * self._stride_and_points(settings)[0]

    def _check_channel(self) -> None:
        if self._channel != 1:
            raise ScpiError(-221)  # only the first channel is switched on

    def preamble_type(self, settings: Settings) -> int:
        """Give the second field: normal 0, peak detect 1, average 2."""
        return 1 if settings.peak else 2 if settings.average > 1 else 0

    def y_scale(self, settings: Settings) -> tuple[float, float, int]:
        """Give y increment, origin and reference for codes as they are handed out."""
        raise NotImplementedError

    def _preamble(self, _: Call) -> Reply:
        self._check_channel()
        settings = self.described()
        number = {"BYTE": 0, "WORD": 1, "ASC": self.ascii_format}[self._format]
        points = self.portion_points(self._stride_and_points(settings)[1])
        increment, origin, reference = self.y_scale(settings)
        fields = [str(number), str(self.preamble_type(settings)), str(points)]
        fields += [str(settings.average), real(self._interval_s(settings))]
        fields += [real(-0.5 * settings.interval_s * settings.points), "0"]
        fields += [real(increment), self.print_origin(origin), str(reference)]
        return ",".join(fields)

    def print_origin(self, origin: float) -> str:
        """Print the y origin."""
        return real(origin)

    def _data(self, _: Call) -> Reply:
        self._check_channel()
        frame = self.frame()
        stride, _points = self._stride_and_points(frame.settings)
        return self.block(self.portion(frame.words[::stride]), frame)

    def portion(self, words: Points) -> Points:
        """Cut out what one query gives."""
        return words

    def portion_points(self, points: int) -> int:
        """How many of the points on offer one query gives."""
        return points

    def block(self, words: Points, frame: Frame) -> Reply:
        """Put points into the format asked for."""
        if self._format == "ASC":
            settings = frame.settings
            word_v = settings.full_scale_v / (CODES << 8)
            volts = settings.low_v + words * word_v
            text = ",".join(f"{v:.12E}" for v in volts)
            return Block(text.encode(), after=self.block_end)
        return Block(self.encode(words), after=self.block_end)

    def encode(self, words: Points) -> bytes:
        """Put points into bytes or words."""
        raise NotImplementedError
