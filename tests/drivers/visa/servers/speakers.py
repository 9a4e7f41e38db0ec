"""One held-out instrument for each dialect, in every variety of width, order and sign."""

from __future__ import annotations

import struct
from fractions import Fraction
from typing import Literal

from tests.drivers.visa.servers.brain import Brain, block, forms, packed

Form = Literal["volts", "code", "signed"]


class TenField(Brain):
    """The ten-field preamble, in each of its forms.

    Parameters
    ----------
    form
        What y origin and y reference mean.
    words
        True where words are known.
    big
        Most significant byte first, whatever is asked.
    says_text
        True where samples can be sent as text.
    """

    def __init__(
        self,
        form: Form = "volts",
        *,
        words: bool = True,
        big: bool = False,
        says_text: bool = True,
        poll: str = ":OPERegister:CONDition?",
        y_origin: str | None = None,
        tells_depth: bool = True,
        kind: int = 0,
        seed: int = 1,
        points: int = 500,
    ) -> None:
        self.form, self.words, self.big, self.says_text = form, words, big, says_text
        self.poll = poll
        self.tells_depth = tells_depth
        self.kind = kind
        self.window = (1, 1200)
        self.count = 1
        self.format = 0
        self.y_increment = "0.0078125" if form == "volts" else "0.008"
        self.y_origin = y_origin or {"volts": "-0.125", "code": "50", "signed": "0.2"}[form]
        self.y_reference = {"volts": 128, "code": 127, "signed": 0}[form]
        self.text_next = False
        super().__init__(seed, points)

    @property
    def shift(self) -> int:
        return 256 if self.format == 1 else 1

    def new_frame(self) -> None:
        low, high = (-100, 100) if self.form == "signed" else (20, 230)
        self.codes = self.draw(low, high)
        increment, origin = Fraction(self.y_increment), Fraction(self.y_origin)
        match self.form:
            case "volts":
                self.mean(lambda code: (code - self.y_reference) * increment + origin)
            case "code":
                self.mean(lambda code: (code - origin - self.y_reference) * increment)
            case _:
                self.mean(lambda code: code * increment + origin)

    def own(self, head: str, argument: str) -> bytes | None:
        if forms(":WAVeform:PREamble?").fullmatch(head):
            return self.preamble().encode()
        if forms(":WAVeform:DATA?").fullmatch(head):
            return self.data()
        if forms(":WAVeform:FORMat").fullmatch(head):
            self.choose(argument.upper())
            return None
        if forms(":SINGle").fullmatch(head):
            self.arm()
            return None
        if forms(self.poll).fullmatch(head):
            return b"STOP" if "STATus" in self.poll else b"+0"
        if forms(":CHANnel1:COUPling?").fullmatch(head):
            return b"DC"
        if forms(":ACQuire:SRATe?").fullmatch(head):
            return f"{float(1 / self.interval):.6E}".encode()
        if self.form == "code":
            depth = forms(":ACQuire:MDEPth?").fullmatch(head)
            if depth and self.tells_depth:
                return str(self.points).encode()
            if forms(":WAVeform:STARt").fullmatch(head) or forms(":WAVeform:STOP").fullmatch(head):
                self.place(head, int(argument))
                return None
        kept = self.setting(
            head, argument, ":ACQuire:TYPE", ":ACQuire:COUNt", ":CHANnel1:SCALe", ":CHANnel1:OFFSet"
        )
        if kept:
            return kept if isinstance(kept, bytes) else None
        if forms(":WAVeform:SOURce").fullmatch(head) or forms(":RUN").fullmatch(head):
            return None
        self.fail()
        return None

    def place(self, head: str, sample: int) -> None:
        """Set one end of the window; beyond the record is refused."""
        first, last = self.window
        if sample > self.points:
            self.fail(-222)
        else:
            self.window = (sample, last) if "STAR" in head.upper() else (first, sample)

    def seen(self) -> slice:
        """What the window shows of the record."""
        return slice(self.window[0] - 1, self.window[1]) if self.form == "code" else slice(None)

    def choose(self, word: str) -> None:
        if word == "BYTE":
            self.format = 0
        elif word == "WORD" and self.words:
            self.format = 1
        elif word.startswith("ASC") and self.says_text:
            self.format = 4
        else:
            self.fail(-224)

    def preamble(self) -> str:
        increment = Fraction(self.y_increment) / self.shift
        origin, reference = Fraction(self.y_origin), self.y_reference * self.shift
        if self.form == "code":
            origin *= self.shift
        points = len(self.codes[self.seen()])
        numbers = [self.format, self.kind, points, self.count, float(self.interval), -2.5e-4]
        numbers += [0, float(increment), float(origin), reference]
        return ",".join(f"{number:+.12E}" for number in map(float, numbers)) + ",0"

    def data(self) -> bytes:
        if self.format == 4:
            return block(
                ",".join(f"{float(volts):.5E}" for volts in self.meant[self.seen()]).encode(), 8
            )
        width = 2 if self.format == 1 else 1
        signed = self.form == "signed"
        codes = self.codes[self.seen()] * self.shift
        return block(packed(codes, width, signed=signed, big=self.big), 9)


class KeywordCurve(Brain):
    """Keywords in an order of its own; without headers, bare values."""

    has_queue = False

    def __init__(
        self,
        *,
        signed: bool = True,
        big: bool = True,
        words: bool = True,
        root: str = "WFMOutpre",
        toggles: bool = True,
        envelope: bool = False,
        **rest: int,
    ) -> None:
        self.signed, self.big, self.words = signed, big, words
        self.root, self.toggles = root, toggles
        self.envelope = envelope
        self.header = False
        self.width = 1
        self.stop = 10**9
        super().__init__(**rest)

    def new_frame(self) -> None:
        self.codes = self.draw(-110, 110) if self.signed else self.draw(10, 240)
        self.scales()

    def scales(self) -> None:
        self.multiplier = Fraction("0.0015625")
        self.offset = Fraction("-12.5")
        self.zero = Fraction("0.3")
        self.mean(lambda code: (code - self.offset) * self.multiplier + self.zero)

    def own(self, head: str, argument: str) -> bytes | None:
        word = argument.upper()
        if forms("HEADer").fullmatch(head):
            if self.toggles:
                self.header = word in ("ON", "1")
            else:
                self.fail()
            return None
        if forms(f"{self.root}?").fullmatch(head):
            return self.preamble().encode()
        if forms(self.root + ":" + head.rpartition(":")[2].rstrip("?")).fullmatch(head.rstrip("?")):
            value = self.fields().get(head.rpartition(":")[2].rstrip("?").upper())
            if value is not None:
                return value.encode()
        if forms("CURVe?").fullmatch(head):
            text = b":CURVE " if self.header else b""
            return text + block(self.payload())
        if forms("DATa:WIDth").fullmatch(head):
            self.width = int(word)
            if self.width == 2 and not self.words:
                self.width = 1
                self.fail(-222)
            return None
        if forms("ACQuire:STATE").fullmatch(head):
            if word in ("RUN", "ON", "1"):
                self.arm()
            return None
        if forms("EVENT?").fullmatch(head):
            return str(abs(self.errors.popleft()) if self.errors else 0).encode()
        if forms("CH1:COUPling?").fullmatch(head):
            return b":CH1:COUPLING AC" if self.header else b"AC"
        if forms("ACQuire:MODe?").fullmatch(head):
            return b"SAMPLE"
        if forms("ACQuire:NUMAVg?").fullmatch(head):
            return b"16"
        known = ("DATa:SOUrce", "DATa:ENCdg", "DATa:STARt", "ACQuire:STOPAfter", "DATa:STOP")
        if any(forms(pattern).fullmatch(head) for pattern in known):
            return None
        self.fail()
        return None

    @property
    def shift(self) -> int:
        return 256 if self.width == 2 else 1

    def fields(self) -> dict[str, str]:
        return {
            "YMULT": f"{float(self.multiplier / self.shift):.12E}",
            "BYT_NR": str(self.width),
            "WFID": '"Ch1, AC coupling; 40 mV/div"',
            "YOFF": f"{float(self.offset * self.shift):.12E}",
            "BIT_NR": str(8 * self.width),
            "BYT_OR": "MSB" if self.big else "LSB",
            "BN_FMT": "RI" if self.signed else "RP",
            "ENCDG": "BIN",
            "NR_PT": str(self.points),
            "XINCR": f"{float(self.interval):.12E}",
            "PT_FMT": "ENV" if self.envelope else "Y",
            "YZERO": f"{float(self.zero):.12E}",
        }

    def preamble(self) -> str:
        if self.header:
            root = f":{self.root.upper()}:"
            return root + ";".join(f"{key} {value}" for key, value in self.fields().items())
        return ";".join(self.fields().values())

    def payload(self) -> bytes:
        return packed(self.codes * self.shift, self.width, signed=self.signed, big=self.big)


class Descriptor(Brain):
    """A binary descriptor with a user text and one more part before the data."""

    has_queue = False

    def __init__(self, *, words: bool = True, big: bool = False, record: int = 0, **rest: int):
        self.words, self.big, self.record = words, big, record
        self.word = False
        self.header = True
        super().__init__(**rest)

    def new_frame(self) -> None:
        self.codes = self.draw(-110, 110)
        self.gain, self.offset = Fraction("0.01"), Fraction("0.2")
        self.mean(lambda code: self.gain * code - self.offset)

    def own(self, head: str, argument: str) -> bytes | None:
        word = argument.upper()
        echo = head.upper().rstrip("?") + " " if self.header else ""
        match head.upper():
            case "CHDR":
                self.header = word != "OFF"
            case "CFMT":
                self.word = "WORD" in word and self.words
            case "TRMD":
                self.arm()
            case "C1:VDIV?":
                return f"{echo}2.5E-01 V".encode()
            case "C1:CPL?":
                return f"{echo}D50".encode()
            case "C1:WF?":
                return f"{echo}{word},".encode() + block(self.block_of(), 9)
            case "CORD" | "WFSU" | "WAIT":
                pass
            case _:
                self.fail()
        return None

    def block_of(self) -> bytes:
        order = ">" if self.big else "<"
        width, shift = (2, 256) if self.word else (1, 1)
        data = packed(self.codes * shift, width, signed=True, big=self.big)
        text, times = b"a note of 23 bytes here", b"\x01" * 16
        head = bytearray(346)
        head[:10] = b"OUR FORMAT"
        struct.pack_into(f"{order}hh", head, 32, width - 1, 0 if self.big else 1)
        struct.pack_into(f"{order}7i", head, 36, 346, len(text), 0, len(times), 0, 0, len(data))
        struct.pack_into(f"{order}i", head, 116, self.points)
        struct.pack_into(f"{order}i", head, 148, 1)
        struct.pack_into(f"{order}ff", head, 156, float(self.gain / shift), float(self.offset))
        struct.pack_into(f"{order}h", head, 172, 8)
        struct.pack_into(f"{order}f", head, 176, float(self.interval))
        struct.pack_into(f"{order}h", head, 316, self.record)
        return bytes(head) + text + times + data


class VdivText(Brain):
    """Scales as text with units; a block of signed bytes with two newlines after it."""

    has_queue = False

    def __init__(self, *, poll: str = "INR?", asked: str = "DAT2", **rest: int) -> None:
        self.poll, self.asked = poll, asked
        self.header = True
        self.fresh = 1
        super().__init__(**rest)

    def new_frame(self) -> None:
        self.codes = self.draw(-120, 120)
        self.interval = Fraction(1, 1_250_000)
        self.vdiv, self.offset = Fraction("0.5"), Fraction("-0.75")
        self.mean(lambda code: code * self.vdiv / 25 - self.offset)

    def own(self, head: str, argument: str) -> bytes | None:
        upper = head.upper()
        echo = upper.rstrip("?") + " " if self.header else ""
        if upper == "INR?" and self.poll == "INR?":
            fresh, self.fresh = self.fresh, 0
            return f"{echo}{fresh}".encode()
        if upper == "SAST?" and self.poll == "SAST?":
            return f"{echo}Stop".encode()
        match upper:
            case "CHDR":
                self.header = argument.upper() != "OFF"
            case "TRMD":
                self.arm()
                self.fresh = 1
            case "C1:VDIV?":
                return f"{echo}500mV".encode()
            case "C1:OFST?":
                return f"{echo}-7.50E-01V".encode()
            case "SARA?":
                return f"{echo}1.25MSa/s".encode()
            case "C1:CPL?":
                return f"{echo}A1M".encode()
            case "C1:WF?" if argument.upper() == self.asked:
                payload = packed(self.codes, 1, signed=True, big=True)
                return f"{echo}DAT2,".encode() + block(payload, 9) + b"\n"
            case "WFSU":
                pass
            case _:
                self.fail()
        return None


class DataHeader(Brain):
    """Header of start, stop, points, values an interval; real numbers or integers."""

    def __init__(self, *, values: int = 1, **rest: int) -> None:
        self.values = values
        self.format = "ASC"
        super().__init__(**rest)

    def new_frame(self) -> None:
        self.codes = self.draw(20, 230)
        # Sixteenths of a volt are exact in 32 bits.
        self.mean(lambda code: Fraction(code - 128, 16))

    def own(self, head: str, argument: str) -> bytes | None:
        if forms("FORMat").fullmatch(head):
            self.format = argument.upper().replace(" ", "")
            return None
        if forms("SINGle").fullmatch(head):
            self.arm()
            return None
        if forms("CHANnel1:DATA:HEADer?").fullmatch(head):
            last = self.interval * (self.points - 1)
            return f"-2.0E-4,{float(last - Fraction('2.0e-4')):.15E},{self.points},{self.values}".encode()
        if forms("CHANnel1:DATA?").fullmatch(head):
            if self.format != "REAL,32":
                return b"0,0"
            return block(b"".join(struct.pack("<f", float(volts)) for volts in self.meant))
        if forms("CHANnel1:DATA:YRESolution?").fullmatch(head):
            return b"8"
        if forms("CHANnel1:DATA:YINCrement?").fullmatch(head):
            return b"6.25E-2"
        if forms("CHANnel1:COUPling?").fullmatch(head):
            return b"DCLimit"
        if forms("FORMat:BORDer").fullmatch(head) or forms("RUN").fullmatch(head):
            return None
        self.fail()
        return None


class MemoryHeader(Brain):
    """Keyed text and signed words, most significant byte first, in one reply."""

    def new_frame(self) -> None:
        self.codes = self.draw(-110, 110)
        self.mean(lambda code: Fraction(code, 25) * Fraction("0.2"))

    def own(self, head: str, argument: str) -> bytes | None:
        if forms(":ACQuire1:MEMory?").fullmatch(head):
            keys = {
                "Format": "2.0",
                "Sampling Period": f"{float(self.interval):.6E}",
                "Vertical Units": "V",
                "Vertical Scale": "2.00E-01",
                "Memory Length": str(self.points),
            }
            text = "".join(f"{key},{value};" for key, value in keys.items()) + "Waveform Data;\n"
            return text.encode() + block(packed(self.codes, 2, signed=True, big=True))
        if forms(":ACQuire1:STATe?").fullmatch(head):
            return b"1"
        if forms(":SINGle").fullmatch(head):
            self.arm()
            return None
        if forms(":RUN").fullmatch(head) or forms(":HEADer").fullmatch(head):
            return None
        self.fail()
        return None


class FormatTrace(Brain):
    """Values in volts, as real numbers of 32 or 64 bits, most significant byte first."""

    def __init__(
        self, *, knows_order: bool = True, widest: int = 64, over: int = 0, **rest: int
    ) -> None:
        self.knows_order, self.widest = knows_order, widest
        self.over = over
        self.format = "ASC"
        super().__init__(**rest)

    def new_frame(self) -> None:
        self.codes = self.draw(-100, 100)
        step = Fraction(1, 64) if self.widest == 32 else Fraction(1, 70)
        self.mean(lambda code: code * step)

    def own(self, head: str, argument: str) -> bytes | None:
        if forms("FORMat:DATA").fullmatch(head) or forms("FORMat").fullmatch(head):
            word = argument.upper()
            # One that knows 32 bits only takes the command without a word.
            self.format = "REAL,32" if word.endswith("64") and self.widest == 32 else word
            return None
        if forms("FORMat?").fullmatch(head) or forms("FORMat:DATA?").fullmatch(head):
            return self.format.encode()
        if forms("INITiate").fullmatch(head):
            self.arm()
            return None
        if forms("SENSe:SWEep:POINts?").fullmatch(head):
            return str(self.points).encode()
        if forms("SENSe:SWEep:TINTerval?").fullmatch(head):
            return f"{float(self.interval):.6E}".encode()
        if forms("FETCh?").fullmatch(head):
            values = [float(volts) for volts in self.meant]
            values[: self.over] = [9.9e37] * self.over
            letter = ">d" if self.format == "REAL,64" else ">f"
            return block(b"".join(struct.pack(letter, value) for value in values))
        if forms("FORMat:BORDer").fullmatch(head) and self.knows_order:
            return None
        if forms("SENSe:SWEep:POINts").fullmatch(head):
            self.points = int(argument)
            return None
        self.fail()
        return None
