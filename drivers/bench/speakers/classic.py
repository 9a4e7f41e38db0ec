"""What the two speakers of short four-letter commands share: headers in answers, sparsing, trigger.

Commands of this family are not SCPI: no path is inherited from one command to the next, a channel
stands as a prefix (`C1:`), and errors stand in registers.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from drivers.bench.digitiser import MOST_POINTS
from drivers.bench.instrument import RUNNING, STOPPED, Instrument
from drivers.bench.scpi import Call, Reply, ScpiError

CODES_A_DIVISION = 25
DIVISIONS = 10
"""Of the time axis."""
UNKNOWN_HEADER = 1
"""In the command error register."""


class Classic(Instrument):
    """Shared by `descriptor` and `vdiv-text`."""

    queue = False

    def add_commands(self) -> None:
        """Add what both have."""
        self.reset_dialect()
        self._command_error = 0
        self._new_frame = True
        add = self.commands.add
        add("CHDR", self._set_header)
        add("CHDR?", lambda _: self.headed("CHDR", self._header))
        add("CMR?", self._read_command_error)
        add("EXR?", lambda _: "0")
        add("TRMD", self._set_trigger)
        add("TRMD?", lambda _: self.headed("TRMD", self._trigger()))
        add("ARM", lambda _: self.arm())
        add("STOP", lambda _: self.stop())
        add("WAIT", lambda _: self.wait())
        add("INR?", lambda _: self.headed("INR", str(self._internal_state())))
        add("WFSU", self._set_sparsing)
        add("WFSU?", lambda _: self.headed("WFSU", self._sparsing_words()))
        add("C<n>:VDIV", self._set_vdiv)
        add("C<n>:VDIV?", lambda _: self.headed("C1:VDIV", self.quantity(self.vdiv_v(), "V")))
        add("C<n>:OFST", self.offset_from)
        add("C<n>:OFST?", lambda _: self.headed("C1:OFST", self.quantity(self._shift(), "V")))
        add("C<n>:CPL", self._set_coupling)
        add("C<n>:CPL?", lambda _: self.headed("C1:CPL", "A1M" if self.settings.ac else "D1M"))
        add("TDIV", lambda call: self.set_record_s(DIVISIONS * call.number(1e-9, 50.0)))
        add("TDIV?", lambda _: self.headed("TDIV", self.quantity(self._tdiv_s(), "S")))
        add("MSIZ", self.points_from)
        add("C<n>:WF?", self._waveform)

    def reset_dialect(self) -> None:
        """Short headers, every point."""
        self._header = "SHORT"
        self._sparsing = {"SP": 0, "NP": 0, "FP": 0, "SN": 0}

    # -- answers ------------------------------------------------------------------------------

    def headed(self, header: str, value: str) -> str:
        """Put the header before a value, unless switched off."""
        return value if self._header == "OFF" else f"{header} {value}"

    def quantity(self, value: float, unit: str) -> str:
        """Print a value, with its unit where headers are on."""
        raise NotImplementedError

    def _set_header(self, call: Call) -> None:
        self._header = call.word("OFF", "SHORT", "LONG")

    def note(self, code: int) -> None:
        """Keep an unknown header in the command error register."""
        super().note(code)
        if code == -113:
            self._command_error = UNKNOWN_HEADER

    def _read_command_error(self, _: Call) -> str:
        code, self._command_error = self._command_error, 0
        return self.headed("CMR", str(code))

    # -- acquisition --------------------------------------------------------------------------

    def _set_trigger(self, call: Call) -> None:
        match call.word("AUTO", "NORM", "SINGLE", "STOP"):
            case "SINGLE":
                self.arm()
            case "STOP":
                self.stop()
            case _:
                self.run()

    def _trigger(self) -> str:
        return {RUNNING: "AUTO", STOPPED: "STOP"}.get(self.state, "SINGLE")

    def arm(self) -> None:
        """Start one acquisition; the new-data bit rises when it is done."""
        super().arm()
        self._new_frame = True

    def _internal_state(self) -> int:
        """Bit 0: a new acquisition is there; reading it clears it."""
        if self.state == RUNNING:
            return 1
        if self.state != STOPPED:
            return 0
        new, self._new_frame = self._new_frame, False
        return int(new)

    def _set_sparsing(self, call: Call) -> None:
        pairs = call.arguments
        if len(pairs) % 2:
            raise ScpiError(-109)
        for name, value in zip(pairs[::2], pairs[1::2], strict=True):
            if name.upper() not in self._sparsing:
                raise ScpiError(-224)
            self._sparsing[name.upper()] = Call((value,), ()).whole(0, MOST_POINTS)

    def _sparsing_words(self) -> str:
        return ",".join(f"{name},{value}" for name, value in self._sparsing.items())

    def sparse(self, words: NDArray[np.uint16]) -> NDArray[np.uint16]:
        """Cut out the points asked for: every SP-th one from FP on, NP of them."""
        chosen = words[self._sparsing["FP"] :: self.stride()]
        return chosen[: self._sparsing["NP"] or None]

    def stride(self) -> int:
        """Every how-manieth point is handed out."""
        return max(1, self._sparsing["SP"])

    # -- front end ----------------------------------------------------------------------------

    def vdiv_v(self) -> float:
        """Volts a division of the frame described."""
        return self.described().code_v * CODES_A_DIVISION

    def _set_vdiv(self, call: Call) -> None:
        self.set_to(full_scale_v=256.0 / CODES_A_DIVISION * call.number(1e-3, 80.0))

    def offset_from(self, call: Call) -> None:
        """Take a shift of the trace: volts in the middle of the screen, the other way."""
        self.set_to(offset_v=-call.number(-100.0, 100.0))

    def _shift(self) -> float:
        return 0.0 - self.described().offset_v

    def _tdiv_s(self) -> float:
        return self.described().interval_s * self.described().points / DIVISIONS

    def _set_coupling(self, call: Call) -> None:
        self.set_to(ac=call.word("D1M", "A1M") == "A1M")

    def _waveform(self, call: Call) -> Reply:
        if call.suffixes != (1,):
            raise ScpiError(-221)
        return self.waveform(call)

    def waveform(self, call: Call) -> Reply:
        """Answer `WF?` of the first channel."""
        raise NotImplementedError
