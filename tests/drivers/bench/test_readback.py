"""What was set can be asked back, dialect by dialect; what makes no sense is refused."""

from __future__ import annotations

import pytest

from drivers.bench import Bench
from tests.drivers.bench.talker import Talker

SET_AND_ASKED = [
    ("format-trace", "FORMat:DATA REAL,64", "FORMat:DATA?", "REAL,64"),
    ("format-trace", "FORMat:BORDer SWAPped", "FORM:BORD?", "SWAP"),
    ("format-trace", "VOLTage:RANGe 10", "SENSe:VOLTage:DC:RANGe:UPPer?", 10.0),
    ("format-trace", "VOLTage:RANGe:OFFSet 0.5", "VOLTage:RANGe:OFFSet?", 0.5),
    ("format-trace", "AVERage:COUNt 16", "AVERage:COUNt?", 16.0),
    ("format-trace", "AVERage:STATe ON", "AVERage:STATe?", "1"),
    ("format-trace", "INPut:COUPling AC", "INPut:COUPling?", "AC"),
    ("format-trace", "SWEep:POINts 2000", "TRACe:POINts?", 2000.0),
    ("format-trace", "INITiate:CONTinuous ON", "STAT:OPER:COND?", "0"),
    ("ten-field", ":CHANnel1:RANGe 20", ":CHANnel1:RANGe?", 20.0),
    ("ten-field", ":CHANnel1:SCALe 2", ":CHANnel1:SCALe?", 2.0),
    ("ten-field", ":CHANnel1:OFFSet 1", ":CHANnel1:OFFSet?", 1.0),
    ("ten-field", ":CHANnel1:COUPling AC", ":CHANnel1:COUPling?", "AC"),
    ("ten-field", ":TIMebase:RANGe 5ms", ":TIMebase:RANGe?", 5e-3),
    ("ten-field", ":TIMebase:SCALe 1e-3", ":TIMebase:SCALe?", 1e-3),
    ("ten-field", ":ACQuire:POINts 5000", ":ACQuire:POINts?", 5000.0),
    ("ten-field", ":ACQuire:TYPE PEAK", ":ACQuire:TYPE?", "PEAK"),
    ("ten-field", ":ACQuire:TYPE AVER", ":ACQuire:TYPE?", "AVER"),
    ("ten-field", ":ACQuire:COUNt 32", ":ACQuire:COUNt?", 32.0),
    ("ten-field", ":WAVeform:SOURce CHANnel3", ":WAVeform:SOURce?", "CHAN3"),
    ("ten-field", ":WAVeform:POINts 250", ":WAVeform:POINts?", 250.0),
    ("ten-field", ":WAVeform:UNSigned OFF", ":WAVeform:UNSigned?", "0"),
    ("ten-field", ":WAVeform:BYTeorder LSBFirst", ":WAVeform:BYTeorder?", "LSBF"),
    ("ten-field", ":CHANnel1:OFFSet 1", ":WAVeform:YORigin?", 1.0),
    ("ten-field", ":WAVeform:FORMat WORD", ":WAVeform:YREFerence?", 32768.0),
    ("ten-field", ":CHANnel1:RANGe 25.6", ":WAVeform:YINCrement?", 0.1),
    ("ten-field", ":RUN", ":OPERation:CONDition?", "8"),
    ("ten-field", ":STOP", ":OPERegister:CONDition?", "0"),
    ("ten-field-code", ":WAVeform:MODE RAW", ":WAVeform:MODE?", "RAW"),
    ("ten-field-code", ":WAVeform:STARt 5", ":WAVeform:STARt?", 5.0),
    ("ten-field-code", ":WAVeform:STOP 50", ":WAVeform:STOP?", 50.0),
    ("ten-field-code", ":ACQuire:MDEPth 6000", ":ACQuire:MDEPth?", 6000.0),
    ("ten-field-code", ":ACQuire:AVERages 4", ":ACQuire:AVERages?", 4.0),
    ("ten-field-code", ":CHANnel1:OFFSet -1", ":CHANnel1:OFFSet?", -1.0),
    ("ten-field-signed", ":WAVeform:POINts:MODE RAW", ":WAVeform:POINts:MODE?", "RAW"),
    ("ten-field-signed", ":ACQuire:COUNt 4", ":ACQuire:COUNt?", 4.0),
    ("ten-field-signed", ":TIMebase:RANGe 0.02", ":TIMebase:RANGe?", 0.02),
    ("ten-field-signed", ":SINGle", ":TRIGger:STATus?", "STOP"),
    ("keyword-curve", "VERBose OFF;ACQuire:STATE STOP", "ACQuire:STATE?", "0"),
    ("keyword-curve", "ACQuire:STOPAfter SEQuence", "ACQuire:STOPAfter?", "SEQUENCE"),
    ("keyword-curve", "ACQuire:MODe AVErage", "ACQuire:MODe?", "AVERAGE"),
    ("keyword-curve", "ACQuire:NUMAVg 4", "ACQuire:NUMAVg?", 4.0),
    ("keyword-curve", "HORizontal:RECOrdlength 4000", "HORizontal:RECOrdlength?", 4000.0),
    ("keyword-curve", "HORizontal:MAIn:SCAle 2e-3", "HORizontal:SCAle?", 2e-3),
    ("keyword-curve", "CH1:SCAle 2", "CH1:SCAle?", 2.0),
    ("keyword-curve", "CH1:OFFSet 0.25", "CH1:OFFSet?", 0.25),
    ("keyword-curve", "CH1:COUPling AC", "CH1:COUPling?", "AC"),
    ("keyword-curve", "DATa:SOUrce CH4", "DATa:SOUrce?", "CH4"),
    ("keyword-curve", "DATa:ENCdg SRPbinary", "DATa:ENCdg?", "SRP"),
    ("keyword-curve", "DATa:WIDth 2", "DATa:WIDth?", 2.0),
    ("keyword-curve", "DATa:STARt 7", "DATa:STARt?", 7.0),
    ("keyword-curve", "DATa:STOP 70", "DATa:STOP?", 70.0),
    ("descriptor", "CORD LO", "CORD?", "LO"),
    ("descriptor", "CFMT DEF9,WORD,BIN", "CFMT?", "DEF9,WORD,BIN"),
    ("descriptor", "WFSU SP,2,NP,3,FP,4", "WFSU?", "SP,2,NP,3,FP,4,SN,0"),
    ("descriptor", "C1:VDIV 2V", "C1:VDIV?", 2.0),
    ("descriptor", "C1:OFST -500mV", "C1:OFST?", -0.5),
    ("descriptor", "C1:CPL A1M", "C1:CPL?", "A1M"),
    ("descriptor", "TDIV 2MS", "TDIV?", 2e-3),
    ("descriptor", "MSIZ 5K", "MSIZ?", 5000.0),
    ("descriptor", "TRMD STOP", "TRMD?", "STOP"),
    ("descriptor", "STOP;TRMD AUTO", "TRMD?", "AUTO"),
    ("descriptor", "STOP;ARM;WAIT", "EXR?", "0"),
    ("vdiv-text", "ACQW PEAK_DETECT", "ACQW?", "PEAK_DETECT"),
    ("vdiv-text", "ACQW AVERAGE", "ACQW?", "AVERAGE"),
    ("vdiv-text", "ACQW SAMPLING", "ACQW?", "SAMPLING"),
    ("vdiv-text", "AVGA 16", "AVGA?", 16.0),
    ("vdiv-text", "MSIZ 14K", "MSIZ?", "14k"),
    ("vdiv-text", "TDIV 1MS", "TRDL?", 0.0),
    ("data-header", "FORMat UINT,16", "FORMat?", "UINT,16"),
    ("data-header", "FORMat:BORDer MSBFirst", "FORMat:BORDer?", "MSBF"),
    ("data-header", "CHANnel1:SCALe 2", "CHANnel1:SCALe?", 2.0),
    ("data-header", "CHANnel1:RANGe 20", "CHANnel1:RANGe?", 20.0),
    ("data-header", "CHANnel1:OFFSet 1", "CHANnel1:OFFSet?", 1.0),
    ("data-header", "CHANnel1:COUPling AC", "CHANnel1:COUPling?", "AC"),
    ("data-header", "CHANnel1:TYPE PDETect", "CHANnel1:TYPE?", "PDET"),
    ("data-header", "TIMebase:SCALe 2e-3", "TIMebase:SCALe?", 2e-3),
    ("data-header", "TIMebase:RANGe 2e-2", "TIMebase:RANGe?", 2e-2),
    ("data-header", "ACQuire:POINts 5000", "ACQuire:POINts:VALue?", 5000.0),
    ("data-header", "ACQuire:AVERage:COUNt 4", "ACQuire:AVERage:COUNt?", 4.0),
    ("data-header", "CHANnel1:ARIThmetics AVERage", "CHANnel1:ARIThmetics?", "AVER"),
    ("data-header", "TIMebase:RANGe 1e-2", "ACQuire:SRATe?", 1e6),
    ("data-header", "STOP", "CHANnel1:STATe?", "1"),
    ("data-header", "RUN", "CHANnel2:STATe?", "0"),
    ("data-header", "FORMat REAL,32;SINGle", "CHANnel1:DATA:YRESolution?", "8"),
    ("data-header", "FORMat REAL,32", "CHANnel1:DATA:YINCrement?", 0.05),
    ("memory-header", ":CHANnel1:SCALe 2", ":CHANnel1:SCALe?", 2.0),
    ("memory-header", ":CHANnel1:OFFSet 1", ":CHANnel1:OFFSet?", 1.0),
    ("memory-header", ":CHANnel1:COUPling AC", ":CHANnel1:COUPling?", "AC"),
    ("memory-header", ":TIMebase:SCALe 2e-3", ":TIMebase:SCALe?", 2e-3),
    ("memory-header", ":ACQuire:RECOrdlength 4000", ":ACQuire:RECOrdlength?", 4000.0),
    ("memory-header", ":ACQuire:AVERage 4", ":ACQuire:AVERage?", 4.0),
    ("memory-header", ":ACQuire:MODe AVERage", ":ACQuire:MODe?", "AVER"),
    ("memory-header", ":STOP", ":ACQuire1:STATe?", "1"),
    ("memory-header", ":RUN", ":ACQuire1:STATe?", "0"),
]


@pytest.mark.parametrize(("dialect", "command", "query", "wanted"), SET_AND_ASKED)
def test_what_was_set_can_be_asked_back(
    dialect: str, command: str, query: str, wanted: str | float
) -> None:
    with Bench(1, dialect=dialect) as bench, Talker(bench) as talker:
        talker.say("CHDR OFF" if dialect in ("descriptor", "vdiv-text") else "*CLS")
        if dialect == "keyword-curve":
            talker.say("HEADer OFF")
        talker.say(command)
        answer = talker.ask(query)
        if isinstance(wanted, str):
            assert answer == wanted
        else:
            assert float(answer) == pytest.approx(wanted, rel=1e-9)


REFUSED = [
    ("format-trace", "FORMat REAL,16", -224),
    ("format-trace", "FORMat", -109),
    ("format-trace", "TRACe:DATA? CH9", -224),
    ("ten-field", ":WAVeform:SOURce FUNCtion1", -224),
    ("ten-field", ":WAVeform:SOURce CHANnel2;DATA?", -221),
    ("ten-field", ":WAVeform:SOURce CHANnel2;PREamble?", -221),
    ("ten-field", ":WAVeform:FORMat NIBBle", -224),
    ("ten-field", ":CHANnel1:RANGe", -109),
    ("ten-field", ":CHANnel1:RANGe 1e9", -222),
    ("ten-field", ":ACQuire:POINts 5e6", -222),
    ("ten-field-code", ":STOP;:WAVeform:MODE RAW;STARt 20000;DATA?", -222),
    ("data-header", "FORMat UINT,32", -224),
    ("data-header", "FORMat", -109),
    ("data-header", "CHANnel2:DATA?", -221),
    ("data-header", "CHANnel2:DATA:HEADer?", -221),
    ("memory-header", ":ACQuire2:MEMory?", -221),
]


@pytest.mark.parametrize(("dialect", "command", "code"), REFUSED)
def test_what_makes_no_sense_is_refused_with_its_number(
    dialect: str, command: str, code: int
) -> None:
    with Bench(1, dialect=dialect) as bench, Talker(bench) as talker:
        talker.say("*CLS", command)
        assert talker.ask("SYSTem:ERRor?").startswith(f"{code},")
        assert int(talker.ask("*ESR?")) == (32 if code > -200 else 16)


@pytest.mark.parametrize(
    "command", ["CFMT DEF9,WORD", "WFSU SP", "WFSU XX,1", "C2:WF? ALL", "CORD MIDDLE", "TRMD"]
)
def test_the_classic_speakers_refuse_without_an_answer(command: str) -> None:
    with Bench(1, dialect="descriptor") as bench, Talker(bench) as talker:
        talker.say("CHDR OFF", "*CLS", command)
        assert int(talker.ask("*ESR?")) in (16, 32)


def test_text_of_a_data_header_is_volts() -> None:
    with Bench(1, dialect="data-header") as bench, Talker(bench) as talker:
        talker.say("FORMat ASCii", "SINGle")
        volts = [float(v) for v in talker.ask("CHANnel1:DATA?").split(",")]
        assert volts == pytest.approx(bench.instrument.frame().volts().tolist(), abs=1e-8)


def test_completion_can_be_noted_in_the_event_register() -> None:
    with Bench(1, dialect="data-header", acquire_s=0.1) as bench, Talker(bench) as talker:
        talker.say("*CLS", "SINGle;*OPC")
        assert talker.ask("*ESR?") == "1"
        assert talker.ask("*STB?;*TST?;:SYSTem:VERSion?") == "0;0;1999.0"
        assert talker.ask("SINGle;*WAI;*OPC?") == "1"
