"""What is said on the wire in each dialect, line by line, and what is made of the answers."""

from __future__ import annotations

import struct
from collections.abc import Sequence

import pytest

from drivers.contract import CaptureRequest, SourceError, SourceRefused
from drivers.visa import open_instrument
from tests.drivers.visa.scripted import Line, Mismatch, ScriptedLink

IDENTITY: Line = ("*IDN?", "EXAMPLE WORKS,SCOPE 10,SN0001,1.00")
CLEAR: Line = ("*CLS", None)
NO_ERROR: Line = ("SYSTem:ERRor?", '0,"No error"')
UNKNOWN: Line = ("SYSTem:ERRor?", '-113,"Undefined header"')
WELL: Line = ("*ESR?", "0")
LEFT: Line = ("*IDN?", "EXAMPLE WORKS,SCOPE 10,SN0001,1.00")
"""Asked last, so that nothing is lost on its way when the link closes."""

TEN_FIELD_OPENED: list[Line] = [
    IDENTITY,
    CLEAR,
    (":WAVeform:SOURce CHANnel1", None),
    NO_ERROR,
    (":WAVeform:BYTeorder LSBFirst", None),
    (":WAVeform:UNSigned ON", None),
    (":WAVeform:POINts:MODE RAW", None),
    UNKNOWN,  # of the unsigned command: it need not be known
    NO_ERROR,
    (":WAVeform:FORMat WORD", None),
    NO_ERROR,
    (":WAVeform:PREamble?", "+1,+0,3,1,1.0E-06,-2.0E-06,0,3.125E-05,+0.5E+00,32768"),
    (":OPERegister:CONDition?", "+32"),
    NO_ERROR,
    (":WAVeform:POINts 10000", None),
    NO_ERROR,
    (":CHANnel1:COUPling?", "AC"),
    (":ACQuire:TYPE?", "NORM"),
    (":ACQuire:SRATe?", "+1.0E+06"),
]
TEN_FIELD_COUPLING = TEN_FIELD_OPENED[-3]
TEN_FIELD_ARMED: list[Line] = [
    (":SINGle", None),
    (":OPERegister:CONDition?", "8"),
    (":OPERegister:CONDition?", "0"),
]
TEN_FIELD_READ: list[Line] = [
    (":ACQuire:TYPE?", "NORM"),
    (":ACQuire:SRATe?", "+1.0E+06"),
    (":WAVeform:PREamble?", "1,0,3,1,1.0E-06,-2.0E-06,0,3.125E-05,+0.5E+00,32768"),
    (":WAVeform:DATA?", b"#9000000006" + struct.pack("<3H", 0x7F00, 0x8000, 0x8200)),
]
TEN_FIELD_LEFT: list[Line] = [(":RUN", None), LEFT]
TEN_FIELD = [*TEN_FIELD_OPENED, *TEN_FIELD_ARMED, *TEN_FIELD_READ, NO_ERROR, *TEN_FIELD_LEFT]

TEN_FIELD_CODE: list[Line] = [
    IDENTITY,
    CLEAR,
    (":WAVeform:SOURce CHANnel1", None),
    NO_ERROR,
    (":WAVeform:MODE RAW", None),
    (":WAVeform:BYTeorder LSBFirst", None),
    (":WAVeform:UNSigned ON", None),
    UNKNOWN,
    UNKNOWN,
    NO_ERROR,
    (":WAVeform:FORMat WORD", None),
    ("SYSTem:ERRor?", '-224,"Illegal parameter value"'),
    NO_ERROR,
    (":WAVeform:FORMat BYTE", None),
    NO_ERROR,
    (":TRIGger:STATus?", "AUTO"),
    NO_ERROR,
    (":WAVeform:STARt 1", None),
    (":WAVeform:STOP 1000", None),
    NO_ERROR,
    (":CHANnel1:COUPling?", "DC"),
    (":ACQuire:TYPE?", "NORM"),
    (":ACQuire:SRATe?", "1.0E6"),
    (":ACQuire:MDEPth?", "3"),
    (":SINGle", None),
    (":TRIGger:STATus?", "WAIT"),
    (":TRIGger:STATus?", "STOP"),
    (":ACQuire:TYPE?", "NORM"),
    (":ACQuire:SRATe?", "1.0E6"),
    (":ACQuire:MDEPth?", "3"),
    (":WAVeform:STARt 1", None),
    (":WAVeform:STOP 3", None),
    (":WAVeform:PREamble?", "0,2,3,1,1.0E-06,-2.0E-06,0,8.0E-03,50,127"),
    (":WAVeform:DATA?", b"#9000000003" + bytes([177, 200, 152])),
    NO_ERROR,
    (":RUN", None),
    LEFT,
]

TEN_FIELD_SIGNED: list[Line] = [
    IDENTITY,
    CLEAR,
    (":WAVeform:SOURce CHANnel1", None),
    NO_ERROR,
    (":WAVeform:POINts:MODE RAW", None),
    NO_ERROR,
    (":WAVeform:FORMat WORD", None),
    NO_ERROR,
    (":WAVeform:PREamble?", "1,0,3,1,1.0E-06,0,0,1.0E-04,0.25,0"),
    (":OPERegister:CONDition?", "0"),
    NO_ERROR,
    (":WAVeform:POINts 10000", None),
    NO_ERROR,
    (":CHANnel1:COUPling?", "DC"),
    (":ACQuire:TYPE?", "NORM"),
    (":ACQuire:SRATe?", "1.0E6"),
    (":SINGle", None),
    (":OPERegister:CONDition?", "0"),
    (":ACQuire:TYPE?", "NORM"),
    (":ACQuire:SRATe?", "1.0E6"),
    (":WAVeform:PREamble?", "1,0,3,1,1.0E-06,0,0,1.0E-04,0.25,0"),
    (":WAVeform:DATA?", b"#16" + struct.pack(">3h", -256, 0, 512)),
    NO_ERROR,
    (":RUN", None),
    LEFT,
]

KEYWORDS = (
    ':WFMOUTPRE:BYT_NR 2;BIT_NR 16;ENCDG BIN;BN_FMT RI;BYT_OR MSB;WFID "Ch1; DC";NR_PT 3;'
    "PT_FMT Y;XINCR 1.0E-6;YMULT 31.25E-6;YOFF 0.0E0;YZERO 0.0E0"
)
KEYWORD_CURVE: list[Line] = [
    IDENTITY,
    CLEAR,
    ("DATa:SOUrce CH1", None),
    WELL,
    ("DATa:STARt 1", None),
    WELL,
    ("HEADer OFF", None),
    ("VERBose ON", None),
    ("*ESR?", "32"),
    ("EVENT?", "113"),
    ("DATa:ENCdg RIBinary", None),
    ("DATa:WIDth 2", None),
    WELL,
    ("DATa:STOP 1000000", None),
    ("*ESR?", "16"),
    ("EVENT?", "222"),
    ("CH1:COUPling?", "DC"),
    ("ACQuire:MODe?", "SAMPLE"),
    ("ACQuire:NUMAVg?", "16"),
    ("HEADer ON", None),
    ("WFMOutpre?", KEYWORDS),
    ("HEADer OFF", None),
    ("ACQuire:STOPAfter SEQuence", None),
    ("ACQuire:STATE RUN", None),
    ("*OPC?", "1"),
    ("ACQuire:MODe?", "SAMPLE"),
    ("ACQuire:NUMAVg?", "16"),
    ("HEADer ON", None),
    ("WFMOutpre?", KEYWORDS),
    ("HEADer OFF", None),
    ("CURVe?", b"#16" + struct.pack(">3h", 6400, 0, -6400)),
    WELL,
    ("ACQuire:STOPAfter RUNSTop", None),
    ("ACQuire:STATE RUN", None),
    LEFT,
]


def descriptor() -> bytes:
    """Gain .01, offset .2, codes 100, 0 and -100, with 7 bytes between descriptor and data."""
    head = bytearray(350)
    struct.pack_into("<hh", head, 32, 1, 1)
    struct.pack_into("<7i", head, 36, 350, 7, 0, 0, 0, 0, 6)
    struct.pack_into("<i", head, 148, 1)
    struct.pack_into("<ff", head, 156, 0.01 / 256.0, 0.2)
    struct.pack_into("<h", head, 172, 8)
    struct.pack_into("<f", head, 176, 1e-6)
    return bytes(head) + b"a note." + struct.pack("<3h", 25600, 0, -25600)


DESCRIPTOR: list[Line] = [
    IDENTITY,
    CLEAR,
    ("CHDR OFF", None),
    ("WFSU SP,0,NP,0,FP,0,SN,0", None),
    ("CORD LO", None),
    ("CFMT DEF9,WORD,BIN", None),
    ("INR?", "0"),
    ("C1:CPL?", "D1M"),
    CLEAR,
    ("INR?", "1"),
    ("TRMD SINGLE", None),
    ("INR?", "0"),
    ("INR?", "8193"),
    ("C1:WF? ALL", b"#9%09d" % len(descriptor()) + descriptor()),
    ("TRMD AUTO", None),
    LEFT,
]

VDIV_TEXT: list[Line] = [
    IDENTITY,
    CLEAR,
    ("CHDR OFF", None),
    ("WFSU SP,0,NP,0,FP,0", None),
    ("INR?", "0"),
    ("C1:CPL?", "A1M"),
    ("ACQW?", "SAMPLING"),
    CLEAR,
    ("INR?", "0"),
    ("TRMD SINGLE", None),
    ("INR?", "1"),
    ("ACQW?", "SAMPLING"),
    ("C1:VDIV?", "5.00E-01"),
    ("C1:OFST?", "1.00E-01V"),
    ("SARA?", "1.00MSa/s"),
    ("C1:WF? DAT2", b"DAT2,#9000000003" + bytes([25, 0, 231]) + b"\n\n"),
    ("TRMD AUTO", None),
    LEFT,
]

DATA_HEADER: list[Line] = [
    IDENTITY,
    CLEAR,
    ("FORMat REAL,32", None),
    NO_ERROR,
    ("FORMat:BORDer LSBFirst", None),
    NO_ERROR,
    ("CHANnel1:COUPling?", "DCL"),
    ("CHANnel1:DATA:YINCrement?", "0.25"),
    ("CHANnel1:DATA:YRESolution?", "8"),
    ("CHANnel1:RANGe?", "10"),
    ("CHANnel1:OFFSet?", "0"),
    ("CHANnel1:ARIThmetics?", "OFF"),
    ("ACQuire:AVERage:COUNt?", "8"),
    ("SINGle;*OPC?", "1"),
    ("CHANnel1:DATA:YINCrement?", "0.25"),
    ("CHANnel1:DATA:YRESolution?", "8"),
    ("CHANnel1:RANGe?", "10"),
    ("CHANnel1:OFFSet?", "0"),
    ("CHANnel1:ARIThmetics?", "OFF"),
    ("ACQuire:AVERage:COUNt?", "8"),
    ("CHANnel1:DATA:HEADer?", "-1.0E-6,1.0E-6,3,1"),
    ("CHANnel1:DATA?", b"#212" + struct.pack("<3f", 0.25, 0.5, -0.75)),
    NO_ERROR,
    ("RUN", None),
    LEFT,
]

MEMORY_HEADER: list[Line] = [
    IDENTITY,
    CLEAR,
    (":HEADer ON", None),
    (":SYSTem:ERRor?", '0,"No error"'),
    (":ACQuire1:STATe?", "0"),
    (":SYSTem:ERRor?", '0,"No error"'),
    (":CHANnel1:COUPling?", "DC"),
    (":SINGle", None),
    (":ACQuire1:STATe?", "0"),
    (":ACQuire1:STATe?", "1"),
    (
        ":ACQuire1:MEMory?",
        b"Format,2.0;Memory Length,3;Vertical Scale,+2.0E-01;Sampling Period,1.0E-06;"
        b"Waveform Data;\n#16" + struct.pack(">3h", 25, -50, 75),
    ),
    (":SYSTem:ERRor?", '0,"No error"'),
    (":RUN", None),
    LEFT,
]

FORMAT_TRACE: list[Line] = [
    IDENTITY,
    CLEAR,
    ("FORMat:BORDer NORMal", None),
    NO_ERROR,
    ("FORMat:DATA REAL,64", None),
    NO_ERROR,
    ("FORMat:DATA?", "REAL,64"),
    ("INPut:COUPling?", "DC"),
    ("INITiate", None),
    ("*OPC?", "1"),
    ("SENSe:SWEep:POINts?", "+3"),
    ("SENSe:SWEep:TINTerval?", "+1.0E-06"),
    ("FETCh?", b"#224" + struct.pack(">3d", 0.1, -0.2, 0.3)),
    NO_ERROR,
    LEFT,
]

SCRIPTS: dict[str, tuple[list[Line], list[float], str]] = {
    "ten-field": (TEN_FIELD, [0.492, 0.5, 0.516], "AC"),
    "ten-field-code": (TEN_FIELD_CODE, [0.0, 0.184, -0.2], "DC"),
    "ten-field-signed": (TEN_FIELD_SIGNED, [0.2244, 0.25, 0.3012], "DC"),
    "keyword-curve": (KEYWORD_CURVE, [0.2, 0.0, -0.2], "DC"),
    "descriptor": (DESCRIPTOR, [0.8, -0.2, -1.2], "DC"),
    "vdiv-text": (VDIV_TEXT, [0.4, -0.1, -0.6], "AC"),
    "data-header": (DATA_HEADER, [0.25, 0.5, -0.75], "DC"),
    "memory-header": (MEMORY_HEADER, [0.2, -0.4, 0.6], "DC"),
    "format-trace": (FORMAT_TRACE, [0.1, -0.2, 0.3], "DC"),
}


def played(monkeypatch, lines: Sequence[Line]) -> ScriptedLink:
    link = ScriptedLink(lines)
    monkeypatch.setattr("drivers.visa.source.open_link", lambda *_, **__: link)
    return link


@pytest.mark.parametrize("dialect", SCRIPTS)
def test_a_frame_is_asked_for_and_read_as_the_script_says(monkeypatch, dialect) -> None:
    lines, volts, coupling = SCRIPTS[dialect]
    link = played(monkeypatch, lines)
    with open_instrument("SCRIPT", dialect=dialect) as source:
        taken = source.capture()
    link.finished()
    assert list(taken.samples) == pytest.approx(volts, rel=1e-9, abs=1e-12)
    assert taken.interval_s == pytest.approx(1e-6, rel=1e-9)
    assert taken.coupling == coupling


def test_the_second_frame_costs_only_its_own_lines(monkeypatch) -> None:
    other: Line = (":WAVeform:DATA?", b"#16" + struct.pack("<3H", 0x7000, 0x8000, 0x8200))
    again = [*TEN_FIELD_ARMED, *TEN_FIELD_READ[:-1], other, NO_ERROR]
    link = played(monkeypatch, [*TEN_FIELD[:-2], *again, *TEN_FIELD_LEFT])
    with open_instrument("SCRIPT", dialect="ten-field") as source:
        source.capture()
        source.capture()
    link.finished()


def test_a_refused_command_is_told_with_its_words(monkeypatch) -> None:
    link = played(
        monkeypatch, [IDENTITY, CLEAR, (":WAVeform:SOURce CHANnel1", None), UNKNOWN, NO_ERROR]
    )
    with pytest.raises(SourceRefused, match="Undefined header"):
        open_instrument("SCRIPT", dialect="ten-field")
    link.finished()


def test_an_error_beside_a_frame_makes_it_be_taken_again(monkeypatch) -> None:
    error: Line = ("SYSTem:ERRor?", '-222,"Data out of range"')
    frame = [*TEN_FIELD_ARMED, *TEN_FIELD_READ]
    link = played(
        monkeypatch,
        [*TEN_FIELD_OPENED, *frame, error, NO_ERROR, *frame, NO_ERROR, *TEN_FIELD_LEFT],
    )
    with open_instrument("SCRIPT", dialect="ten-field") as source:
        assert source.capture(CaptureRequest()).samples.size == 3
    link.finished()


def test_averaging_is_asked_for_and_put_back(monkeypatch) -> None:
    ask = [
        (":ACQuire:TYPE?", "NORM"),
        (":ACQuire:COUNt?", "8"),
        NO_ERROR,
        (":ACQuire:TYPE AVER", None),
        (":ACQuire:COUNt 16", None),
        NO_ERROR,
    ]
    back = [(":ACQuire:COUNt 8", None), (":ACQuire:TYPE NORM", None)]
    frame = [*TEN_FIELD_ARMED, TEN_FIELD_COUPLING, *TEN_FIELD_READ, NO_ERROR]
    link = played(monkeypatch, [*TEN_FIELD_OPENED, *ask, *frame, *back, *TEN_FIELD_LEFT])
    with open_instrument("SCRIPT", dialect="ten-field") as source:
        source.capture(CaptureRequest(average=10))
    link.finished()


# The script itself must fail where a conversation goes another way.


def script_fails(monkeypatch, lines: Sequence[Line]) -> None:
    link = played(monkeypatch, lines)
    with pytest.raises((Mismatch, SourceError)):  # noqa: PT012
        with open_instrument("SCRIPT", dialect="vdiv-text") as source:
            source.capture()
        link.finished()


def test_the_script_fails_on_an_unexpected_line(monkeypatch) -> None:
    lines = list(VDIV_TEXT)
    lines[2] = ("CHDR SHORT", None)
    script_fails(monkeypatch, lines)


def test_the_script_fails_on_an_unread_answer(monkeypatch) -> None:
    lines = list(VDIV_TEXT)
    lines[2] = ("CHDR OFF", "an answer nobody asked for")
    script_fails(monkeypatch, lines)


def test_the_script_fails_on_a_line_left_over(monkeypatch) -> None:
    script_fails(monkeypatch, [*VDIV_TEXT, ("ONE MORE", None)])


def test_the_script_fails_on_an_answer_that_never_comes(monkeypatch) -> None:
    lines = list(VDIV_TEXT)
    lines[4] = ("INR?", None)
    script_fails(monkeypatch, lines)
