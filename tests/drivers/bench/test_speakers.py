"""Each dialect, read off the raw socket by the formula that defines it."""

from __future__ import annotations

import struct
from collections.abc import Iterator
from contextlib import contextmanager

import numpy as np
import pytest
from numpy.typing import NDArray

from drivers.bench import DIALECTS, Bench
from tests.drivers.bench.talker import Talker, meant

Array = NDArray[np.float64]


@contextmanager
def speaking(dialect: str, **options: object) -> Iterator[tuple[Bench, Talker]]:
    with Bench(31, dialect=dialect, **options) as bench, Talker(bench) as talker:  # type: ignore[arg-type]
        yield bench, talker


def check(bench: Bench, volts: Array, interval_s: float, *, within: float = 1e-9) -> None:
    """Compare with what the digitiser means, volts and seconds."""
    frame = bench.instrument.frame()
    np.testing.assert_allclose(volts, frame.volts(), rtol=0, atol=within * 13)
    assert interval_s == pytest.approx(frame.settings.interval_s, rel=max(within, 1e-9))
    assert np.ptp(volts) > 9.0


def fields(talker: Talker) -> list[float]:
    return [float(field) for field in talker.ask(":WAVeform:PREamble?").split(",")]


ARM = {
    "ten-field": (":WAVeform:POINts:MODE RAW", ":DIGitize"),
    "ten-field-code": (":WAVeform:MODE RAW", ":SINGle"),
    "ten-field-signed": (":WAVeform:POINts:MODE RAW", ":SINGle"),
}
WORDS = {"ten-field": ">u2", "ten-field-code": "<u2", "ten-field-signed": ">i2"}
BYTES = {"ten-field": "u1", "ten-field-code": "u1", "ten-field-signed": "i1"}


def ten_field_volts(dialect: str, codes: Array, pre: list[float]) -> Array:
    if dialect == "ten-field-code":
        return (codes - pre[8] - pre[9]) * pre[7]
    if dialect == "ten-field":
        return (codes - pre[9]) * pre[7] + pre[8]
    return codes * pre[7] + pre[8]


@pytest.mark.parametrize("offset_v", [0.0, 0.45])
@pytest.mark.parametrize("average", [1, 64])
@pytest.mark.parametrize("dialect", sorted(ARM))
def test_ten_fields_and_words_give_volts(dialect: str, average: int, offset_v: float) -> None:
    with speaking(dialect) as (bench, talker):
        talker.say(f":CHANnel1:OFFSet {offset_v}", ":WAVeform:FORMat WORD", ":ACQuire:TYPE AVERage")
        talker.say(
            f":ACQuire:{'AVERages' if 'code' in dialect else 'COUNt'} {average}", *ARM[dialect]
        )
        pre = fields(talker)
        codes = np.frombuffer(talker.block(":WAVeform:DATA?")[0], WORDS[dialect]).astype(float)
        assert pre[0] == 1
        assert pre[3] == average
        check(bench, ten_field_volts(dialect, codes, pre), pre[4])
        assert talker.ask(":SYSTem:ERRor?") == '0,"No error"'


@pytest.mark.parametrize("dialect", sorted(ARM))
def test_ten_fields_and_bytes_give_volts(dialect: str) -> None:
    with speaking(dialect) as (bench, talker):
        talker.say(":WAVeform:FORMat BYTE", *ARM[dialect])
        pre = fields(talker)
        codes = np.frombuffer(talker.block(":WAVeform:DATA?")[0], BYTES[dialect]).astype(float)
        assert pre[0] == 0
        assert pre[2] == codes.size == 10_000
        check(bench, ten_field_volts(dialect, codes, pre), pre[4])


@pytest.mark.parametrize("dialect", sorted(ARM))
def test_ten_fields_and_text_give_the_same_volts(dialect: str) -> None:
    with speaking(dialect) as (bench, talker):
        talker.say(":WAVeform:FORMat ASCii", *ARM[dialect])
        pre = fields(talker)
        text = talker.block(":WAVeform:DATA?")[0].decode()
        assert pre[0] == (2 if dialect == "ten-field-code" else 4)
        check(bench, np.array([float(v) for v in text.split(",")]), pre[4])


@pytest.mark.parametrize("order", ["LSBFirst", "MSBFirst"])
@pytest.mark.parametrize("unsigned", ["ON", "OFF"])
def test_volts_origin_has_both_byte_orders_and_both_signs(order: str, unsigned: str) -> None:
    with speaking("ten-field") as (bench, talker):
        talker.say(
            f":WAVeform:BYTeorder {order};UNSigned {unsigned};FORMat WORD", *ARM["ten-field"]
        )
        pre = fields(talker)
        kind = ("<" if order == "LSBFirst" else ">") + ("u2" if unsigned == "ON" else "i2")
        codes = np.frombuffer(talker.block(":WAVeform:DATA?")[0], kind).astype(float)
        check(bench, (codes - pre[9]) * pre[7] + pre[8], pre[4])


def test_volts_origin_marks_clipped_samples_and_keeps_the_hole_free() -> None:
    with speaking("ten-field") as (_, talker):
        talker.say(":CHANnel1:RANGe 8", ":WAVeform:FORMat BYTE", *ARM["ten-field"])
        codes = np.frombuffer(talker.block(":WAVeform:DATA?")[0], "u1")
        assert (codes.min(), codes.max()) == (1, 255)
        talker.say(":WAVeform:FORMat WORD")
        words = np.frombuffer(talker.block(":WAVeform:DATA?")[0], ">u2")
        assert (words.min(), words.max()) == (1, 0xFFFF)


def test_the_origin_of_code_origin_is_a_whole_number_of_codes() -> None:
    with speaking("ten-field-code") as (_, talker):
        talker.say(":CHANnel1:OFFSet -0.33")
        origin = talker.ask(":WAVeform:PREamble?").split(",")[8]
        assert origin == str(int(origin))


def test_code_origin_gives_its_memory_in_slices_that_join() -> None:
    with speaking("ten-field-code") as (bench, talker):
        talker.say(":ACQuire:MDEPth 600000", ":WAVeform:MODE RAW", ":SINGle")
        talker.say(":WAVeform:STARt 1", ":WAVeform:STOP 600000", ":WAVeform:DATA?")
        assert talker.ask(":SYSTem:ERRor?").startswith("-223")  # more than a block holds
        slices = []
        for start in range(1, 600_000, 200_000):
            talker.say(f":WAVeform:STARt {start};STOP {start + 199_999}")
            slices.append(np.frombuffer(talker.block(":WAVeform:DATA?")[0], "u1"))
        pre = fields(talker)
        check(
            bench,
            ten_field_volts("ten-field-code", np.concatenate(slices).astype(float), pre),
            pre[4],
        )


@pytest.mark.parametrize("dialect", sorted(ARM))
def test_a_running_digitiser_gives_only_the_points_of_its_screen(dialect: str) -> None:
    with speaking(dialect) as (_, talker):
        pre = fields(talker)
        codes = talker.block(":WAVeform:DATA?")[0]
        assert pre[2] == len(codes)
        assert 500 <= len(codes) <= 1400
        assert 1.0 / pre[4] < float(talker.ask(":ACQuire:SRATe?"))


@pytest.mark.parametrize("dialect", ["ten-field", "ten-field-signed"])
def test_peak_detection_is_told_in_the_second_field(dialect: str) -> None:
    with speaking(dialect) as (_, talker):
        talker.say(":ACQuire:TYPE PEAK", *ARM[dialect])
        assert fields(talker)[1] == 1


# -- volts as they are ----------------------------------------------------------------------------


@pytest.mark.parametrize("border", ["NORMal", "SWAPped"])
@pytest.mark.parametrize("width", [32, 64])
def test_format_trace_gives_volts_in_both_widths_and_orders(width: int, border: str) -> None:
    with speaking("format-trace") as (bench, talker):
        talker.say(f"FORMat:DATA REAL,{width}", f"FORMat:BORDer {border}", "INITiate")
        assert talker.ask("*OPC?") == "1"
        payload, _ = talker.block("FETCh?")
        kind = (">" if border == "NORMal" else "<") + f"f{width // 8}"
        volts = np.frombuffer(payload, kind).astype(float)
        check(bench, volts, float(talker.ask("SENSe:SWEep:TINTerval?")),
              within=1e-9 if width == 64 else 1e-7)  # fmt: skip
        again, _ = talker.block("TRACe:DATA? CH1")
        assert again == payload


def test_format_trace_gives_text_too() -> None:
    with speaking("format-trace") as (bench, talker):
        talker.say("FORMat:DATA ASCii")
        volts = np.array([float(v) for v in talker.ask("READ?").split(",")])
        check(bench, volts, float(talker.ask("SWE:TINT?")))


def test_format_trace_says_over_and_under_by_numbers_of_the_standard() -> None:
    with speaking("format-trace") as (_, talker):
        talker.say("VOLTage:RANGe 4", "FORMat REAL,64")
        volts = np.frombuffer(talker.block("READ?")[0], ">f8")
        assert (volts.min(), volts.max()) == (-9.9e37, 9.9e37)


def test_format_trace_is_idle_until_initiated_and_sweeps_visibly() -> None:
    with speaking("format-trace", acquire_s=0.3) as (_, talker):
        talker.say("FORMat REAL,32", "TRACe:DATA? CH1")
        assert talker.ask("SYSTem:ERRor?").startswith("-230")
        talker.say("INITiate")
        assert talker.ask("STATus:OPERation:CONDition?") == "8"
        assert talker.ask("*OPC?") == "1"
        assert talker.ask("STATus:OPERation:CONDition?") == "0"
        assert len(talker.block("FETCh?")[0]) == 40_000


def test_format_trace_refuses_whole_numbers() -> None:
    with speaking("format-trace") as (_, talker):
        talker.say("FORMat INTeger,16")
        assert talker.ask("SYSTem:ERRor?").startswith("-224")


# -- keywords -------------------------------------------------------------------------------------


def keywords(line: str) -> dict[str, str]:
    pairs = (part.split(" ", 1) for part in line.rpartition(":")[2].split(";"))
    return {key: value.strip('"') for key, value in pairs}


@pytest.mark.parametrize("average", [1, 64])
@pytest.mark.parametrize("query", ["WFMOutpre?", "WFMPre?"])
@pytest.mark.parametrize(
    ("encoding", "kind"),
    [("RIBinary", ">i"), ("RPBinary", ">u"), ("SRIbinary", "<i"), ("SRPbinary", "<u")],
)
def test_keywords_and_curve_give_volts(encoding: str, kind: str, query: str, average: int) -> None:
    with speaking("keyword-curve") as (bench, talker):
        talker.say("ACQuire:MODe AVErage", f"ACQuire:NUMAVg {average}") if average > 1 else None
        talker.say("CH1:OFFSet 0.3", "ACQuire:STOPAfter SEQuence", "ACQuire:STATE RUN")
        talker.say(f"DATa:ENCdg {encoding};WIDth 2;STARt 1;STOP 10000")
        assert talker.ask("HEADer ON;*OPC?") == "1"
        pre = keywords(talker.ask(query))
        payload, text = talker.block("CURVe?")
        assert text == ":CURVE "
        codes = np.frombuffer(payload, f"{kind}2").astype(float)
        volts = (codes - float(pre["YOFF"])) * float(pre["YMULT"]) + float(pre["YZERO"])
        assert (pre["NR_PT"], pre["PT_FMT"], pre["BYT_NR"]) == ("10000", "Y", "2")
        check(bench, volts, float(pre["XINCR"]))


def test_the_two_preambles_hold_the_same_in_different_orders() -> None:
    with speaking("keyword-curve") as (_, talker):
        new, old = keywords(talker.ask("WFMOutpre?")), keywords(talker.ask("WFMPre?"))
        assert new == old
        assert list(new) != list(old)


def test_without_headers_values_stand_alone_and_can_be_asked_one_by_one() -> None:
    with speaking("keyword-curve") as (bench, talker):
        talker.say("HEADer OFF", "ACQuire:STATE STOP", "DATa:STOP 10000")
        pre = [float(talker.ask(f"WFMPre:{key}?")) for key in ("YMUlt", "YOFf", "YZEro", "XINcr")]
        payload, text = talker.block("CURVe?")
        assert text == ""
        codes = np.frombuffer(payload, "i1").astype(float)
        check(bench, (codes - pre[1]) * pre[0] + pre[2], pre[3])


def test_keyword_text_gives_codes() -> None:
    with speaking("keyword-curve") as (bench, talker):
        talker.say("HEADer OFF", "ACQuire:STATE STOP", "DATa:ENCdg ASCii", "DATa:STOP 10000")
        codes = np.array([int(code) for code in talker.ask("CURVe?").split(",")])
        check(bench, codes * float(talker.ask("WFMPre:YMUlt?")), 1e-6)


def test_a_source_that_is_off_gives_no_answer_and_an_event() -> None:
    with speaking("keyword-curve") as (_, talker):
        talker.say("*CLS", "HEADer OFF", "DATa:SOUrce CH2", "CURVe?")
        assert talker.silent()
        assert int(talker.ask("*ESR?")) & 16
        assert talker.ask("EVENT?") == "2244"
        assert talker.ask("EVENT?") == "0"


def test_events_wait_until_the_register_is_read() -> None:
    with speaking("keyword-curve") as (_, talker):
        talker.say("*CLS", "NONSENSE")
        assert talker.ask("EVENT?") == "1"
        assert talker.ask("*ESR?") == "32"
        assert talker.ask("EVMsg?") == '113,"Undefined header"'
        talker.say("SYSTem:ERRor?")
        assert talker.silent()


def test_an_envelope_says_so() -> None:
    with speaking("keyword-curve") as (_, talker):
        talker.say("ACQuire:MODe PEAKdetect")
        assert keywords(talker.ask("WFMPre?"))["PT_FMT"] == "ENV"


# -- descriptor and its look-alike ----------------------------------------------------------------


@pytest.mark.parametrize("order", ["LO", "HI"])
@pytest.mark.parametrize("width", ["BYTE", "WORD"])
@pytest.mark.parametrize("headers", ["OFF", "SHORT"])
def test_the_descriptor_gives_volts(headers: str, width: str, order: str) -> None:
    with speaking("descriptor") as (bench, talker):
        talker.say(f"CHDR {headers}", f"CORD {order}", f"CFMT DEF9,{width},BIN", "C1:OFST 0.2")
        assert talker.ask("TRMD SINGLE;WAIT;*OPC?") == "1"
        payload, text = talker.block("C1:WF? ALL")
        assert text == ("" if headers == "OFF" else "C1:WF ALL,")
        e = "<" if order == "LO" else ">"
        assert struct.unpack_from(e + "h", payload, 34)[0] == (1 if order == "LO" else 0)
        assert struct.unpack_from(e + "h", payload, 32)[0] == (1 if width == "WORD" else 0)
        lengths = struct.unpack_from(e + "6i", payload, 36)
        start, data_bytes = sum(lengths), struct.unpack_from(e + "i", payload, 60)[0]
        assert start > 346  # data do not start where the descriptor ends
        assert start + data_bytes == len(payload)
        gain, offset = struct.unpack_from(e + "ff", payload, 156)
        interval = struct.unpack_from(e + "f", payload, 176)[0]
        assert struct.unpack_from(e + "h", payload, 316)[0] <= 1
        kind = "i1" if width == "BYTE" else f"{e}i2"
        codes = np.frombuffer(payload[start:], kind).astype(float)
        # gain and offset travel as single precision
        check(bench, gain * codes - offset, interval, within=1e-7)


def test_the_descriptor_alone_and_the_data_alone_can_be_asked() -> None:
    with speaking("descriptor") as (_, talker):
        talker.say("CHDR OFF", "STOP")
        both, _ = talker.block("C1:WF? ALL")
        alone, _ = talker.block("C1:WF? DESC")
        data, _ = talker.block("C1:WF? DAT1")
        assert both.startswith(alone)
        assert both.endswith(data)
        assert (len(alone), len(data)) == (346, 10_000)


def test_sparsing_takes_every_so_manieth_point() -> None:
    with speaking("descriptor") as (bench, talker):
        talker.say("CHDR OFF", "STOP", "WFSU SP,4,NP,100,FP,8,SN,0")
        data, _ = talker.block("C1:WF? DAT1")
        codes = (bench.instrument.frame().words[8::4][:100] >> 8).astype(int) - 128
        assert np.frombuffer(data, "i1").tolist() == codes.tolist()


def test_a_new_acquisition_is_told_once() -> None:
    with speaking("descriptor", acquire_s=0.2) as (_, talker):
        talker.say("CHDR OFF", "TRMD SINGLE")
        assert talker.ask("INR?") == "0"
        talker.say("WAIT")
        assert talker.ask("INR?") == "1"
        assert talker.ask("INR?") == "0"


def test_an_unknown_header_stands_in_the_command_register() -> None:
    with speaking("descriptor") as (_, talker):
        talker.say("CHDR OFF", ":WAVeform:PREamble?")
        assert talker.ask("CMR?") == "1"
        assert talker.ask("CMR?") == "0"


SCALES = {"k": 1e3, "M": 1e6, "G": 1e9}


@pytest.mark.parametrize("headers", ["OFF", "SHORT"])
def test_volts_a_division_in_words_give_volts(headers: str) -> None:
    with speaking("vdiv-text") as (bench, talker):
        talker.say(f"CHDR {headers}", "C1:OFST -0.15", "TRMD SINGLE")

        def value(query: str, unit: str) -> float:
            text = talker.ask(query).split(" ")[-1].removesuffix(unit)
            scale = SCALES.get(text[-1], 1.0)
            return float(text.rstrip("kMG")) * scale

        vdiv, offset = value("C1:VDIV?", "V"), value("C1:OFST?", "V")
        rate, points = value("SARA?", "Sa/s"), value("SANU? C1", "pts")
        payload, text = talker.block("C1:WF? DAT2", after=b"\n\n")
        assert text.endswith("DAT2,")
        codes = np.frombuffer(payload, "i1").astype(float)
        assert codes.size == points == 10_000
        check(bench, codes * vdiv / 25.0 - offset, 1.0 / rate)


def test_the_look_alike_is_complete_at_once_whatever_is_under_way() -> None:
    with speaking("vdiv-text", acquire_s=0.4) as (_, talker):
        talker.say("CHDR OFF", "TRMD SINGLE")
        assert talker.ask("*OPC?;SAST?;INR?") == "1;Ready;0"


# -- headers beside the data ----------------------------------------------------------------------


@pytest.mark.parametrize("order", ["LSBFirst", "MSBFirst"])
@pytest.mark.parametrize(("form", "kind"), [("REAL,32", "f4"), ("UINT,8", "u1"), ("UINT,16", "u2")])
@pytest.mark.parametrize("average", [1, 64])
def test_a_data_header_gives_volts(form: str, kind: str, order: str, average: int) -> None:
    with speaking("data-header") as (bench, talker):
        talker.say(
            f"ACQuire:AVERage:COUNt {average}",
            "CHANnel1:ARIThmetics AVERage",
            "CHANnel1:OFFSet 0.25",
        )
        talker.say(f"FORMat {form}", f"FORMat:BORDer {order}")
        assert talker.ask("SINGle;*OPC?") == "1"
        first, last, points, values = map(float, talker.ask("CHANnel1:DATA:HEADer?").split(","))
        payload, _ = talker.block("CHANnel1:DATA?")
        raw = np.frombuffer(payload, ("<" if order == "LSBFirst" else ">") + kind).astype(float)
        if form != "REAL,32":
            raw = float(talker.ask("CHANnel1:DATA:YORigin?")) + raw * float(
                talker.ask("CHANnel1:DATA:YINCrement?")
            )
        assert values == 1
        assert points == raw.size
        if form == "UINT,8" and average > 1:  # the bits of the average do not fit
            assert np.max(np.abs(raw - meant(bench))) < 0.0501
            return
        check(bench, raw, (last - first) / (points - 1), within=1e-7 if "REAL" in form else 1e-9)


def test_the_scale_belongs_to_the_format_of_the_moment() -> None:
    with speaking("data-header") as (_, talker):
        talker.say("FORMat UINT,8")
        coarse = float(talker.ask("CHANnel1:DATA:YINCrement?"))
        talker.say("FORMat UINT,16")
        assert float(talker.ask("CHANnel1:DATA:YINCrement?")) == pytest.approx(coarse / 256.0)


def test_an_envelope_has_two_values_an_interval() -> None:
    with speaking("data-header") as (_, talker):
        talker.say("CHANnel1:TYPE PDETect", "FORMat REAL,32")
        _, _, points, values = talker.ask("SINGle;:CHANnel1:DATA:HEADer?").split(",")
        assert (points, values) == ("5000", "2")
        assert len(talker.block("CHANnel1:DATA?")[0]) == 40_000


@pytest.mark.parametrize("offset_v", [0.0, -0.35])
def test_a_header_with_its_data_gives_volts(offset_v: float) -> None:
    with speaking("memory-header") as (bench, talker):
        talker.say(f":CHANnel1:OFFSet {offset_v}", ":SINGle")
        assert talker.ask(":ACQuire1:STATe?") == "1"
        payload, text = talker.block(":ACQuire1:MEMory?")
        head = dict(pair.split(",", 1) for pair in text.split(";")[:-2])
        assert text.endswith(";Waveform Data;")
        codes = np.frombuffer(payload, ">i2").astype(float)
        check(bench, codes / 25.0 * float(head["Vertical Scale"]), float(head["Sampling Period"]))


# -- all of them ----------------------------------------------------------------------------------


@pytest.mark.parametrize("dialect", DIALECTS)
def test_every_dialect_identifies_itself_as_simulated_in_four_fields(dialect: str) -> None:
    with speaking(dialect) as (_, talker):
        answer = talker.ask("*IDN?")
        assert len(answer.split(",")) == 4
        assert len(answer) <= 72
        assert "simulated" in answer.lower()
        assert dialect in answer


TIME = {
    "format-trace": ("SENSe:SWEep:POINts 5000", "SENSe:SWEep:TINTerval 2e-6"),
    "ten-field": (":ACQuire:POINts 5000", ":TIMebase:RANGe 1e-2"),
    "ten-field-code": (":ACQuire:MDEPth 5000", ":TIMebase:SCALe 1e-3"),
    "ten-field-signed": (":ACQuire:POINts 5000", ":TIMebase:RANGe 1e-2"),
    "keyword-curve": ("HORizontal:RECOrdlength 5000", "HORizontal:SCAle 1e-3"),
    "descriptor": ("MSIZ 5K", "TDIV 1MS"),
    "vdiv-text": ("MSIZ 5K", "TDIV 1MS"),
    "data-header": ("ACQuire:POINts 5000", "TIMebase:RANGe 1e-2"),
    "memory-header": (":ACQuire:RECOrdlength 5000", ":TIMebase:SCALe 1e-3"),
}


@pytest.mark.parametrize("dialect", DIALECTS)
def test_every_dialect_sets_record_length_and_interval_in_its_own_way(dialect: str) -> None:
    with speaking(dialect) as (bench, talker):
        talker.say("*CLS", *TIME[dialect])
        assert talker.ask("*ESR?") == "0"
        assert bench.instrument.settings.points == 5000
        assert bench.instrument.settings.interval_s == pytest.approx(2e-6, rel=1e-12)


RANGE = {
    "format-trace": ("VOLTage:RANGe 10", 20.0),
    "ten-field": (":CHANnel1:RANGe 20", 20.0),
    "ten-field-code": (":CHANnel1:SCALe 2.5", 20.0),
    "ten-field-signed": (":CHANnel1:SCALe 2.5", 20.0),
    "keyword-curve": ("CH1:SCAle 2.5", 20.0),
    "descriptor": ("C1:VDIV 2V", 20.48),
    "vdiv-text": ("C1:VDIV 2V", 20.48),
    "data-header": ("CHANnel1:SCALe 2", 20.0),
    "memory-header": (":CHANnel1:SCALe 2", 20.48),
}


@pytest.mark.parametrize("dialect", DIALECTS)
def test_every_dialect_sets_its_range_and_comes_back_to_it_on_reset(dialect: str) -> None:
    with speaking(dialect) as (bench, talker):
        command, span = RANGE[dialect]
        talker.say("*CLS", command)
        assert talker.ask("*ESR?") == "0"
        assert bench.instrument.settings.full_scale_v == pytest.approx(span)
        talker.say("*RST")
        assert talker.ask("*OPC?") == "1"
        assert bench.instrument.settings.full_scale_v == pytest.approx(12.8)
