"""Every way of writing a part of a file, combined at random: a right reading or a refusal."""

from __future__ import annotations

import os
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers import SourceError
from drivers.files.capture import interpret
from drivers.files.csvfile import Wanted
from tests.drivers.files.shapes import cells, comma, rows

EXAMPLES = int(os.environ.get("TRIMMER_TEST_EXAMPLES", "150"))
"""CI runs few; a campaign sets more."""
WHEN = datetime(2024, 5, 1, tzinfo=UTC)
TIME_UNITS = {"s": 1.0, "ms": 1e-3, "us": 1e-6, "\N{MICRO SIGN}s": 1e-6, "ns": 1e-9}
VOLT_UNITS = {"V": 1.0, "mV": 1e-3, "uV": 1e-6, "kV": 1e3}


@dataclass(frozen=True, slots=True)
class Plan:
    """How a file is written."""

    count: int
    interval_s: float
    peak_v: float
    channels: int
    mark: str
    decimal_comma: bool
    time: str
    names: str
    time_unit: str
    volt_unit: str
    digits: int
    form: str
    end: str
    encoding: str
    remarks: tuple[str, ...]
    quoted: bool
    trailing: bool


plans = st.builds(
    Plan,
    count=st.integers(40, 400),
    interval_s=st.sampled_from([1e-9, 4e-9, 2e-7, 1e-6, 2.5e-6, 1 / 48000, 1e-3]),
    peak_v=st.sampled_from([0.02, 0.5, 1.0, 7.0, 20.0]),
    channels=st.integers(1, 3),
    mark=st.sampled_from([",", ";", "\t", " ", "|"]),
    decimal_comma=st.booleans(),
    time=st.sampled_from(["column", "column", "column", "index", "none"]),
    names=st.sampled_from(["brackets", "units row", "slash", "no units", "none"]),
    time_unit=st.sampled_from(sorted(TIME_UNITS)),
    volt_unit=st.sampled_from(sorted(VOLT_UNITS)),
    digits=st.integers(4, 9),
    form=st.sampled_from(["f", "e", "E", "g"]),
    end=st.sampled_from(["\n", "\r\n", "\r"]),
    encoding=st.sampled_from(["utf-8", "utf-8-sig", "utf-16", "latin-1"]),
    remarks=st.sampled_from(
        [(), ("Model,none", "Firmware,1.2.3"), ("# remark", ""), ("", ""), ("Date;01.02.2024",)]
    ),
    quoted=st.booleans(),
    trailing=st.booleans(),
)


def truth(plan: Plan) -> np.ndarray:
    """The channels, shape (channels, count)."""
    turn = 2 * np.pi * 7.3 / plan.count * np.arange(plan.count)
    return np.array(
        [
            plan.peak_v / n * (np.sin(turn + n) + 0.02 * np.cos(2 * turn))
            for n in range(1, plan.channels + 1)
        ]
    )


def written(plan: Plan) -> bytes:
    """The file's bytes."""
    scale = VOLT_UNITS[plan.volt_unit] if plan.names != "none" else 1.0
    if plan.names == "no units":
        scale = 1.0
    columns = []
    for values in truth(plan) / scale:
        decimals = max(0, plan.digits - int(np.floor(np.log10(plan.peak_v / scale))))
        form = f".{decimals}f" if plan.form == "f" else f".{plan.digits}{plan.form}"
        columns.append(cells(values, form))
    heads = [f"CH{n}" for n in range(1, plan.channels + 1)]
    units = [plan.volt_unit] * plan.channels
    stated = f"Sample Interval,{plan.interval_s!r} s"
    if plan.time == "index":
        columns.insert(0, [str(n) for n in range(plan.count)])
        heads.insert(0, "Index")
        units.insert(0, "#")
    elif plan.time == "column":
        unit = TIME_UNITS[plan.time_unit] if plan.names not in ("none", "no units") else 1.0
        times = plan.interval_s / unit * np.arange(plan.count)
        columns.insert(0, cells(times, f".{plan.digits + 3}e"))
        heads.insert(0, "Time")
        units.insert(0, plan.time_unit)
    lines = list(plan.remarks)
    if plan.time != "column":
        lines.append(stated)
    joined = {
        "brackets": [plan.mark.join(f"{h} ({u})" for h, u in zip(heads, units, strict=True))],
        "slash": [plan.mark.join(f"{h}/{u}" for h, u in zip(heads, units, strict=True))],
        "units row": [plan.mark.join(heads), plan.mark.join(units)],
        "no units": [plan.mark.join(heads)],
        "none": [],
    }[plan.names]
    if plan.decimal_comma:
        columns = [comma(column) for column in columns]
    if plan.quoted:
        columns = [[f'"{cell}"' for cell in column] for column in columns]
    tail = plan.mark if plan.trailing else ""
    text = plan.end.join([*lines, *joined, ""]) + rows(
        *columns, by=plan.mark, end=plan.end, tail=tail
    )
    return text.encode(plan.encoding, errors="replace")


def refused(plan: Plan, channel: int) -> bool:
    """Say whether a refusal is right: the file does not say enough, or says two things."""
    commas_twice = plan.decimal_comma and plan.mark == "," and not plan.quoted
    nameless = plan.names == "none" and plan.channels > 1 and channel == 0
    return commas_twice or nameless


@settings(max_examples=EXAMPLES, deadline=None)
@given(plan=plans, channel=st.integers(0, 3))
def test_any_combination_is_read_right_or_refused(plan, channel):
    channel = min(channel, plan.channels)
    raw = written(plan)
    try:
        wave = interpret(raw, Path("x.csv"), Wanted(channel or None), WHEN).waveform
    except SourceError as error:
        if not refused(plan, channel):
            pytest.fail(f"refused without need: {error}\n{raw[:300]!r}")
        return
    right = truth(plan)[max(channel, 1) - 1]
    np.testing.assert_allclose(
        wave.samples, right, atol=6 * plan.peak_v * 10.0**-plan.digits, err_msg=repr(raw[:300])
    )
    assert wave.interval_s == pytest.approx(plan.interval_s, rel=1e-5)
    assert wave.has_volts
