"""Invented sheets for the tests of the book: readings with every figure, seeded."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

import numpy as np
from numpy.typing import NDArray

from trimmer.book import SheetEnd, SheetStart, TurnEntry
from trimmer.guidance.advice import Advice, Cause, Done, Verdict
from trimmer.measurement.reading import Crests, Flag, Interval, Reading

START = datetime(2031, 5, 6, 7, 8, 9, 123456, tzinfo=UTC)


def reading(seed: int = 0, orders: int = 15, thd: float | None = None) -> Reading:
    """Give a reading whose every figure is some odd number."""
    rng = np.random.default_rng(seed)
    size = 2 * (orders - 1)
    root = rng.normal(size=(size, size)) * 1e-5
    covariance = root @ root.T
    total = float(rng.uniform(0.002, 0.03)) if thd is None else thd
    figures = [float(v) for v in rng.normal(size=12)]
    return Reading(
        fundamental_hz=1000 + figures[0],
        fundamental_sigma_hz=abs(figures[1]) * 1e-3,
        amplitude=2.5 + figures[2] * 1e-2,
        amplitude_sigma=abs(figures[3]) * 1e-4,
        offset=figures[4] * 1e-2,
        offset_sigma=abs(figures[5]) * 1e-4,
        orders=orders,
        parts=rng.normal(size=size) * 1e-3,
        covariance=(covariance + covariance.T) / 2,
        noise=abs(figures[6]) * 1e-3,
        thd=Interval(total, total * 0.01, total * 0.98, total * 1.02),
        thd_plus_noise=total * 1.07,
        crests=Crests(*(v * 1e-3 for v in figures[6:12])),
        rise_share=0.5 + figures[7] * 1e-3,
        rise_share_sigma=abs(figures[8]) * 1e-4,
        flags=(Flag("few-codes", "only 40 codes of 256 [/] are used", "Use a smaller range."),),
        samples=10_000,
        interval_s=1e-6,
        cycles=10.00001,
        bits=8,
        phase=figures[9],
        systematic=0.25 * (covariance + covariance.T) / 2,
        noise_power=abs(figures[11]) * 1e-9,
        freedom=8123.0,
        extra={"hum_hz": 50.0, "drift_hz": figures[10] / 3},
    )


def wave(seed: int = 0, samples: int = 2000, code: float = 0.02) -> NDArray[np.float64]:
    """Give a noisy sine on a digitiser's levels."""
    rng = np.random.default_rng(seed)
    angle = 2 * np.pi * np.arange(samples) / 997.3
    return np.round((2.4 * np.sin(angle) + rng.normal(size=samples) * 0.01) / code) * code


def advice(turn: int = 0) -> Advice:
    """Give an advice."""
    return Advice(
        turn=turn,
        trim="upper" if turn % 2 == 0 else "lower",
        sense="clockwise",
        turns=0.06 / (turn + 1),
        expected_thd=0.0061 if turn else None,
        floor_thd=0.0042 if turn > 1 else None,
        floor_sigma=0.0003 if turn > 1 else None,
        reason="The upper crest is too pointed.",
        rises_first=turn == 1,
    )


def start(unit: str = "Bench 7", kind: str = "blue case", at: datetime = START) -> SheetStart:
    """Give the beginning of a sheet."""
    return SheetStart(
        taken_at=at,
        unit=unit,
        kind=kind,
        source="bench",
        identity="an invented digitiser",
        dialect="ten-field",
        settings={"range": "5 V", "coupling": "DC"},
        notes={"ambient": "23 °C", "supply": "±12 V"},
        travel_turns=0.75,
        orders=15,
        versions={"trimmer": "0.1.0", "numpy": np.__version__},
    )


def entry(turn: int = 0, seed: int | None = None, samples: int = 2000) -> TurnEntry:
    """Give a turn and its reading."""
    number = turn if seed is None else seed
    return TurnEntry(
        turn=turn,
        taken_at=START + timedelta(seconds=20 * turn, milliseconds=1),
        reading=reading(number),
        source=f"capture-{turn}.csv",
        advice=advice(turn - 1) if turn else None,
        made_turns=0.055 if turn else None,
        word="moved" if turn else "",
        waveform=wave(number, samples),
        interval_s=1e-6,
        notes=("ten samples a column",),
    )


def end(turns: int = 3, verdict: Verdict = "at-floor", seed: int = 99) -> SheetEnd:
    """Give the end of a sheet."""
    done = Done(
        turn=turns,
        verdict=verdict,
        floor_thd=0.0042,
        floor_sigma=0.0003,
        net_turns={"upper": 0.1 / 3, "lower": -0.02},
        remainder=(Cause("time-symmetry", 0.0021, "Set the time symmetry first.", 0.0001),),
        reason="What is left is not the trims.",
        expected_thd_warm=0.0047,
    )
    return SheetEnd(START + timedelta(minutes=5), done, reading(seed))
