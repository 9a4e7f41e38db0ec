"""Accuracy and time of a reading beside other ways to it, all in the same run.

Run ``OMP_NUM_THREADS=1 python -m tests.benchmarks.reading_report [--quick]``. It prints and asserts
nothing: times depend on the machine. The time of each way is the least of several runs, interleaved
with one `numpy.fft.rfft` of the same frame, whose least time is the unit of the ratios.

The other ways know the frequency to a part in a thousand beforehand; the reading does not.
"""

from __future__ import annotations

import argparse
import math
import time
import tracemalloc
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import curve_fit

from tests.measurement.waves import Wave, basis, fisher_bound, parts_of
from trimmer.measurement import measure

Array = NDArray[np.float64]
Way = Callable[[Array, float, int], Array]
"""Samples, a frequency near the true one (radians per sample) and orders, to parts."""

PARTS = parts_of(k2=0.004 - 0.002j, k3=-0.006 + 0.001j, k4=0.002, k5=0.003, k7=-0.0015, k9=0.0007j)
SIGMA = 0.005
ORDERS = 15


def crest_frame(phasors: NDArray[np.complex128]) -> Array:
    """Parts of ``X_1 .. X_K``."""
    k = np.arange(1, phasors.size + 1)
    z = phasors * np.exp(-1j * k * np.angle(phasors[0])) / abs(phasors[0])
    parts = np.empty(2 * (phasors.size - 1))
    parts[0::2], parts[1::2] = z.real[1:], -z.imag[1:]
    return parts


def reading(samples: Array, near: float, orders: int) -> Array:
    """The code under test, without any hint."""
    return measure(samples, 1.0, orders=orders).parts


def hann_peaks(samples: Array, near: float, orders: int) -> Array:
    """Hann-windowed FFT; the line nearest each order, phase and size by interpolation."""
    count = samples.size
    window = 0.5 - 0.5 * np.cos(2 * math.pi * np.arange(count) / count)
    spectrum = np.fft.rfft((samples - samples.mean()) * window) * 4.0 / count
    centre = near * count / (2 * math.pi)
    start = max(1, round(centre) - 2)
    peak = start + int(np.argmax(np.abs(spectrum[start : round(centre) + 3])))
    side = peak + (1 if abs(spectrum[peak + 1]) > abs(spectrum[peak - 1]) else -1)
    ratio = abs(spectrum[side]) / abs(spectrum[peak])
    position = peak + (side - peak) * (2 * ratio - 1) / (ratio + 1)
    phasors = np.empty(orders, dtype=complex)
    for k in range(1, orders + 1):
        at = round(k * position)
        off = k * position - at
        gain = np.sinc(off) / (1 - off * off)
        phasors[k - 1] = spectrum[at] / gain * np.exp(-1j * math.pi * off * (count - 1) / count)
    return crest_frame(phasors)


def full_matrix(samples: Array, near: float, orders: int) -> Array:
    """Gauss-Newton with `numpy.linalg.lstsq` on the N x (2K + 2) matrix, three rounds."""
    w = near
    n = np.arange(samples.size) - 0.5 * (samples.size - 1)
    theta = np.empty(0)
    for _ in range(3):
        matrix = basis(w, samples.size, orders)
        theta = np.linalg.lstsq(matrix, samples, rcond=None)[0]
        k = np.arange(1, orders + 1)
        slope = n * (matrix[:, 1::2] @ (k * theta[2::2]) - matrix[:, 2::2] @ (k * theta[1::2]))
        w += float(np.linalg.lstsq(np.column_stack((matrix, slope)), samples, rcond=None)[0][-1])
    return crest_frame(theta[1::2] - 1j * theta[2::2])


def general_fit(samples: Array, near: float, orders: int) -> Array:
    """`scipy.optimize.curve_fit` over offset, frequency and all amplitudes."""
    n = np.arange(samples.size)

    def model(n: Array, w: float, *theta: float) -> Array:
        values: Array = basis(w, n.size, orders) @ np.array(theta)
        return values

    start = np.linalg.lstsq(basis(near, samples.size, orders), samples, rcond=None)[0]
    found, _ = curve_fit(model, n, samples, p0=(near, *start))
    return crest_frame(found[2::2] - 1j * found[3::2])


@dataclass(frozen=True)
class Row:
    """One way at one size."""

    name: str
    milliseconds: float
    ratio: float
    spread: float
    bias: float


def compare(count: int, cycles: float, ways: dict[str, Way], frames: int, rounds: int) -> list[Row]:
    """Time each way, and hold its errors over many frames against the Cramer-Rao bound."""
    rng = np.random.default_rng(count)
    w = 2 * math.pi * cycles / count
    orders = min(ORDERS, int(0.45 * count / cycles))
    truth = np.zeros(2 * (orders - 1))
    truth[: PARTS.size] = PARTS[: truth.size]
    wave = Wave(truth, w)
    # the bound of a record of so many samples a period and, from 100 on, any number of periods
    few = min(count, 20_000)
    like = Wave(truth, 2 * math.pi * min(cycles, 100.3) / few)
    bound = np.sqrt(np.diag(fisher_bound(like, few, orders, SIGMA)[0]) * few / count)
    samples = wave.samples(count) + SIGMA * rng.standard_normal(count)
    unit = math.inf
    best = dict.fromkeys(ways, math.inf)
    for _ in range(rounds):
        unit = min(unit, _seconds(lambda: np.fft.rfft(samples)))
        for name, way in ways.items():
            best[name] = min(
                best[name], _seconds(lambda w=w, way=way: way(samples, w * 1.0002, orders))
            )
    errors: dict[str, list[Array]] = {name: [] for name in ways}
    for _ in range(frames):
        phase = float(rng.uniform(0, 2 * math.pi))
        x = Wave(truth, w, phase).samples(count) + SIGMA * rng.standard_normal(count)
        for name, way in ways.items():
            errors[name].append(way(x, w * (1 + 2e-4 / max(1.0, cycles / 100)), orders) - truth)
    rows = [Row("numpy rfft", unit * 1e3, 1.0, math.nan, math.nan)]
    for name in ways:
        error = np.array(errors[name])
        rows.append(
            Row(
                name,
                best[name] * 1e3,
                best[name] / unit,
                float(np.sqrt(np.mean((error / bound) ** 2))),
                float(np.abs(error.mean(axis=0) / bound).max()),
            )
        )
    return rows


def _seconds(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def memory(count: int) -> float:
    """Peak memory of a reading beyond its input, bytes a sample."""
    samples = Wave(PARTS, 0.00631).samples(count)
    measure(samples, 1.0)
    tracemalloc.start()
    measure(samples, 1.0)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return peak / count


def main() -> None:
    """Print the tables."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--quick", action="store_true", help="fewer frames and no million samples")
    quick = parser.parse_args().quick
    everything: dict[str, Way] = {
        "reading": reading,
        "Hann FFT peaks": hann_peaks,
        "lstsq, full matrix": full_matrix,
        "curve_fit": general_fit,
    }
    plain: dict[str, Way] = {"reading": reading, "Hann FFT peaks": hann_peaks}
    sizes = [(2000, 8.31, everything), (10_000, 10.37, everything), (100_000, 100.3, plain)]
    if not quick:
        sizes += [
            (1_000_000, 1000.3, plain),
            (1_000_000, 37.7, plain),
            (1_000_000, 30_000.3, plain),
        ]
    print(
        f"THD {100 * np.linalg.norm(PARTS):.2f} %, noise {100 * SIGMA:.2f} % of the peak, K = {ORDERS};"
    )
    print("error: root mean square over parts and frames, over the Cramer-Rao bound; bias likewise")
    for count, cycles, ways in sizes:
        frames, rounds = (20, 5) if quick or count > 20_000 else (60, 15)
        print(f"\nN = {count}, {cycles} periods")
        print(f"  {'':20s} {'ms':>9s} {'x rfft':>8s} {'error':>9s} {'bias':>8s}")
        for row in compare(count, cycles, ways, frames, rounds):
            error = "" if math.isnan(row.spread) else f"{row.spread:9.3f} {row.bias:8.3f}"
            print(f"  {row.name:20s} {row.milliseconds:9.3f} {row.ratio:8.2f} {error}")
    print("\nmemory beyond the input, bytes a sample:")
    for count in (100_000,) if quick else (100_000, 1_000_000):
        print(f"  N = {count}: {memory(count):.1f}")


if __name__ == "__main__":
    main()
