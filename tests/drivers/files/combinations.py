"""Ways of writing each part of a file, combined at random, and the judgement of what is read."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import TypeVar

import numpy as np

from drivers import SourceError, Waveform
from drivers.files.capture import interpret
from drivers.files.csvfile import Wanted
from tests.drivers.files.shapes import cells, comma, rows

T = TypeVar("T")
WHEN = datetime(2024, 5, 1, tzinfo=UTC)
TIME_UNITS = {"s": 1.0, "ms": 1e-3, "us": 1e-6, "\N{MICRO SIGN}s": 1e-6, "ns": 1e-9}
VOLT_UNITS = {"V": 1.0, "mV": 1e-3, "uV": 1e-6, "kV": 1e3}
REMARKS = [(), ("Model,none", "Firmware,1.2.3"), ("# remark", ""), ("", ""), ("Date;01.02.2024",)]
OVERRANGE = ["****", "9.9E37", "nan"]


@dataclass(frozen=True, slots=True)
class Plan:
    """How a file is written."""

    count: int
    interval_s: float
    peak_v: float
    channels: int
    channel: int
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
    grouped: str
    suffixes: bool
    over: tuple[int, ...]
    coarse: bool


def at_random(rng: np.random.Generator) -> Plan:
    """Draw a plan."""

    def one(*choices: T) -> T:
        return choices[int(rng.integers(len(choices)))]

    count, channels = int(rng.integers(40, 400)), int(rng.integers(1, 4))
    over = rng.integers(5, count - 5, 3).tolist() if rng.random() < 0.2 else []
    return Plan(
        count=count,
        interval_s=one(1e-9, 4e-9, 2e-7, 1e-6, 2.5e-6, 1 / 48000, 1e-3),
        peak_v=one(0.02, 0.5, 1.0, 7.0, 20.0),
        channels=channels,
        channel=int(rng.integers(0, channels + 1)),
        mark=one(",", ";", "\t", " ", "|"),
        decimal_comma=one(True, False),
        time=one("column", "column", "column", "index", "none"),
        names=one("brackets", "units row", "slash", "no units", "none"),
        time_unit=one(*TIME_UNITS),
        volt_unit=one(*VOLT_UNITS),
        digits=int(rng.integers(4, 10)),
        form=one("f", "e", "E", "g"),
        end=one("\n", "\r\n", "\r"),
        encoding=one("utf-8", "utf-8-sig", "utf-16", "latin-1"),
        remarks=one(*REMARKS),
        quoted=one(True, False),
        trailing=one(True, False),
        grouped=one("", "", "", "mark", " ", "\N{NO-BREAK SPACE}"),
        suffixes=bool(rng.random() < 0.15),
        over=tuple(sorted(set(over))),
        coarse=bool(rng.random() < 0.15),
    )


def truth(plan: Plan) -> np.ndarray:
    """The channels, shape (channels, count)."""
    turn = 2 * np.pi * 7.3 / plan.count * np.arange(plan.count)
    wave = [np.sin(turn + n) + 0.02 * np.cos(2 * turn) for n in range(1, plan.channels + 1)]
    return plan.peak_v * np.array(wave) / np.arange(1, plan.channels + 1)[:, None]


def scales(plan: Plan) -> tuple[float, float]:
    """Seconds and volts in the units that the file is written in."""
    plain = plan.names in ("none", "no units") and not plan.suffixes
    return (1.0, 1.0) if plain else (TIME_UNITS[plan.time_unit], VOLT_UNITS[plan.volt_unit])


def written(plan: Plan) -> bytes:
    """The file's bytes."""
    columns, heads, units = _columns(plan)
    pairs = list(zip(heads, units, strict=True))
    no_units = [plan.mark.join(heads)]
    names = {
        "brackets": [plan.mark.join(f"{head} ({unit})" for head, unit in pairs)],
        "slash": [plan.mark.join(f"{head}/{unit}" for head, unit in pairs)],
        "units row": [plan.mark.join(heads), plan.mark.join(units)],
        "no units": no_units,
        "none": [],
    }[plan.names]
    if plan.suffixes and names:
        names = no_units
    stated = [] if plan.time == "column" else [f"Sample Interval,{plan.interval_s!r} s"]
    tail = plan.mark if plan.trailing else ""
    text = plan.end.join([*plan.remarks, *stated, *names, ""])
    text += rows(*columns, by=plan.mark, end=plan.end, tail=tail)
    return text.encode(plan.encoding, errors="replace")


def _columns(plan: Plan) -> tuple[list[list[str]], list[str], list[str]]:
    second, volt = scales(plan)
    columns = [_printed(values / volt, plan) for values in truth(plan)]
    heads = [f"CH{n}" for n in range(1, plan.channels + 1)]
    units = [plan.volt_unit] * plan.channels
    for column in columns:
        for number, place in enumerate(plan.over):
            mark = OVERRANGE[number % len(OVERRANGE)]
            column[place] = comma([mark])[0] if plan.decimal_comma else mark
    if plan.suffixes:
        columns = [_suffixed(column, plan.volt_unit) for column in columns]
    if plan.time == "index":
        columns.insert(0, [str(n) for n in range(plan.count)])
        heads.insert(0, "Index")
        units.insert(0, "#")
    elif plan.time == "column":
        times = cells(plan.interval_s / second * np.arange(plan.count), _time_form(plan))
        times = comma(times) if plan.decimal_comma else times
        columns.insert(0, _suffixed(times, plan.time_unit) if plan.suffixes else times)
        heads.insert(0, "Time")
        units.insert(0, plan.time_unit)
    if plan.quoted:
        columns = [[f'"{cell}"' for cell in column] for column in columns]
    return columns, heads, units


def _time_form(plan: Plan) -> str:
    """Enough digits, or one too few for the last steps."""
    enough = int(np.ceil(np.log10(plan.count)))
    return f".{enough - 1 if plan.coarse else plan.digits + 3}e"


def _printed(values: np.ndarray, plan: Plan) -> list[str]:
    size = plan.peak_v / scales(plan)[1]
    # 17.229 for seventeen thousand looks like any other decimal: nothing could tell.
    least = 1 if plan.grouped == "mark" else 0
    decimals = max(least, plan.digits - int(np.floor(np.log10(size))))
    if plan.form != "f":
        printed = cells(values, f".{plan.digits}{plan.form}")
    elif plan.grouped == "mark":
        printed = cells(values, f",.{decimals}f")
    elif plan.grouped:
        printed = [cell.replace(",", plan.grouped) for cell in cells(values, f",.{decimals}f")]
    else:
        printed = cells(values, f".{decimals}f")
    return comma(printed) if plan.decimal_comma else printed


def _suffixed(column: list[str], unit: str) -> list[str]:
    return [
        cell + unit if cell[-1].isdigit() and not cell.endswith("E37") else cell for cell in column
    ]


def is_doubtful(plan: Plan) -> bool:
    """Say whether a refusal is right: the file does not say enough, or says two things."""
    printed_groups = plan.form == "f" and bool(plan.grouped)
    groups_part = printed_groups and (
        (plan.grouped == "mark" and not plan.decimal_comma and plan.mark == ",")
        or (plan.grouped != "mark" and (plan.mark == " " or plan.channels == 1))
    )
    commas_twice = plan.decimal_comma and plan.mark == ","
    nameless = plan.names == "none" and plan.channels > 1 and plan.channel == 0
    three = plan.form == "f" and (plan.decimal_comma or plan.grouped == "mark")
    # The only comma of a file of whole numbers may be in an overrange mark that no sample shows.
    hidden = plan.decimal_comma and bool(plan.over)
    return ((commas_twice or groups_part) and not plan.quoted) or nameless or hidden or three


def judge(plan: Plan) -> str:
    """Write, read, and say what is wrong; empty where it is right."""
    raw = written(plan)
    try:
        wave = interpret(raw, Path("x.csv"), Wanted(plan.channel or None), WHEN).waveform
    except SourceError as error:
        return "" if is_doubtful(plan) else f"refused without need: {error}"
    return _wrong(plan, wave)


def _wrong(plan: Plan, wave: Waveform) -> str:
    right = truth(plan)[max(plan.channel, 1) - 1]
    right[list(plan.over)] = np.nan
    if wave.samples.shape != right.shape:
        return f"{wave.samples.size} samples, not {right.size}"
    near = 6 * plan.peak_v * 10.0**-plan.digits
    if not np.allclose(wave.samples, right, rtol=0, atol=near, equal_nan=True):
        return f"values {wave.samples[:3]}, not {right[:3]}: {wave.notes}"
    if abs(wave.interval_s / plan.interval_s - 1) > (0.06 if plan.coarse else 1e-5):
        return f"interval {wave.interval_s}, not {plan.interval_s}: {wave.notes}"
    return "" if wave.has_volts else f"no volts: {wave.notes}"
