"""The three forms of the ten-field preamble: volts as origin, codes as origin, signed codes."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from drivers.bench.digitiser import CODES, MOST_POINTS, Settings
from drivers.bench.instrument import ARMED, RUNNING, STOPPED
from drivers.bench.scpi import Call, ScpiError, real
from drivers.bench.speakers.ten_field import Points, TenField


class VoltsOrigin(TenField):
    """`v = (code - y reference) y increment + y origin`; three codes are kept for other uses.

    `DIGitize` holds the instrument until it is done; `SINGle` comes back at once, and the run bit
    of the operation register falls when it is done.
    """

    dialect = "ten-field"
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
