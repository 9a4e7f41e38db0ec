"""The simulated unit, its hand and its digitiser, reached through a socket that speaks SCPI."""

from drivers.bench.assembly import Bench, parse_turn
from drivers.bench.faults import FAULTS
from drivers.bench.speakers import SPEAKERS

DIALECTS = tuple(SPEAKERS)
"""Names of the waveform dialects that a bench speaks."""

__all__ = ["DIALECTS", "FAULTS", "Bench", "parse_turn"]
