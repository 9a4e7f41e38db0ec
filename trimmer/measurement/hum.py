"""Lines that do not belong to the unit: hum, its sidebands, and a wandering offset.

They are looked for in what the fit leaves, and those that are there for certain are fitted along
with the orders, so that they do not leak into them.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from trimmer.measurement.fit import Fit, slow_line
from trimmer.measurement.kernels import Array
from trimmer.measurement.model import Complex, Lines, cross_products
from trimmer.measurement.projection import Record, project
from trimmer.measurement.reading import Flag
from trimmer.measurement.search import nearest_lines

MAINS_HZ = (50.0, 60.0)
_CERTAIN = 32.0
"""Chi-square with 2 degrees of freedom above which a line is there: chance 1e-7."""
_APART = 0.7
"""Lines closer than this many cycles of the record cannot be told apart."""
_TOLD = 2e-4
"""Ratio to the fundamental from which hum is worth a flag."""
_WANDER_TOLD = 2e-3
"""Ratio to the fundamental from which a wandering offset is worth a flag."""
_UNSTEADY_HZ = 0.5
"""Mains may be off its nominal frequency by this much."""


@dataclass(frozen=True, slots=True)
class Foreign:
    """A line that may be in the record."""

    name: str
    """``mains``, ``sideband`` or ``slow``."""
    mains_hz: float
    """Mains frequency it belongs to; 0 for the wandering offset."""
    w: float
    """Radians per sample."""


def candidates(
    record: Record, fit: Fit, interval_s: float, mains_hz: float | None
) -> list[Foreign]:
    """List the lines that could be told apart in this record, nearest kin only once."""
    cell = 2.0 * math.pi / fit.samples
    slow = slow_line(fit.samples)
    wanted = [] if fit.lines.fixed.size else [Foreign("slow", 0.0, slow)]
    stated = mains_hz is not None and math.isfinite(mains_hz) and mains_hz > 0.0
    known = (mains_hz,) if mains_hz and stated else MAINS_HZ
    for mains, w in zip(known, _mains_lines(record, known, interval_s), strict=True):
        if w < slow or w > 0.3 * math.pi:
            continue
        whole = w >= cell
        wanted += [Foreign("mains", mains, m * w) for m in ((1, 2, 3) if whole else (1,))]
        if whole:
            wanted += [Foreign("sideband", mains, fit.w + shift * w) for shift in (-1, 1, -2, 2)]
    own = fit.w * np.arange(fit.lines.orders + 2)
    found: list[Foreign] = []
    for line in wanted:
        near_own = float(np.abs(own - line.w)[1:].min()) < _APART * cell
        rivals = [other.w for other in found if other.mains_hz in (0.0, line.mains_hz)]
        near_other = any(abs(w - line.w) < 0.5 * _APART * cell for w in rivals)
        slow = line.w < _APART * cell and line.name == "sideband"
        if not 0.0 < line.w < 0.95 * math.pi or near_own or near_other or slow:
            continue
        found.append(line)
    return found


def _mains_lines(record: Record, known: Sequence[float], interval_s: float) -> list[float]:
    """Give the mains frequencies, radians per sample; sought nearby where a record is that fine."""
    w = 2.0 * math.pi * interval_s * np.array(known)
    if record.count * interval_s * _UNSTEADY_HZ < 0.2 or float(w.max()) > 0.3 * math.pi:
        return [float(line) for line in w]
    reach = np.full(w.size, 2.0 * math.pi * interval_s * _UNSTEADY_HZ)
    return [float(line) for line in nearest_lines(record, w, reach)]


def certain_lines(record: Record, fit: Fit, lines: Sequence[Foreign]) -> list[Foreign]:
    """Keep those lines that the residual holds for certain; of two mains frequencies, the better.

    A slow line that is fitted already stays, first.
    """
    held = [Foreign("slow", 0.0, float(w)) for w in fit.lines.fixed]
    if not lines:
        return held
    scores = _scores(record, fit, np.array([line.w for line in lines]))
    totals: dict[float, float] = {}
    for line, score in zip(lines, scores, strict=True):
        if line.mains_hz:
            totals[line.mains_hz] = max(totals.get(line.mains_hz, 0.0), float(score))
    best = max(totals, key=lambda mains: totals[mains]) if totals else 0.0
    kept = [
        (float(score), line)
        for line, score in zip(lines, scores, strict=True)
        if score > _CERTAIN and line.mains_hz in (0.0, best)
    ]
    return [*held, *(line for _, line in sorted(kept, key=lambda item: -item[0]))]


def _scores(record: Record, fit: Fit, w: Array) -> Array:
    """Chi-square of each line in the residual, shape of `w`."""
    data = _sums(record, fit, w)
    cross = cross_products(fit.samples, w, fit.lines.frequencies(fit.w))
    cross[1, :, 0] = 0.0
    itself = cross_products(fit.samples, w, w[:, None])[:, :, 0]
    left = np.stack((data.real, -data.imag))
    left -= (cross @ np.stack((fit.cosines, fit.sines))[:, :, None])[:, :, 0]
    room = fit.room(cross, itself)
    usable = room > 1e-7 * fit.samples
    scores = np.where(usable, left**2 / np.where(usable, room, 1.0), 0.0).sum(axis=0)
    scaled: Array = scores / fit.variance
    return scaled


def _sums(record: Record, fit: Fit, w: Array) -> Complex:
    """Give ``sum x exp(-j w t)``, shape of `w`, from the fit's own projections where they hold it."""
    held = fit.projections
    if np.array_equal(held.lines.fixed[fit.lines.fixed.size :], w):
        turns = np.exp(np.multiply.outer(-1j * w, held.centres))
        sums: Complex = (turns * held.sums[-w.size :]).sum(axis=1)
        return sums
    return project(record, Lines(1, w), fit.w).totals(fit.w)[0][2:]


def hum_report(fit: Fit, lines: Sequence[Foreign]) -> tuple[dict[str, float], list[Flag]]:
    """Tell what the fitted foreign lines amount to, as ratios to the fundamental.

    Mains of which the record holds less than a period cannot be told from a wandering offset, and
    is told as that.
    """
    sizes = np.hypot(fit.cosines, fit.sines)
    ratios = sizes[fit.lines.orders + 1 :] / sizes[1]
    held: dict[str, list[float]] = {"mains": [], "sideband": [], "slow": []}
    for ratio, line in zip(ratios, lines, strict=True):
        whole = line.w * fit.samples >= 2.0 * math.pi
        held["slow" if line.name == "mains" and not whole else line.name].append(float(ratio))
    extra = {f"{name}_ratio": math.hypot(*found) for name, found in held.items() if found}
    flags = []
    hum = math.hypot(extra.get("mains_ratio", 0.0), extra.get("sideband_ratio", 0.0))
    if hum > 0.0:
        extra["mains_hz"] = max(line.mains_hz for line in lines)
        extra["hum_ratio"] = hum
    if hum > _TOLD:
        where = "at the mains frequency" if held["mains"] else "beside the fundamental"
        flags.append(
            Flag(
                "hum",
                f"Hum of {100 * hum:.2g} % of the fundamental ({extra['mains_hz']:g} Hz and "
                f"multiples), {where}.",
                "Shorten the probe's ground, keep mains cables away, and check the unit's supply.",
            )
        )
    wander = extra.get("slow_ratio", 0.0)
    if wander > _WANDER_TOLD and not held["mains"]:
        flags.append(
            Flag(
                "wandering",
                f"The offset wanders by {100 * wander:.2g} % of the fundamental within the capture: "
                "hum seen for less than its period, or an offset that settles.",
                "Let the unit and the input settle, and look for hum with a slower time base.",
            )
        )
    return extra, flags
