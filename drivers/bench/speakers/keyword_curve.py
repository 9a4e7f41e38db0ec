"""Speaker of the keyword preamble and its curve: `v = (code - YOFF) YMULT + YZERO`.

Errors stand in an event queue that `*ESR?` opens, with positive numbers. Answers carry their
header until `HEADer OFF`. A source that is switched off gives no answer at all.
"""

from __future__ import annotations

from collections import deque
from functools import partial
from typing import ClassVar

import numpy as np

from drivers.bench.digitiser import CODES, MOST_POINTS, Frame, Settings
from drivers.bench.instrument import STOPPED, Instrument
from drivers.bench.scpi import EXECUTION_ERROR, MESSAGES, Block, Call, Reply, ScpiError, real

DIVISIONS = 10
SCALE_DIVISIONS = 8
SOURCE_OFF = 2244
"""Event: the source is not switched on."""
ENCODINGS = ("RIBinary", "RPBinary", "SRIbinary", "SRPbinary", "ASCii")
ORDERS: dict[str, tuple[str, ...]] = {
    "WFMOUTPRE": (
        *("BYT_NR", "BIT_NR", "ENCDG", "BN_FMT", "BYT_OR", "WFID", "NR_PT", "PT_FMT"),
        *("XUNIT", "XINCR", "XZERO", "PT_OFF", "YUNIT", "YMULT", "YOFF", "YZERO"),
    ),
    "WFMPRE": (
        *("BYT_NR", "BIT_NR", "ENCDG", "BN_FMT", "BYT_OR", "NR_PT", "WFID", "PT_FMT"),
        *("XINCR", "PT_OFF", "XZERO", "XUNIT", "YMULT", "YZERO", "YOFF", "YUNIT"),
    ),
}
"""The two preamble queries and the orders in which they give their keywords."""
KEYWORDS = {
    "BYT_Nr": "BYT_NR",
    "BIT_Nr": "BIT_NR",
    "ENCdg": "ENCDG",
    "BN_Fmt": "BN_FMT",
    "BYT_Or": "BYT_OR",
    "WFId": "WFID",
    "NR_Pt": "NR_PT",
    "PT_Fmt": "PT_FMT",
    "XINcr": "XINCR",
    "XZEro": "XZERO",
    "PT_Off": "PT_OFF",
    "XUNit": "XUNIT",
    "YMUlt": "YMULT",
    "YOFf": "YOFF",
    "YZEro": "YZERO",
    "YUNit": "YUNIT",
}


class KeywordCurve(Instrument):
    """The whole record is asked for by first and last point."""

    dialect = "keyword-curve"
    queue = False
    stop_at_first: ClassVar[int] = 2500
    """Last point handed out until another is named."""

    def add_commands(self) -> None:
        """Add the dialect's own commands."""
        self._events: deque[int] = deque()
        self._readable: deque[int] = deque()
        self.reset_dialect()
        add = self.commands.add
        add("HEADer", self._set_header)
        add("HEADer?", lambda _: self._headed("HEADER", str(int(self._header))))
        add("VERBose", self._set_verbose)
        add("*ESR?", self._open_events)
        add("*CLS", self._clear)
        add("EVENT?", lambda _: str(self._next_event()))
        add("EVMsg?", lambda _: self._event_message())
        add("BUSY?", lambda _: self._headed("BUSY", "0" if self.state == STOPPED else "1"))
        self._add_acquisition()
        self._add_data()

    def _add_acquisition(self) -> None:
        add = self.commands.add
        add("ACQuire:STATE", self._set_state)
        add("ACQuire:STATE?", lambda _: self._headed("ACQUIRE:STATE", self._state_number()))
        add("ACQuire:STOPAfter", self._set_stop_after)
        add("ACQuire:STOPAfter?", lambda _: self._headed("ACQUIRE:STOPAFTER", self._stop_after))
        add("ACQuire:MODe", self._set_mode)
        add("ACQuire:MODe?", lambda _: self._headed("ACQUIRE:MODE", self._mode()))
        add("ACQuire:NUMAVg", self.average_from)
        add("ACQuire:NUMAVg?", lambda _: self._headed("ACQUIRE:NUMAVG", str(self.count)))
        add("HORizontal:RECOrdlength", self.points_from)
        add("HORizontal:RECOrdlength?", self._record_length)
        add("HORizontal[:MAIn]:SCAle", self._set_time_scale)
        add("HORizontal[:MAIn]:SCAle?", self._time_scale)
        add("CH<n>:SCAle", self._set_scale)
        add("CH<n>:SCAle?", self._scale)
        add("CH<n>:OFFSet", self.offset_from)
        add("CH<n>:OFFSet?", lambda _: self._headed("CH1:OFFSET", real(self.settings.offset_v)))
        add("CH<n>:COUPling", self.coupling_from)
        add("CH<n>:COUPling?", lambda _: self._headed("CH1:COUPLING", self._coupling()))

    def _add_data(self) -> None:
        add = self.commands.add
        add("DATa:SOUrce", self._set_source)
        add("DATa:SOUrce?", lambda _: self._headed("DATA:SOURCE", f"CH{self._channel}"))
        add("DATa:ENCdg", self._set_encoding)
        add("DATa:ENCdg?", lambda _: self._headed("DATA:ENCDG", self._encoding))
        add("DATa:WIDth", self._set_width)
        add("DATa:WIDth?", lambda _: self._headed("DATA:WIDTH", str(self._width)))
        add("DATa:STARt", self._set_start)
        add("DATa:STARt?", lambda _: self._headed("DATA:START", str(self._start)))
        add("DATa:STOP", self._set_stop)
        add("DATa:STOP?", lambda _: self._headed("DATA:STOP", str(self._stop)))
        add("CURVe?", self._curve)
        for root, name in (("WFMOutpre", "WFMOUTPRE"), ("WFMPre", "WFMPRE")):
            add(f"{root}?", partial(self._preamble, name))
            for node, key in KEYWORDS.items():
                add(f"{root}:{node}?", partial(self._keyword, name, key))

    def reset_dialect(self) -> None:
        """Headers on, signed bytes, the first 2500 points."""
        self._header = True
        self._stop_after = "RUNSTOP"
        self._channel = 1
        self._encoding = "RIB"
        self._width = 1
        self._start, self._stop = 1, self.stop_at_first

    def _headed(self, header: str, value: str) -> str:
        return f":{header} {value}" if self._header else value

    def _set_header(self, call: Call) -> None:
        self._header = call.switch()

    def _set_verbose(self, call: Call) -> None:
        call.switch()  # taken, and without effect: headers are always long here

    # -- events -------------------------------------------------------------------------------

    def note(self, code: int) -> None:
        """Keep an error as an event, with a positive number."""
        super().note(code)
        self._events.append(abs(code))

    def _open_events(self, _: Call) -> str:
        self._readable = deque(self._events)
        self._events.clear()
        return str(self.status.read_events())

    def _clear(self, _: Call) -> None:
        self.status.clear()
        self._events.clear()
        self._readable.clear()

    def _next_event(self) -> int:
        if self._readable:
            return self._readable.popleft()
        return 1 if self._events else 0

    def _event_message(self) -> str:
        code = self._next_event()
        words = {0: "No events to report", 1: "No events to report - new events pending *ESR?"}
        words[SOURCE_OFF] = "Source waveform is not active"
        return f'{code},"{words.get(code) or MESSAGES.get(-code, "Event")}"'

    # -- acquisition --------------------------------------------------------------------------

    def _set_state(self, call: Call) -> None:
        if call.word("RUN", "STOP", "ON", "OFF", "1", "0") not in ("RUN", "ON", "1"):
            self.stop()
        elif self._stop_after == "SEQUENCE":
            self.arm()
        else:
            self.run()

    def _state_number(self) -> str:
        return "0" if self.state == STOPPED else "1"

    def _set_stop_after(self, call: Call) -> None:
        word = call.word("RUNSTop", "SEQuence")
        self._stop_after = {"RUNST": "RUNSTOP", "SEQ": "SEQUENCE"}[word]

    def _set_mode(self, call: Call) -> None:
        mode = call.word("SAMple", "AVErage", "PEAKdetect")
        self.set_to(peak=mode == "PEAK")
        self.set_averaging(mode == "AVE")

    def _mode(self) -> str:
        if self.settings.peak:
            return "PEAKDETECT"
        return "AVERAGE" if self.averaging else "SAMPLE"

    def _record_length(self, _: Call) -> str:
        return self._headed("HORIZONTAL:RECORDLENGTH", str(self.settings.points))

    def _set_time_scale(self, call: Call) -> None:
        self.set_record_s(DIVISIONS * call.number(1e-9, 50.0))

    def _time_scale(self, _: Call) -> str:
        seconds = self.settings.interval_s * self.settings.points / DIVISIONS
        return self._headed("HORIZONTAL:SCALE", real(seconds))

    def _set_scale(self, call: Call) -> None:
        self.set_to(full_scale_v=SCALE_DIVISIONS * call.number(1e-3, 100.0))

    def _scale(self, _: Call) -> str:
        return self._headed("CH1:SCALE", real(self.settings.full_scale_v / SCALE_DIVISIONS))

    def _coupling(self) -> str:
        return "AC" if self.settings.ac else "DC"

    # -- data ---------------------------------------------------------------------------------

    def _set_source(self, call: Call) -> None:
        self._channel = int(call.word("CH1", "CH2", "CH3", "CH4")[-1])

    def _set_encoding(self, call: Call) -> None:
        self._encoding = call.word(*ENCODINGS)

    def _set_width(self, call: Call) -> None:
        self._width = call.whole(1, 2)

    def _set_start(self, call: Call) -> None:
        self._start = call.whole(1, MOST_POINTS)

    def _set_stop(self, call: Call) -> None:
        self._stop = call.whole(1, MOST_POINTS)

    def _check_source(self) -> None:
        if self._channel != 1:
            self.status.events |= EXECUTION_ERROR
            self._events.append(SOURCE_OFF)
            raise ScpiError(0)

    def _fields(self, settings: Settings) -> dict[str, str]:
        unsigned = "RP" in self._encoding
        shift = 8 * (self._width - 1)
        points = max(0, min(self._stop, settings.points) - self._start + 1)
        coupling = "AC" if settings.ac else "DC"
        return {
            "BYT_NR": str(self._width),
            "BIT_NR": str(8 * self._width),
            "ENCDG": "ASC" if self._encoding == "ASC" else "BIN",
            "BN_FMT": "RP" if unsigned else "RI",
            "BYT_OR": "LSB" if self._encoding.startswith("S") else "MSB",
            "WFID": f'"Ch1, {coupling} coupling, {self._mode().lower()} mode"',
            "NR_PT": str(points),
            "PT_FMT": "ENV" if settings.peak else "Y",
            "XUNIT": '"s"',
            "XINCR": real(settings.interval_s),
            "XZERO": real(-0.5 * settings.interval_s * settings.points),
            "PT_OFF": "0",
            "YUNIT": '"V"',
            "YMULT": real(settings.full_scale_v / (CODES << shift)),
            "YOFF": real(float(128 << shift) if unsigned else 0.0),
            "YZERO": real(settings.offset_v),
        }

    def _preamble(self, name: str, _: Call) -> str:
        self._check_source()
        fields = self._fields(self.described())
        if not self._header:
            return ";".join(fields[key] for key in ORDERS[name])
        return f":{name}:" + ";".join(f"{key} {fields[key]}" for key in ORDERS[name])

    def _keyword(self, name: str, key: str, _: Call) -> str:
        self._check_source()
        return self._headed(f"{name}:{key}", self._fields(self.described())[key])

    def _curve(self, _: Call) -> Reply:
        self._check_source()
        frame = self.frame()
        text = ":CURVE " if self._header else ""
        if self._encoding == "ASC":
            return text + ",".join(str(code) for code in self._codes(frame))
        return Block(self._encode(frame), before=text.encode(), digits=self._count_digits(frame))

    def _codes(self, frame: Frame) -> list[int]:
        words = frame.words[self._start - 1 : self._stop]
        codes = (words >> 8 if self._width == 1 else words).astype(np.int32)
        middle: list[int] = (codes - (128 << 8 * (self._width - 1))).tolist()
        return middle

    def _encode(self, frame: Frame) -> bytes:
        words = frame.words[self._start - 1 : self._stop]
        if "RP" not in self._encoding:
            words = words ^ np.uint16(0x8000)
        if self._width == 1:
            return (words >> 8).astype(np.uint8).tobytes()
        return words.astype("<u2" if self._encoding.startswith("S") else ">u2").tobytes()

    def _count_digits(self, frame: Frame) -> int:
        return len(str(self._width * frame.words[self._start - 1 : self._stop].size))
