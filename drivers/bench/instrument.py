"""What every speaker has in common: acquisition, common commands, messages carried out.

A speaker is one shape of waveform dialect: it adds its own commands to those of this class.
"""

from __future__ import annotations

import threading
import time
from collections.abc import Callable
from dataclasses import replace
from typing import ClassVar, Literal

from drivers.bench.digitiser import (
    MOST_AVERAGED,
    MOST_POINTS,
    MOST_WORK,
    Converter,
    Frame,
    Settings,
)
from drivers.bench.faults import GAINS, FaultSwitch
from drivers.bench.plant import Wave
from drivers.bench.scpi import (
    MESSAGES,
    OPERATION_COMPLETE,
    Block,
    Call,
    Commands,
    Reply,
    ScpiError,
    Status,
    split,
    take_apart,
)

IDENTITY = "SIMULATED,Bench digitiser ({dialect}),{serial:06d},1.0"

FIRST_COUNT = 8
"""Frames averaged where averaging is switched on and no number was given."""

State = Literal["running", "armed", "stopped"]
RUNNING: State = "running"
ARMED: State = "armed"
STOPPED: State = "stopped"


class Instrument:
    """A digitiser behind a message exchange.

    Parameters
    ----------
    wave
        Gives what stands at the input now.
    converter
        The analog-digital converter.
    settings
        As set at first, and after ``*RST``.
    serial
        Serial number in the identification.
    acquire_s
        Seconds that an acquisition takes; None for as long as its record is.
    faults
        What the instrument gets wrong.
    halt
        Set when the bench closes: every wait ends then.
    """

    dialect: ClassVar[str]
    """The dialect's name."""
    lowest_code: ClassVar[int] = 0
    """Lower rail of the converter, where this dialect keeps codes for other uses."""
    block_end: ClassVar[bytes] = b""
    """What this dialect sends between a block and the message's end."""
    queue: ClassVar[bool] = True
    """False for a dialect whose errors stand in an event register of its own."""

    def __init__(
        self,
        wave: Callable[[], Wave],
        converter: Converter,
        settings: Settings,
        *,
        serial: int,
        acquire_s: float | None,
        faults: FaultSwitch,
        halt: threading.Event,
    ) -> None:
        self._wave = wave
        self._converter = converter
        self._initial = settings
        self._serial = serial
        self._acquire_s = acquire_s
        self._faults = faults
        self._clock = time.monotonic
        self._halt = halt
        self.lock = threading.RLock()
        self.status = Status()
        self.settings = settings
        self.averaging = False
        self.count = FIRST_COUNT
        self._state: State = RUNNING
        self._frame: Frame | None = None
        self._pending: Frame | None = None
        self._due_s = 0.0
        self.commands = Commands()
        self._add_common()
        self.add_commands()
        self._first_state: State = self._state

    # -- for the speakers ---------------------------------------------------------------------

    def add_commands(self) -> None:
        """Add the dialect's own commands."""
        raise NotImplementedError

    def reset_dialect(self) -> None:
        """Put the dialect's own settings back to their first state."""

    @property
    def state(self) -> State:
        """Whether the digitiser acquires on and on, waits for one acquisition, or stands."""
        if self._state == ARMED and self._clock() >= self._due_s:
            self._frame, self._pending = self._pending, None
            self._state = STOPPED
        return self._state

    def run(self) -> None:
        """Acquire on and on."""
        self._state = RUNNING

    def stop(self) -> None:
        """Stop; what is in memory stays. An acquisition under way is given up."""
        if self.state == RUNNING:
            self._frame = self._acquire()
        self._state, self._pending = STOPPED, None

    def arm(self) -> None:
        """Start one acquisition; until it is done the frame of before stays in memory."""
        if self.settings.points * self.settings.average > MOST_WORK:
            raise ScpiError(-221)
        self._pending = self._acquire()
        length = self.settings.interval_s * self.settings.points * self.settings.average
        takes = length if self._acquire_s is None else self._acquire_s
        self._due_s = self._clock() + takes
        self._state = ARMED

    def wait(self) -> None:
        """Wait until an acquisition under way is done."""
        while self.state == ARMED and not self._halt.is_set():
            self._halt.wait(max(0.0005, min(0.05, self._due_s - self._clock())))

    def frame(self) -> Frame:
        """Give the frame in memory; a running digitiser takes a new one for it.

        Raises
        ------
        ScpiError
            -230 where nothing was acquired yet, -221 where a fault forbids it.
        """
        if self._faults.active() == "error-queue":
            self._faults.count(waveform=True)
            raise ScpiError(-221)
        if self.state == RUNNING:
            self._frame = self._acquire()
        if self._frame is None:
            raise ScpiError(-230)
        return self._frame

    def described(self) -> Settings:
        """Give the settings that describe the next frame handed out."""
        if self.state == RUNNING or self._frame is None:
            return self.settings
        return self._frame.settings

    def _acquire(self) -> Frame:
        fault = self._faults.active()
        if fault == "stale" and self._frame is not None:
            return self._frame
        return self._converter.acquire(self._wave(), self.settings, GAINS.get(fault or "", 1.0))

    def set_to(self, **changes: float | bool) -> None:
        """Change settings; the offset keeps to whole codes, as a real one keeps to its steps."""
        wanted = replace(self.settings, **changes)  # type: ignore[arg-type]
        code = wanted.code_v
        self.settings = replace(wanted, offset_v=code * round(wanted.offset_v / code))

    def set_record_s(self, seconds: float) -> None:
        """Set the record's length in time, keeping its points."""
        self.set_to(interval_s=seconds / self.settings.points)

    def set_points(self, points: int) -> None:
        """Set the record's points, keeping its length in time."""
        record_s = self.settings.interval_s * self.settings.points
        self.set_to(points=points, interval_s=record_s / points)

    def points_from(self, call: Call) -> None:
        """Take a record length in points from a command."""
        self.set_points(call.whole(100, MOST_POINTS))

    def average_from(self, call: Call) -> None:
        """Take a number of frames to average from a command; it counts while averaging is on."""
        self.count = call.whole(1, MOST_AVERAGED)
        self.set_averaging(self.averaging)

    def set_averaging(self, on: bool) -> None:
        """Switch averaging on or off."""
        self.averaging = on
        self.set_to(average=self.count if on else 1)

    def offset_from(self, call: Call) -> None:
        """Take an offset from a command."""
        self.set_to(offset_v=call.number(-100.0, 100.0))

    def coupling_from(self, call: Call) -> None:
        """Take the input's coupling from a command."""
        self.set_to(ac=call.word("AC", "DC") == "AC")

    def set_time_axis(self, record_s: float) -> None:
        """Turn the time axis at the front panel; ``*RST`` comes back to this."""
        with self.lock:
            self.set_record_s(record_s)
            self._initial = replace(self._initial, interval_s=record_s / self._initial.points)

    def stand(self) -> None:
        """Be switched on without acquiring, memory empty."""
        self._state = STOPPED

    def note(self, code: int) -> None:
        """Keep an error."""
        self.status.fail(code)

    # -- common commands ----------------------------------------------------------------------

    def _add_common(self) -> None:
        add = self.commands.add
        add("*IDN?", lambda _: IDENTITY.format(dialect=self.dialect, serial=self._serial))
        add("*RST", lambda _: self.reset())
        add("*CLS", lambda _: self.status.clear())
        add("*ESR?", lambda _: str(self.status.read_events()))
        add("*OPC?", self._complete)
        add("*OPC", self._note_complete)
        add("*WAI", lambda _: self.wait())
        add("*STB?", lambda _: "0")
        add("*TST?", lambda _: "0")
        if self.queue:
            add("SYSTem:ERRor[:NEXT]?", self._next_error)
            add("SYSTem:VERSion?", lambda _: "1999.0")

    def reset(self) -> None:
        """Do what ``*RST`` does: first settings, stopped, memory empty."""
        self.settings = self._initial
        self.averaging, self.count = False, FIRST_COUNT
        self._state, self._frame, self._pending = STOPPED, None, None
        self.reset_dialect()

    def reboot(self) -> None:
        """Come up as after switching on."""
        with self.lock:
            self.reset()
            self._state = self._first_state
            self.status = Status()

    def _next_error(self, _: Call) -> str:
        code = self.status.next_error()
        return f'{code},"{MESSAGES[code]}"'

    def _complete(self, _: Call) -> str:
        if self.waits_for_completion():
            self.wait()
        return "1"

    def _note_complete(self, _: Call) -> None:
        if self.waits_for_completion():
            self.wait()
        self.status.events |= OPERATION_COMPLETE

    def waits_for_completion(self) -> bool:
        """Say whether ``*OPC?`` waits for an acquisition: not everywhere, and that is a trap."""
        return True

    # -- messages -----------------------------------------------------------------------------

    def execute(self, message: bytes) -> list[Reply]:
        """Carry out one message, and give the replies of its queries in order.

        Parameters
        ----------
        message
            Without its end.
        """
        text = message.decode("latin-1").strip()
        replies: list[Reply] = []
        path = ""
        with self.lock:
            for unit in split(text, ";"):
                if not unit.strip():
                    continue
                header, arguments = take_apart(unit)
                try:
                    reply, path = self._carry_out(header, arguments, path)
                except ScpiError as error:
                    if error.code:
                        self.note(error.code)
                    break  # IEEE 488.2, 6.1.6.1.1: the rest of a faulty message is not carried out
                if reply is not None:
                    replies.append(reply)
        return replies

    def _carry_out(
        self, header: str, arguments: tuple[str, ...], path: str
    ) -> tuple[Reply | None, str]:
        """Carry out one unit; a header without a leading colon may go on from the last path."""
        full = header
        found = None
        if path and not header.startswith((":", "*")):
            full = f"{path}:{header}"
            found = self.commands.find(full)
        if found is None:
            full = header
            found = self.commands.find(header)
        if found is None:
            raise ScpiError(-113)
        handler, suffixes = found
        reply = handler(Call(arguments, suffixes))
        if not header.startswith("*"):
            path = full.lstrip(":").rpartition(":")[0]
        return reply, path

    def render(self, replies: list[Reply]) -> bytes:
        """Put the replies of one message on the wire."""
        parts = [bytes(r) if isinstance(r, Block) else r.encode("latin-1") for r in replies]
        return b";".join(parts) + b"\n"
