"""The pictures of a page, drawn to be told apart without colour.

Lines differ by their dashes, bars by hatching, points by their marks. Text from outside is never read as
a formula.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Literal

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import FuncFormatter, MaxNLocator, NullFormatter

from trimmer.report.page import Course, Page, Parts, Wave

DARK, MIDDLE, LIGHT = "#1a1a1a", "#6b6b6b", "#d9d9d9"
Drawing = Callable[[Axes], None]


def drawings(page: Page) -> list[tuple[str, Drawing]]:
    """Give the pictures a page has, each with a description."""
    found: list[tuple[str, Drawing]] = []
    if page.wave is not None:
        wave = page.wave
        found.append(
            ("One period of the wave, and the sine it should be", lambda a: _wave(a, wave))
        )
        found.append(("What the wave differs from the sine by", lambda a: _difference(a, wave)))
    if page.parts is not None:
        parts = page.parts
        found.append(("Crest and skew parts by order", lambda a: _parts(a, parts)))
    if page.turns is not None:
        turns = page.turns
        found.append(("THD by turn", lambda a: _turns(a, turns)))
    if page.survey is not None:
        survey = page.survey
        found.append(("THD over the frequency range", lambda a: _survey(a, survey)))
    if page.units is not None:
        units = page.units
        found.append(("THD of each unit once trimmed", lambda a: _units(a, units)))
    if page.needed:
        needed = page.needed
        found.append(("Turns needed", lambda a: _needed(a, needed)))
    if page.drift is not None:
        drift = page.drift
        found.append(("Distance from warm, by minutes", lambda a: _drift(a, drift)))
    return found


def _framed(axes: Axes, title: str, across: str, up: str) -> None:
    axes.set_title(title, fontsize=8.5, loc="left", parse_math=False)
    axes.set_xlabel(across, fontsize=7, parse_math=False)
    axes.set_ylabel(up, fontsize=7, parse_math=False)
    axes.tick_params(labelsize=6.5, direction="in")
    axes.spines[["top", "right"]].set_visible(False)
    axes.grid(visible=True, color=LIGHT, linewidth=0.5)
    axes.set_axisbelow(True)


def _legend(axes: Axes, where: Literal["best", "upper center"] = "best") -> None:
    axes.legend(fontsize=6.5, frameon=False, loc=where)


def _degrees(axes: Axes) -> None:
    axes.set_xlim(0.0, 360.0)
    axes.set_xticks([0, 90, 180, 270, 360])


def _wave(axes: Axes, wave: Wave) -> None:
    _framed(axes, "Wave", "degrees from the upper crest", "of the fundamental's peak")
    _degrees(axes)
    degrees = np.degrees(wave.theta)
    axes.plot(degrees, np.cos(wave.theta), "--", color=MIDDLE, linewidth=1.0, label="sine")
    axes.plot(degrees, wave.shape, "-", color=DARK, linewidth=1.2, label="fitted wave")
    if wave.samples.size:
        at = np.degrees(wave.samples_theta)[::6]
        axes.plot(
            at,
            wave.samples[::6],
            "o",
            color=DARK,
            markersize=2.2,
            fillstyle="none",
            label="samples",
        )
    _legend(axes, "upper center")


def _difference(axes: Axes, wave: Wave) -> None:
    _framed(axes, "Difference from the sine", "degrees from the upper crest", "% of the peak")
    _degrees(axes)
    axes.axhline(0.0, color=MIDDLE, linewidth=0.8)
    axes.plot(np.degrees(wave.theta), 100.0 * wave.difference, "-", color=DARK, linewidth=1.1)


def _parts(axes: Axes, parts: Parts) -> None:
    _framed(axes, "Parts by order", "order", "% of the fundamental")
    wide = 0.38
    whisker = {"elinewidth": 0.7, "ecolor": DARK}
    axes.bar(
        parts.orders - wide / 2,
        100.0 * parts.crest,
        wide,
        yerr=196.0 * parts.crest_sigma,
        color=DARK,
        label="crest (the trims set these)",
        error_kw={**whisker, "ecolor": MIDDLE},
    )
    axes.bar(
        parts.orders + wide / 2,
        100.0 * parts.skew,
        wide,
        yerr=196.0 * parts.skew_sigma,
        color="white",
        edgecolor=DARK,
        hatch="////",
        linewidth=0.6,
        label="skew",
        error_kw=whisker,
    )
    axes.axhline(0.0, color=DARK, linewidth=0.6)
    axes.set_xticks(parts.orders[:: 1 + len(parts.orders) // 24])
    _legend(axes)


def _points(axes: Axes, course: Course, x: Sequence[float] | None = None) -> None:
    across = course.x if x is None else np.asarray(x)
    down = np.maximum(course.value - course.low, 0.0)
    up = np.maximum(course.high - course.value, 0.0)
    axes.errorbar(
        across,
        100.0 * course.value,
        yerr=100.0 * np.array((down, up)),
        fmt="o-",
        color=DARK,
        markersize=3.2,
        linewidth=0.9,
        capsize=2.0,
    )


def _limit(axes: Axes, course: Course, name: str) -> None:
    if course.limit is not None:
        axes.axhline(100.0 * course.limit, color=DARK, linewidth=0.9, linestyle=":", label=name)
        _legend(axes)


def _turns(axes: Axes, course: Course) -> None:
    _framed(axes, "THD by turn", "turns made", "THD, %")
    _points(axes, course)
    _limit(axes, course, "no turn can better")
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    axes.set_ylim(bottom=0.0)


def _survey(axes: Axes, course: Course) -> None:
    _framed(axes, "Survey", "frequency", "THD, %")
    axes.set_xscale("log")
    _points(axes, course)
    _limit(axes, course, "limit")
    axes.xaxis.set_major_formatter(FuncFormatter(_dial))
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.set_ylim(bottom=0.0)


def _dial(hertz: float, _at: object = None) -> str:
    return f"{hertz:g} Hz" if hertz < 1000.0 else f"{hertz / 1000.0:g} kHz"


def _units(axes: Axes, course: Course) -> None:
    _framed(axes, "THD once trimmed", "", "THD, %")
    across = np.arange(float(len(course.value)))
    half = 100.0 * np.array((course.value - course.low, course.high - course.value)).clip(0.0)
    axes.errorbar(across, 100.0 * course.value, yerr=half, fmt="o", color=DARK, markersize=3.2)
    axes.set_xticks(across)
    axes.set_xlim(-0.6, len(across) - 0.4)
    axes.set_xticklabels(course.labels, rotation=60, ha="right", fontsize=6, parse_math=False)
    axes.set_ylim(bottom=0.0)


def _needed(axes: Axes, turns: Sequence[int]) -> None:
    _framed(axes, "Turns needed", "turns", "units")
    values, counts = np.unique(np.asarray(turns), return_counts=True)
    axes.bar(values, counts, color="white", edgecolor=DARK, hatch="////", linewidth=0.7)
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    axes.yaxis.set_major_locator(MaxNLocator(integer=True))


def _drift(axes: Axes, course: Course) -> None:
    _framed(axes, "Distance from warm", "minutes", "% of the fundamental")
    axes.fill_between(course.x, 100.0 * course.low, 100.0 * course.high, color=LIGHT, label="units")
    axes.plot(course.x, 100.0 * course.value, "-", color=DARK, linewidth=1.1, label="median")
    axes.set_ylim(bottom=0.0)
    _legend(axes)
