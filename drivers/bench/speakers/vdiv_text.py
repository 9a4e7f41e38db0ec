"""Speaker whose scale is asked for in words: `v = code vdiv / 25 - offset`, codes signed.

There is no descriptor. Answers carry units with k, M and G; two newlines follow a block; `*OPC?`
answers at once, whatever is under way.
"""

from __future__ import annotations

import numpy as np

from drivers.bench.instrument import ARMED, STOPPED
from drivers.bench.scpi import Block, Call, Reply
from drivers.bench.speakers.classic import Classic

PREFIXES = ((1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""))


def in_thousands(value: float) -> str:
    """Print a count or a rate with k, M or G."""
    scale, prefix = next((each for each in PREFIXES if value >= each[0]), PREFIXES[-1])
    return f"{value / scale:.9g}{prefix}"


class VdivText(Classic):
    """Bytes only."""

    dialect = "vdiv-text"
    block_end = b"\n"

    def add_commands(self) -> None:
        """Add rate, memory and state in words."""
        super().add_commands()
        add = self.commands.add
        add("SARA?", lambda _: self.headed("SARA", self._rate()))
        add("TRDL?", lambda _: self.headed("TRDL", self.quantity(0.0, "S")))
        add("SANU?", lambda _: self.headed("SANU", self._count()))
        add("MSIZ?", lambda _: self.headed("MSIZ", in_thousands(self.settings.points)))
        add("SAST?", lambda _: self.headed("SAST", self._state_word()))
        add("ACQW", self._set_mode)
        add("ACQW?", lambda _: self.headed("ACQW", self._mode()))
        add("AVGA", self.average_from)
        add("AVGA?", lambda _: self.headed("AVGA", str(self.count)))

    def quantity(self, value: float, unit: str) -> str:
        """In powers of ten; the unit goes with the header."""
        return f"{value:.6E}" if self._header == "OFF" else f"{value:.6E}{unit}"

    def waits_for_completion(self) -> bool:
        """``*OPC?`` says 1 at once here."""
        return False

    def _set_mode(self, call: Call) -> None:
        mode = call.word("SAMPLING", "PEAK_DETECT", "AVERAGE")
        self.set_to(peak=mode == "PEAK_DETECT")
        self.set_averaging(mode == "AVERAGE")

    def _mode(self) -> str:
        if self.settings.peak:
            return "PEAK_DETECT"
        return "AVERAGE" if self.averaging else "SAMPLING"

    def _rate(self) -> str:
        return in_thousands(1.0 / self.described().interval_s) + "Sa/s"

    def _count(self) -> str:
        return in_thousands(self.described().points) + "pts"

    def _state_word(self) -> str:
        return {ARMED: "Ready", STOPPED: "Stop"}.get(self.state, "Auto")

    def waveform(self, call: Call) -> Reply:
        """Answer with the codes alone."""
        if call.arguments:
            call.word("DAT2", "ALL")
        codes = (self.sparse(self.frame().words) >> 8).astype(np.uint8) ^ 0x80
        text = "DAT2," if self._header == "OFF" else "C1:WF DAT2,"
        return Block(codes.tobytes(), before=text.encode(), after=self.block_end)
