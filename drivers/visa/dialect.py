"""A dialect: how one family of instruments is armed, waited for, read and turned into volts.

A dialect is data. It stands in a TOML file, and this module is its schema: every key that a file
may have, with its meaning. The reader of the files is `drivers.visa.shelf`; what the words do is
in `drivers.visa.speaker`.
"""

from __future__ import annotations

import math
import re
import string
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field

from drivers.visa.formula import Formula

BUILT_IN = frozenset({"channel", "encoding", "points_read"})
"""Fields every formula may use: the channel asked for, the place of the encoding chosen in the
dialect's list (0 is the first), and how many samples came."""


def _formula(written: Any) -> Formula:
    if isinstance(written, Formula):
        return written
    if isinstance(written, bool | int | str):
        return Formula(str(written))
    if isinstance(written, float) and math.isfinite(written):
        return Formula(repr(written))
    raise ValueError("a formula, as text or a finite number, is needed here")


def _listed(written: Any) -> Any:
    return [written] if isinstance(written, str) else written


def _pattern(written: str) -> str:
    try:
        re.compile(written)
    except re.error as error:
        raise ValueError(f"no regular expression: {error}") from error
    return written


def _command(*allowed: str) -> AfterValidator:
    """Give a check that a command is one line and fills in known names only."""

    def check(written: str) -> str:
        if not written.isascii() or not written.isprintable() or not written.strip():
            raise ValueError("a command is one line of printable ASCII")
        try:
            names = [
                name for _, name, _, _ in string.Formatter().parse(written) if name is not None
            ]
        except ValueError as error:
            raise ValueError(f"braces do not match: {error}") from error
        unknown = sorted(set(names) - {"channel", *allowed})
        if unknown:
            raise ValueError(f"{{{unknown[0]}}} cannot be filled in here")
        return written

    return AfterValidator(check)


FormulaText = Annotated[Formula, BeforeValidator(_formula)]
Pattern = Annotated[str, AfterValidator(_pattern)]
Command = Annotated[str, _command()]
Name = Annotated[str, Field(pattern=r"^[a-z][a-z0-9_]*$")]


class Part(BaseModel):
    """What all parts of a dialect share: no unknown keys, no silent conversion, finite numbers."""

    model_config = ConfigDict(
        extra="forbid",
        strict=True,
        frozen=True,
        allow_inf_nan=False,
        arbitrary_types_allowed=True,
        populate_by_name=True,
    )


class Confirm(Part):
    """A second question that tells look-alikes apart."""

    ask: list[Command] = Field(min_length=1)
    """Queries, tried in order until one is answered."""
    matches: Pattern | None = None
    """The answer, a line, matches this."""
    carries_preamble: bool = False
    """The answer is a block that carries a sound preamble of this dialect."""


class Find(Part):
    """By which answer the dialect is known."""

    rank: Annotated[int, Field(ge=0, le=1000)]
    """Lower ranks are asked first."""
    ask: list[Command] = Field(min_length=1)
    """Harmless queries, tried in order until one is answered."""
    numbers: Annotated[int, Field(ge=1)] | None = None
    """The answer has at least so many numbers."""
    matches: Pattern | None = None
    """The answer matches this."""
    carries_preamble: bool = False
    """The answer is a block that carries a sound preamble of this dialect."""
    plausible: FormulaText | None = None
    """Of the fields of a numeric answer: true where this dialect is likely to be meant."""
    confirm: list[Confirm] = []
    """All of these must hold too."""


class Errors(Part):
    """How faults are asked for."""

    queue: Command | None = None
    """Gives `code,"text"`, first in first out, code 0 when empty."""
    event: Command | None = None
    """Asked after the standard event register says that something went wrong."""

    @property
    def asked(self) -> bool:
        """True where the instrument keeps errors with words."""
        return self.queue is not None or self.event is not None


class Setup(Part):
    """What is sent once, when a session begins or an instrument comes back."""

    must: list[Command] = []
    """Commands it cannot do without."""
    attempt: list[Command] = Field(default=[], alias="try")
    """Commands that are sent where they exist."""


class Encoding(Part):
    """One way to have the samples sent."""

    name: str
    """How it is called in messages."""
    send: list[Command] = []
    """Commands that choose it."""
    ask: Command | None = None
    """Asked after them, where an instrument may take them without a word and do otherwise."""
    matches: Pattern | None = None
    """The answer to that, when it was chosen."""


class Acquire(Part):
    """One way to arm and to wait."""

    before: list[Command] = []
    """Queries asked and forgotten before arming: they clear a register."""
    send: list[Command] = []
    """Commands that arm."""
    finish: Command | None = None
    """A query that is answered when the acquisition is complete."""
    poll: Command | None = None
    """A query asked until its answer says that the acquisition is complete."""
    until: list[str] = []
    """Words of that answer that mean complete."""
    clear_bits: Annotated[int, Field(ge=1)] | None = None
    """Bits of that answer that are 0 when complete."""
    set_bits: Annotated[int, Field(ge=1)] | None = None
    """Bits of that answer that are 1 when complete."""


class NumbersPreamble(Part):
    """A line of numbers, in this order; more may follow."""

    shape: Literal["numbers"]
    send: list[Command] = []
    ask: Command
    after: list[Command] = []
    fields: list[Name] = Field(min_length=1)


class KeywordsPreamble(Part):
    """Headers and values: `BYT_NR 1;BIT_NR 8;...`, in any order."""

    shape: Literal["keywords"]
    send: list[Command] = []
    ask: Command
    after: list[Command] = []
    fields: dict[Name, str] = Field(min_length=1)
    """Name here, and keyword there with its short form in capitals."""


class AskedPreamble(Part):
    """One query for each field."""

    shape: Literal["asked"]
    send: list[Command] = []
    after: list[Command] = []
    fields: dict[Name, Command] = Field(min_length=1)


class PrefixPreamble(Part):
    """Keyed values before the block that holds the data: `Key,value;Key,value;`."""

    shape: Literal["prefix"]
    fields: dict[Name, str] = Field(min_length=1)
    """Name here, and key there, whatever its case."""
    optional: dict[Name, str] = {}
    """The same, for keys that may be missing."""


class Place(Part):
    """Where a field stands in a binary descriptor."""

    at: Annotated[int, Field(ge=0, le=65535)]
    """Bytes from the start."""
    type: Literal["int8", "uint8", "int16", "uint16", "int32", "uint32", "float32", "float64"]
    """How it is stored."""


class DescriptorPreamble(Part):
    """A binary descriptor at the start of the block that holds the data."""

    shape: Literal["descriptor"]
    order_at: Annotated[int, Field(ge=0, le=65535)]
    """Place of a 16-bit flag: 0 most significant byte first, else least."""
    fields: dict[Name, Place] = Field(min_length=1)
    data_start: FormulaText
    """First byte of the data."""
    data_bytes: FormulaText
    """Bytes of data; 0 means to the end of the block."""
    sound: FormulaText = Field(default_factory=lambda: Formula("True"))
    """Of the fields: false where a block happens to be long enough, but is no descriptor."""


Preamble = Annotated[
    NumbersPreamble | KeywordsPreamble | AskedPreamble | PrefixPreamble | DescriptorPreamble,
    Field(discriminator="shape"),
]


class Refuse(Part):
    """A state in which the values are no plain waveform."""

    when: FormulaText
    """True then."""
    why: str
    """What is said."""
    remedy: str
    """What to do."""


class Remark(Part):
    """Something to be said of a capture that can be used all the same."""

    when: FormulaText
    """True then; not said where a field it needs is missing."""
    say: str
    """What is said."""


class Codes(Part):
    """How the bytes of the data are numbers."""

    kind: Literal["integer", "float"] = "integer"
    """Codes, or volts already."""
    width: FormulaText
    """Bytes a value."""
    signed: FormulaText = Field(default_factory=lambda: Formula("False"))
    """Two's complement."""
    big_endian: FormulaText = Field(default_factory=lambda: Formula("False"))
    """Most significant byte first."""
    points: FormulaText | None = None
    """Values that should come; compared with the bytes that do."""
    bits: FormulaText | None = None
    """Bits of the converter, where told; otherwise seen from the codes."""
    hole: FormulaText | None = None
    """Code, or value, that means no sample."""
    low: FormulaText | None = None
    """Lowest code, where that is not the type's; or value that means under range."""
    high: FormulaText | None = None
    """Highest code, where that is not the type's; or value that means over range."""


class Scale(Part):
    """From codes to volts and seconds."""

    volts: FormulaText
    """Of `code` and the fields."""
    interval_s: FormulaText
    """Seconds between samples."""
    averaged: FormulaText = Field(default_factory=lambda: Formula("1"))
    """Frames averaged into this one."""
    code: FormulaText | None = None
    """Size of one code where the values are volts already."""
    low_rail: FormulaText | None = None
    """Lowest value where the values are volts already."""
    high_rail: FormulaText | None = None
    """Highest value where the values are volts already."""


class Length(Part):
    """How many samples are sent."""

    send: list[Annotated[str, _command("points")]] = []
    """Asks for `{points}` samples."""
    default: Annotated[int, Field(ge=100)] | None = None
    """Asked for when nobody says; without it nothing is asked for then."""
    keep: list[Command] = []
    """Settings touched where this changes the acquisition itself; put back at the end."""
    window: list[Annotated[str, _command("first", "last")]] = []
    """Asks for samples `{first}` to `{last}`, counted from 1; where the instrument knows it."""
    window_points: Annotated[int, Field(ge=100)] = 125_000
    """Most samples of one block: a longer record comes in blocks one after the other."""
    record: FormulaText | None = None
    """Samples of the record, where they can be told before the preamble."""


class Average(Part):
    """How the instrument is asked to average."""

    attempt: list[Annotated[str, _command("count")]] = Field(default=[], alias="try")
    """Sent first, where they exist."""
    send: list[Annotated[str, _command("count")]] = Field(min_length=1)
    """Asks for `{count}` frames."""
    keep: list[Command]
    """Settings touched, without their question mark: read before, written back at the end."""
    powers_of_two: bool = True
    """Counts are rounded up to one."""
    most: Annotated[int, Field(ge=2)] = 1024
    """Largest count."""


class Range(Part):
    """How the vertical range is set, where the person asks for it."""

    scale: Command
    """Setting of the scale, in proportion to the range; without its question mark."""
    offset: Command | None = None
    """Setting of the offset in volts."""
    span: Annotated[float, Field(gt=0)] | None = None
    """The whole range in units of the scale, for values that come without rails."""
    offset_from_centre: FormulaText = Field(default_factory=lambda: Formula("centre"))
    """Offset to send so that `centre` volts stand in the middle of the range."""


class Dialect(Part):
    """One dialect."""

    name: Annotated[str, Field(pattern=r"^[a-z0-9][a-z0-9-]*$")]
    """How `--dialect` calls it."""
    about: str
    """One sentence."""
    family: str | None = None
    """Dialects that answer the same query; told apart by a frame read twice."""
    find: Find | None = None
    """None: only when asked for by name."""
    errors: Errors = Errors()
    setup: Setup = Setup()
    encoding: list[Encoding] = []
    """Ways to have the samples sent, best first."""
    text: Encoding | None = None
    """Samples as text in volts: the referee where forms look alike."""
    acquire: list[Acquire] = Field(min_length=1)
    """Ways to arm and wait, best first."""
    preamble: list[Preamble] = Field(min_length=1)
    """Ways to learn the scales, best first."""
    also: dict[Name, Command] = {}
    """Fields asked for apart, where the instrument knows them."""
    refuse: list[Refuse] = []
    remark: list[Remark] = []
    data: Annotated[list[Command], BeforeValidator(_listed), Field(min_length=1)]
    """The query for the samples; of several, the first that a block answers."""
    codes: Codes
    scale: Scale
    length: Length | None = None
    average: Average | None = None
    range: Range | None = None
    coupling: Name | None = None
    """Field that tells how the input is coupled."""
    leave: list[Command] = []
    """Sent when the session ends: lets the instrument run again."""
