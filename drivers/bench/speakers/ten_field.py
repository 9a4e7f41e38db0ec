"""Speakers of the ten-field numeric preamble: volts-origin, code-origin and signed codes.

Format, type, points, count, x increment, origin, reference, y increment, origin, reference. The
three read alike and mean different things by the last three fields.
"""

from __future__ import annotations

from typing import ClassVar, Literal

import numpy as np
from numpy.typing import NDArray

from drivers.bench.digitiser import CODES, MOST_POINTS, Frame, Settings
from drivers.bench.instrument import ARMED, RUNNING, STOPPED, Instrument
from drivers.bench.scpi import Block, Call, Reply, ScpiError, real

Points = NDArray[np.uint16]
DIVISIONS = 10
"""Of the time axis on the screen."""
SCALE_DIVISIONS = 8
"""Of the voltage axis."""
OTHER_CHANNELS = 4


class TenField(Instrument):
    """What the three forms share."""

    screen_points: ClassVar[int] = 1000
    """Points handed out in the screen's mode, whatever the memory holds."""
    ascii_format: ClassVar[int] = 4
    """What the first field says of ASCII data."""
    sentinels: ClassVar[bool] = False
    """True where codes 0 and 1 and the highest one are kept for holes and clipped samples."""

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
        for channel in range(1, OTHER_CHANNELS + 1):
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


class VoltsOrigin(TenField):
    """`v = (code - y reference) y increment + y origin`; three codes are kept for other uses.

    `DIGitize` holds the instrument until it is done; `SINGle` comes back at once, and the run bit
    of the operation register falls when it is done.
    """

    dialect = "ten-field"
    sentinels = True
    lowest_code = 1

    def reset_dialect(self) -> None:
        """Most significant byte first, unsigned."""
        super().reset_dialect()
        self._least_first = False
        self._unsigned = True

    def add_own(self) -> None:
        """Add the blocking acquisition, the byte order and the memory's depth."""
        add = self.commands.add
        add("DIGitize", self._digitise)
        add("WAVeform:POINts:MODE", self._set_mode)
        add("WAVeform:POINts:MODE?", lambda _: self._mode)
        add("WAVeform:BYTeorder", self._set_order)
        add("WAVeform:BYTeorder?", lambda _: "LSBF" if self._least_first else "MSBF")
        add("WAVeform:UNSigned", self._set_unsigned)
        add("WAVeform:UNSigned?", lambda _: "1" if self._unsigned else "0")
        add("OPERegister:CONDition?", lambda _: "0" if self.state == STOPPED else "8")
        add("OPERation:CONDition?", lambda _: "0" if self.state == STOPPED else "8")
        add("TIMebase:RANGe", lambda call: self.set_record_s(call.number(1e-8, 500.0)))
        add("TIMebase:RANGe?", lambda _: real(self._record_s()))
        add("ACQuire:POINts", self.points_from)
        add("ACQuire:POINts?", lambda _: str(self.settings.points))
        add("ACQuire:COUNt", self.average_from)
        add("ACQuire:COUNt?", lambda _: str(self.count))

    def _digitise(self, call: Call) -> None:
        if call.arguments:
            call.word("CHANnel1")
        self.arm()
        self.wait()

    def waits_for_completion(self) -> bool:
        """A single acquisition is not overlapped here: ``*OPC?`` says 1 at once."""
        return False

    def _set_mode(self, call: Call) -> None:
        self._mode = call.word("NORMal", "RAW", "MAXimum")

    def _set_order(self, call: Call) -> None:
        self._least_first = call.word("LSBFirst", "MSBFirst") == "LSBF"

    def _set_unsigned(self, call: Call) -> None:
        self._unsigned = call.switch()

    def y_scale(self, settings: Settings) -> tuple[float, float, int]:
        """Volts as the origin; the reference is the middle code, 0 when codes are signed."""
        shift = 8 if self._format == "WORD" else 0
        reference = 128 << shift if self._unsigned else 0
        return settings.full_scale_v / (CODES << shift), settings.offset_v, reference

    def encode(self, words: Points) -> bytes:
        """Bytes are words cut off; a clipped sample is code 1 or the highest one."""
        if self._format == "BYTE":
            codes = (words >> 8).astype(np.uint8)
            return (codes if self._unsigned else codes ^ 0x80).tobytes()
        marked = words.copy()
        marked[words <= self.lowest_code << 8] = 1
        marked[words >= (CODES - 1) << 8] = 0xFFFF
        if not self._unsigned:
            marked ^= 0x8000
        return marked.astype("<u2" if self._least_first else ">u2").tobytes()


class CodeOrigin(TenField):
    """`v = (code - y origin - y reference) y increment`, the origin a whole number of codes.

    Memory is read in slices when stopped. No code is kept for clipping.
    """

    dialect = "ten-field-code"
    screen_points = 1200
    ascii_format = 2
    slice_bytes: ClassVar[int] = 250_000
    """Most bytes of one block."""

    def reset_dialect(self) -> None:
        """From the first point on, with no end named."""
        super().reset_dialect()
        self._start, self._stop = 1, 0

    def add_own(self) -> None:
        """Add slices, trigger status and the memory's depth."""
        add = self.commands.add
        add("WAVeform:MODE", self._set_mode)
        add("WAVeform:MODE?", lambda _: self._mode)
        add("WAVeform:STARt", self._set_start)
        add("WAVeform:STARt?", lambda _: str(self._start))
        add("WAVeform:STOP", self._set_stop)
        add("WAVeform:STOP?", lambda _: str(self._stop or self.settings.points))
        add("TRIGger:STATus?", self._trigger_status)
        add("ACQuire:MDEPth", self.points_from)
        add("ACQuire:MDEPth?", lambda _: str(self.settings.points))
        add("ACQuire:AVERages", self.average_from)
        add("ACQuire:AVERages?", lambda _: str(self.count))

    def waits_for_completion(self) -> bool:
        """``*OPC?`` says 1 at once here."""
        return False

    def _set_mode(self, call: Call) -> None:
        self._mode = call.word("NORMal", "RAW", "MAXimum")

    def _set_start(self, call: Call) -> None:
        self._start = call.whole(1, MOST_POINTS)

    def _set_stop(self, call: Call) -> None:
        self._stop = call.whole(1, MOST_POINTS)

    def _trigger_status(self, _: Call) -> str:
        return {RUNNING: "AUTO", ARMED: "WAIT", STOPPED: "STOP"}[self.state]

    def preamble_type(self, _settings: Settings) -> int:
        """Here the second field is the reading mode."""
        return ("NORM", "MAX", "RAW").index(self._mode)

    def panel_offset_v(self) -> float:
        """The panel counts the shift of the trace, the other way."""
        return -self.settings.offset_v

    def offset_from(self, call: Call) -> None:
        """Take a shift of the trace."""
        self.set_to(offset_v=-call.number(-100.0, 100.0))

    def y_scale(self, settings: Settings) -> tuple[float, float, int]:
        """The origin in codes: with reference 127, `low = -(127 + origin) increment`."""
        shift = 8 if self._format == "WORD" else 0
        increment = settings.full_scale_v / (CODES << shift)
        reference = 127 << shift
        return increment, round(-settings.low_v / increment) - reference, reference

    def print_origin(self, origin: float) -> str:
        """A whole number of codes."""
        return str(round(origin))

    def portion(self, words: Points) -> Points:
        """Points from start to stop; more than a block holds is refused."""
        stop = min(self._stop or words.size, words.size)
        width = 2 if self._format == "WORD" else 1
        if self._start > stop:
            raise ScpiError(-222)
        if (stop - self._start + 1) * width > self.slice_bytes:
            raise ScpiError(-223)
        return words[self._start - 1 : stop]

    def portion_points(self, points: int) -> int:
        """Points from start to stop."""
        return max(0, min(self._stop or points, points) - self._start + 1)

    def encode(self, words: Points) -> bytes:
        """Bytes, or words with the least significant byte first."""
        if self._format == "BYTE":
            return (words >> 8).astype(np.uint8).tobytes()
        return words.astype("<u2").tobytes()


class Signed(TenField):
    """`v = code y increment + y origin`, codes in two's complement."""

    dialect = "ten-field-signed"

    def add_own(self) -> None:
        """Add the memory's depth and a state to poll."""
        add = self.commands.add
        add("WAVeform:POINts:MODE", self._set_mode)
        add("WAVeform:POINts:MODE?", lambda _: self._mode)
        add("TRIGger:STATus?", lambda _: "STOP" if self.state == STOPPED else "RUN")
        add("OPERegister:CONDition?", lambda _: "0" if self.state == STOPPED else "8")
        add("TIMebase:RANGe", lambda call: self.set_record_s(call.number(1e-8, 500.0)))
        add("TIMebase:RANGe?", lambda _: real(self._record_s()))
        add("ACQuire:POINts", self.points_from)
        add("ACQuire:POINts?", lambda _: str(self.settings.points))
        add("ACQuire:COUNt", self.average_from)
        add("ACQuire:COUNt?", lambda _: str(self.count))

    def _set_mode(self, call: Call) -> None:
        self._mode = call.word("NORMal", "RAW", "MAXimum")

    def y_scale(self, settings: Settings) -> tuple[float, float, int]:
        """Volts as the origin, no reference."""
        shift = 8 if self._format == "WORD" else 0
        return settings.full_scale_v / (CODES << shift), settings.offset_v, 0

    def encode(self, words: Points) -> bytes:
        """Two's complement, words with the most significant byte first."""
        if self._format == "BYTE":
            return ((words >> 8).astype(np.uint8) ^ 0x80).tobytes()
        return (words ^ 0x8000).astype(">u2").tobytes()
