"""Files as oscilloscopes and loggers write them, by shape, each made from one known waveform."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field

import numpy as np

N = 1500
DT = 2e-6
T = -1e-3 + DT * np.arange(N)
V = np.round(1.5 * np.sin(2 * np.pi * 1000 * T + 0.3) + 0.2, 4)
W = np.round(0.4 * np.cos(2 * np.pi * 1000 * T), 4)
CODES = np.round(V * 60).astype(int)


@dataclass(frozen=True, slots=True)
class Shape:
    """A file and what must be read from it."""

    content: bytes
    """The file."""
    values: np.ndarray = field(default_factory=lambda: V)
    """What its samples are."""
    interval_s: float = DT
    """What its interval is."""
    has_volts: bool = True
    """Whether the file says volts, or leaves them to be assumed."""
    channel: int | None = None
    """What the person decides."""
    stated_s: float | None = None
    """What the person states."""
    tolerance: float = 1e-12
    """Largest difference allowed, in the unit of `values`."""


def rows(*columns: Iterable[str], by: str = ",", end: str = "\n", tail: str = "") -> str:
    """Write columns of cells as rows."""
    return "".join(by.join(cells) + tail + end for cells in zip(*columns, strict=True))


def cells(values: Iterable[float], form: str = ".4f") -> list[str]:
    """Print values in one format."""
    return [format(value, form) for value in values]


def comma(printed: Iterable[str]) -> list[str]:
    """Give numbers a decimal comma, and points between groups if there were commas."""
    return [text.replace(",", "_").replace(".", ",").replace("_", ".") for text in printed]


def beside(remarks: list[str], width: int) -> list[str]:
    """Put remarks beside the first rows, as many cells wide."""
    blank = "," * (width - 1)
    return [*remarks, *[blank] * (N - len(remarks))]


TIMES = cells(T, ".6f")
VOLTS = cells(V)
OTHER = cells(W)

SHAPES: dict[str, Callable[[], Shape]] = {}


def shape(function: Callable[[], Shape]) -> Callable[[], Shape]:
    """Enter a shape under its function's name."""
    SHAPES[function.__name__] = function
    return function


def of(text: str, encoding: str = "utf-8", **more: object) -> Shape:
    """Make a shape of a text."""
    return Shape(text.encode(encoding), **more)


@shape
def comments_then_names_with_units() -> Shape:
    head = "# saved by an instrument\n# serial 0\n\nTime (s),Channel 1 (V)\n"
    return of(head + rows(TIMES, VOLTS))


@shape
def names_row_and_units_row_after_an_empty_line() -> Shape:
    return of("\nx-axis,1\nsecond,Volt\n" + rows(cells(T, ".8E"), cells(V, ".6E")))


@shape
def no_time_but_start_and_increment_with_trailing_commas() -> Shape:
    head = "X,CH1,Start,Increment,\nSequence,Volt,-1.000000E-03,2.000000E-06,\n"
    return of(head + rows(map(str, range(N)), VOLTS, by=",", tail=",,,"))


@shape
def two_channels_start_and_increment() -> Shape:
    head = "X,CH1,CH2,Start,Increment,\nSequence,Volt,Volt,-1.0E-03,2.0E-06,\n"
    body = rows(map(str, range(N)), VOLTS, OTHER, tail=",")
    return of(head + body, values=W, channel=2)


@shape
def keys_and_values_then_names() -> Shape:
    head = (
        "Model,none\nFirmware Version,1.2.3\n\nPoint Format,Y,\nHorizontal Units,s,\n"
        "Horizontal Scale,0.0002,\nSample Interval,2e-06,\nRecord Length,1500,\n"
        "Probe Attenuation,10,\nVertical Units,V,\nVertical Offset,0,\nVertical Scale,0.5,\n\n\n"
        "TIME,CH1,CH2\n"
    )
    return of(head + rows(cells(T, ".6e"), VOLTS, OTHER), values=W, channel=2)


@shape
def remarks_beside_the_data() -> Shape:
    remarks = [
        'Record Length,1500,"Points"', "Sample Interval,2e-06,s", "Trigger Point,500,Samples",
        '"","",', "Source,CH1,", "Vertical Units,V,", "Vertical Scale,0.5,", "Probe Atten,1,",
    ]  # fmt: skip
    return of(rows(beside(remarks, 3), cells(T, ".9f"), cells(V, ".5f")))


@shape
def segment_lines_then_names() -> Shape:
    head = (
        "SOMETHING,00000,Waveform\nSegments,1,SegmentSize,1500\n"
        "Segment,TrigTime,TimeSinceSegment1\n#1,01-Jan-2024 10:00:00,0\nTime,Ampl\n"
    )
    return of(head + rows(cells(T, ".8e"), VOLTS, end="\r\n"))


@shape
def codes_with_step_offset_and_zero() -> Shape:
    head = "BYT_NR,2\nXINCR,2.0E-6\nYMULT,0.0166666666666667\nYOFF,-20\nYZERO,0.25\n"
    text = head + "".join(f"{code}\n" for code in CODES)
    return of(text, values=0.25 + (CODES + 20) / 60, tolerance=1e-9)


@shape
def codes_with_increment_and_reference() -> Shape:
    head = "points,1500\nxincrement,2e-6\nyincrement,0.02\nyorigin,0\nyreference,128\n"
    text = head + "".join(f"{code + 128}\n" for code in CODES)
    return of(text, values=CODES * 0.02)


@shape
def codes_at_twenty_five_a_division() -> Shape:
    head = (
        "Memory Length,1500\nSource,CH1\nVertical Units,V\nVertical Scale,5.000E-01\n"
        "Horizontal Units,S\nSampling Period,2.000E-06\nWaveform Data,\n"
    )
    return of(head + "".join(f"{code},\n" for code in CODES), values=CODES / 25 * 0.5)


@shape
def codes_of_unknown_size() -> Shape:
    text = "Sample interval,2us\n" + "".join(f"{code}\n" for code in CODES)
    return of(text, values=CODES / 128, has_volts=False)


@shape
def one_column_with_a_stated_interval() -> Shape:
    return of("".join(f"{cell}\n" for cell in VOLTS), stated_s=DT)


@shape
def one_column_with_decimal_commas() -> Shape:
    return of("".join(f"{cell}\n" for cell in comma(VOLTS)), stated_s=DT)


@shape
def all_on_one_line() -> Shape:
    return of(",".join(VOLTS) + "\n", stated_s=DT)


@shape
def records_along_the_line_with_names() -> Shape:
    return of("Time (s)," + ",".join(TIMES) + "\nCH1 (V)," + ",".join(VOLTS) + "\n")


@shape
def keys_then_all_on_one_line() -> Shape:
    return of("Sample rate;500 kSa/s\n" + ";".join(comma(VOLTS)) + "\n")


@shape
def index_time_codes_volts() -> Shape:
    head = "Index,Time (us),ADC,Volts\n"
    volts = CODES / 50
    text = rows(map(str, range(N)), cells(T * 1e6, ".1f"), map(str, CODES), cells(volts, ".2f"))
    return of(head + text, values=volts)


@shape
def codes_beside_volts_without_names() -> Shape:
    return of(rows(TIMES, map(str, CODES), cells(CODES / 50, ".2f")), values=CODES / 50)


@shape
def microseconds_and_millivolts() -> Shape:
    return of("Time (us),CH1 (mV)\n" + rows(cells(T * 1e6, ".1f"), cells(V * 1e3, ".1f")))


@shape
def units_row_in_brackets() -> Shape:
    head = "Time,Channel A,Channel B\n(ms),(V),(mV)\n\n"
    text = rows(cells(T * 1e3, ".3f"), VOLTS, cells(W * 1e3, ".1f"))
    return of(head + text, values=W, channel=2)


@shape
def stated_separator_semicolons_decimal_commas() -> Shape:
    head = "sep=;\r\nZeit (s);Kanal 1 (V)\r\n"
    return of(head + rows(comma(TIMES), comma(VOLTS), by=";", end="\r\n"), encoding="utf-8-sig")


@shape
def tabs_decimal_commas_exponents_utf_16() -> Shape:
    text = "Zeit/s\tU/V\n" + rows(comma(cells(T, ".5E")), comma(cells(V, ".4E")), by="\t")
    return of(text, encoding="utf-16")


@shape
def utf_16_without_a_mark() -> Shape:
    return of("Time (s)\tCH1 (V)\n" + rows(TIMES, VOLTS, by="\t"), encoding="utf-16-be")


@shape
def points_between_thousands() -> Shape:
    text = rows(comma(cells(T * 1e6, ",.1f")), comma(cells(V * 1e3, ",.1f")), by=";")
    return of("t in us;U in mV\n" + text)


@shape
def blanks_between_thousands_latin_1() -> Shape:
    times = [cell.replace(",", "\xa0").replace(".", ",") for cell in cells(T * 1e6, ",.1f")]
    volts = [cell.replace(",", " ").replace(".", ",") for cell in cells(V * 1e3, ",.1f")]
    return of("t [µs];U [mV]\n" + rows(times, volts, by=";"), encoding="latin-1")


@shape
def quoted_cells() -> Shape:
    quoted = [[f'"{cell}"' for cell in column] for column in (TIMES, VOLTS)]
    return of('"Time (s)","CH1, probe (V)"\n' + rows(*quoted))


@shape
def quoted_decimal_commas_between_commas() -> Shape:
    quoted = [[f'"{cell}"' for cell in comma(column)] for column in (TIMES, VOLTS)]
    return of('"Time (s)","CH1 (V)"\n' + rows(*quoted))


@shape
def blanks_between_columns() -> Shape:
    padded = [[cell.rjust(14) for cell in column] for column in (TIMES, VOLTS)]
    return of("   Time (s)   Channel 1 (V)\n" + rows(*padded, by=" "))


@shape
def padding_after_the_end() -> Shape:
    return of("Time (s),CH1 (V)\n" + rows(TIMES, VOLTS) + "\0" * 4096)


@shape
def padding_after_every_line() -> Shape:
    return of("Time (s),CH1 (V)\n" + rows(TIMES, VOLTS, end="\0\0\r\n"))


@shape
def old_line_ends() -> Shape:
    return of("Time (s),CH1 (V)\r" + rows(TIMES, VOLTS, end="\r"))


@shape
def doubled_line_ends() -> Shape:
    return of("Time (s),CH1 (V)\r\r\n" + rows(TIMES, VOLTS, end="\r\r\n"))


@shape
def numbers_with_their_units() -> Shape:
    times = [f"{cell} us" for cell in cells(T * 1e6, ".1f")]
    return of("Time,CH1\n" + rows(times, [f"{cell}mV" for cell in cells(V * 1e3, ".1f")]))


@shape
def numbers_with_prefixes() -> Shape:
    times = [f"{cell}u" for cell in cells(T * 1e6, ".1f")]
    return of("Time (s),CH1 (V)\n" + rows(times, [f"{cell}m" for cell in cells(V * 1e3, ".1f")]))


@shape
def times_with_too_few_digits() -> Shape:
    return of("Time (s),CH1 (V)\n" + rows(cells(T, ".5f"), VOLTS))


@shape
def times_with_few_significant_digits() -> Shape:
    return of("Time (s),CH1 (V)\n" + rows(cells(T + 1.0, ".6g"), VOLTS))


@shape
def times_in_single_precision() -> Shape:
    printed = [repr(float(np.float32(0.05 + time))) for time in T]
    return of("Time (s),CH1 (V)\n" + rows(printed, VOLTS))


@shape
def seconds_since_an_epoch() -> Shape:
    return of("Timestamp (s),CH1 (V)\n" + rows(cells(1714560000 + T, ".6f"), VOLTS))


@shape
def times_of_day_across_midnight() -> Shape:
    since = T - T[0] + 86399.999
    day = np.where(since < 86400, "2024-05-01", "2024-05-02")
    clock = [f"{d}T{int(s // 3600) % 24:02d}:{int(s // 60) % 60:02d}:{s % 60:09.6f}"
             for d, s in zip(day, np.round(since, 6), strict=True)]  # fmt: skip
    return of("Timestamp,CH1 (V)\n" + rows(clock, VOLTS))


@shape
def a_time_column_for_each_channel() -> Shape:
    head = "t1 (s),CH1 (V),t2 (s),CH2 (V)\n"
    return of(head + rows(TIMES, VOLTS, cells(T + 1e-6, ".6f"), OTHER), values=W, channel=2)


@shape
def rate_and_unit_in_remarks() -> Shape:
    head = "Sample Rate: 500 kSa/s\nUnits: mV\n\n"
    return of(head + "".join(f"{cell}\n" for cell in cells(V * 1e3, ".1f")))


@shape
def interval_in_a_comment() -> Shape:
    return of("# dt = 2 us\n# CH1 (V)\n" + "".join(f"{cell}\n" for cell in VOLTS))


@shape
def statistics_between_names_and_data() -> Shape:
    return of("Time (s),CH1 (V)\nMax,1.7\nMin,-1.3\n" + rows(TIMES, VOLTS))


@shape
def an_end_mark_below_the_data() -> Shape:
    return of("Time (s),CH1 (V)\n" + rows(TIMES, VOLTS) + "END OF FILE\n")


@shape
def a_last_row_cut_through() -> Shape:
    text = "Time (s),CH1 (V)\n" + rows(TIMES, VOLTS)
    return of(text[:-4], values=V[:-1])


@shape
def no_line_end_after_the_last_row() -> Shape:
    return of(("Time (s),CH1 (V)\n" + rows(TIMES, VOLTS))[:-1])


@shape
def overrange_marks_of_several_kinds() -> Shape:
    marks = ["****", "OVL", "inf", "-inf", "nan", "", "9.9E+37", "9.91E37", "---.--", "#N/A"]
    volts = [*VOLTS]
    values = V.copy()
    for place, mark in enumerate(marks):
        volts[400 + 7 * place] = mark
        values[400 + 7 * place] = np.nan
    return of("Time (s),CH1 (V)\n" + rows(TIMES, volts), values=values)


@shape
def amperes() -> Shape:
    return of("Time (s),I (mA)\n" + rows(TIMES, VOLTS), values=V / 1e3, has_volts=False)


@shape
def a_real_minus_sign() -> Shape:
    signed = [cell.replace("-", "\N{MINUS SIGN}") for cell in VOLTS]
    return of("Time (s);CH1 (V)\n" + rows(TIMES, signed, by=";"))


@shape
def whole_nanoseconds() -> Shape:
    return of("Time (ns),CH1 (V)\n" + rows(cells(np.round(T * 1e9), ".0f"), VOLTS))


@shape
def more_header_than_data() -> Shape:
    remarks = "".join(f"Remark {number},nothing\n" for number in range(3000))
    return of(remarks + "Time (s),CH1 (V)\n" + rows(TIMES, VOLTS))


@shape
def values_that_say_whose_they_are() -> Shape:
    head = (
        "Record Length,Analog:1500\nSample Interval,Analog:2.0e-06\nVertical Units,CH1:mV\n"
        "Vertical Scale,CH1:500\nHorizontal Units,s\n\nValue\n"
    )
    return of(head + "".join(f"{cell}\n" for cell in cells(V * 1e3, ".1f")))


@shape
def start_and_increment_in_the_names_row() -> Shape:
    return of("CH1V,t0 = -1e-03,tInc = 2e-06,\n" + "".join(f"{cell},\n" for cell in VOLTS))


@shape
def remarks_with_equal_signs() -> Shape:
    head = "#CHANNEL:CH1\n#CLOCK=2.000uS\n#SIZE=1500\n#UNITS:V\n"
    return of(head + "".join(f"{cell}\n" for cell in VOLTS))


@shape
def a_meter_s_log_with_time_last() -> Shape:
    head = "Reading,Unit,Range,Relative Time (s)\n"
    return of(head + rows(cells(V, ".6E"), ["VDC"] * N, ["10"] * N, cells(T - T[0], ".6f")))


@shape
def a_nameless_counter_before_named_columns() -> Shape:
    return of(",time,ch1\n" + rows(map(str, range(N)), TIMES, VOLTS))


@shape
def date_time_and_value_with_decimal_commas() -> Shape:
    clock = [f"12:00:{cell}" for cell in comma(cells(T - T[0] + 10, ".6f"))]
    text = rows(["01.05.2024"] * N, clock, comma(VOLTS), by=";")
    return of("Datum;Zeit;U [V]\n" + text)


@shape
def a_column_of_words_after_the_values() -> Shape:
    return of("t [s];U [V];state\n" + rows(TIMES, VOLTS, ["OK"] * N, by=";"))


@shape
def names_in_a_comment_between_blanks() -> Shape:
    return of("# time voltage\n" + rows(cells(T, ".18e"), cells(V, ".18e"), by=" "))


@shape
def an_interval_given_as_a_rate() -> Shape:
    return of("Sample Interval,500 kHz\n" + "".join(f"{cell}\n" for cell in VOLTS))


@shape
def empty_columns_between() -> Shape:
    return of("Time (s)\t\tCH1 (V)\n" + rows(TIMES, [""] * N, VOLTS, by="\t"))


@shape
def two_columns_of_whole_codes() -> Shape:
    text = "dt,2us\nA,B\n" + rows(map(str, CODES + 128), map(str, CODES + 100))
    return of(text, values=(CODES - 28) / 128, has_volts=False, channel=2)
