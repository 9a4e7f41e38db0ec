"""How fast the simulated digitiser is: `python -m tests.benchmarks.simulated_digitiser`.

Frames a second over the loopback socket, by dialect and record length, each frame armed for; and
the time that a changed setting of the unit costs, beside one FFT of the same length.
"""

from __future__ import annotations

import platform
import time
from collections.abc import Callable

import numpy as np

from drivers.bench import Bench
from drivers.bench.parts import draw
from drivers.bench.unit import PERIOD_POINTS, period
from tests.drivers.bench.talker import Talker

SIZES = (1_000, 10_000, 100_000, 1_000_000)
ASK = {
    "ten-field": (
        (":WAVeform:POINts:MODE RAW", ":TIMebase:RANGe 1e-2", ":ACQuire:POINts {points}"),
        ":DIGitize;:WAVeform:DATA?",
    ),
    "keyword-curve": (
        ("HEADer OFF", "DATa:STOP 2000000", "ACQuire:STOPAfter SEQuence",
         "HORizontal:RECOrdlength {points}"),
        "ACQuire:STATE RUN;:CURVe?",
    ),
    "format-trace": (("FORMat REAL,32", "SWEep:POINts {points}", "SWEep:TINTerval 1e-8"), "READ?"),
}  # fmt: skip
LEAST_S = 1.0


def rate(work: Callable[[], object]) -> float:
    """Runs a second."""
    work()
    start, count = time.perf_counter(), 0
    while (elapsed := time.perf_counter() - start) < LEAST_S:
        work()
        count += 1
    return count / elapsed


def main() -> int:
    """Print the tables."""
    print(f"Python {platform.python_version()}, numpy {np.__version__}, {platform.machine()}")
    print(f"{'frames a second':20s}" + "".join(f"{size:>12d}" for size in SIZES))
    for dialect, (setup, query) in ASK.items():
        rates = []
        for points in SIZES:
            with Bench(1, dialect=dialect) as bench, Talker(bench) as talker:
                talker.say(*(line.format(points=points) for line in setup))
                rates.append(rate(lambda talker=talker, query=query: talker.block(query)))
        print(f"{dialect:20s}" + "".join(f"{each:12.1f}" for each in rates))
    parts, rng = draw(1), np.random.default_rng(1)
    for hertz in (1e3, 18e3):
        each = 1.0 / rate(lambda hertz=hertz: period(parts, tuple(rng.uniform(0.3, 0.7, 2)), hertz))
        print(f"a changed setting at {hertz:g} Hz: {1e3 * each:.2f} ms")
    noise = rng.standard_normal(PERIOD_POINTS)
    print(f"one rfft of {PERIOD_POINTS} points: {1e3 / rate(lambda: np.fft.rfft(noise)):.3f} ms")
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
