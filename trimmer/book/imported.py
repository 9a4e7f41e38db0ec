"""What a row of an export must look like; anything else is refused, by line and field."""

from __future__ import annotations

from typing import Annotated, Any, Literal, Self, Union

import numpy as np
from pydantic import (
    AfterValidator,
    AwareDatetime,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    StringConstraints,
    TypeAdapter,
    model_validator,
)

from trimmer.book.columns import plain, stamp, unmarked
from trimmer.book.ids import is_id
from trimmer.book.readings import from_document
from trimmer.book.waveforms import pack
from trimmer.guidance.advice import Advice, Cause, Verdict

_ADVICE = TypeAdapter(Advice)
_OPEN = ConfigDict(extra="ignore", strict=True, hide_input_in_errors=True)
_CAUSES = TypeAdapter(list[Cause])


def _an_id(text: str) -> str:
    if not is_id(text):
        raise ValueError("is not an id of this book")
    return text


class FlagModel(BaseModel):
    """A flag of a reading."""

    model_config = _OPEN

    code: str
    message: str
    remedy: str


class IntervalModel(BaseModel):
    """A figure with its interval."""

    model_config = _OPEN

    value: float
    sigma: float
    low: float
    high: float


class CrestsModel(BaseModel):
    """How pointed the crests are."""

    model_config = _OPEN

    upper: float
    lower: float
    asymmetry: float
    upper_sigma: float
    lower_sigma: float
    asymmetry_sigma: float


class ReadingModel(BaseModel):
    """The types of a reading's figures; fields of a newer program are let through."""

    model_config = _OPEN

    fundamental_hz: float
    fundamental_sigma_hz: float
    amplitude: float
    amplitude_sigma: float
    offset: float
    offset_sigma: float
    orders: Annotated[int, Field(ge=2, le=10_000)]
    parts: list[float]
    covariance: list[float]
    systematic: list[float] = []
    noise: float
    thd: IntervalModel
    thd_plus_noise: float
    crests: CrestsModel
    rise_share: float
    rise_share_sigma: float
    flags: list[FlagModel]
    samples: Annotated[int, Field(ge=0)]
    interval_s: float
    cycles: float
    bits: int | None = None
    has_volts: bool = True
    ac_coupled: bool = False
    frames: int = 1
    phase: float = 0.0
    extra: dict[str, float] = {}

    @model_validator(mode="after")
    def _sizes_agree(self) -> Self:
        size = 2 * (self.orders - 1)
        triangle = size * (size + 1) // 2
        if len(self.parts) != size or len(self.covariance) != triangle:
            raise ValueError(f"parts and covariance do not fit {self.orders} orders")
        if len(self.systematic) not in (0, triangle):
            raise ValueError(f"the systematic covariance does not fit {self.orders} orders")
        return self


def _a_reading(document: dict[str, Any]) -> dict[str, Any]:
    plain = unmarked(document)
    ReadingModel.model_validate(plain)
    from_document(plain)
    return dict(plain)


def _an_advice(document: dict[str, Any]) -> dict[str, Any]:
    _ADVICE.validate_python(document)
    return document


def _causes(documents: list[dict[str, Any]]) -> list[dict[str, Any]]:
    _CAUSES.validate_python(documents)
    return documents


def _in_range(moment: AwareDatetime) -> AwareDatetime:
    try:
        stamp(moment)
    except OverflowError as error:
        raise ValueError("is out of the range of dates") from error
    return moment


def _samples(values: Any) -> Any:
    if values is None:
        return None
    array = np.asarray(values, dtype=np.float64) if isinstance(values, list) else None
    if array is None or array.ndim != 1 or not all(type(v) in (int, float) for v in values):
        raise ValueError("is not a list of numbers")
    return pack(array)


Id = Annotated[str, AfterValidator(_an_id)]
Words = Annotated[str, StringConstraints(max_length=2000), AfterValidator(plain)]
Notes = dict[Words, Words]
Moment = Annotated[AwareDatetime, AfterValidator(_in_range)]
Figure = Annotated[float, Field(allow_inf_nan=False)]
Count = Annotated[int, Field(ge=0, le=2**31 - 1)]
Anything = Annotated[dict[str, Any], AfterValidator(unmarked)]
ReadingDocument = Annotated[dict[str, Any], AfterValidator(_a_reading)]


class Entry(BaseModel):
    """What every row has."""

    model_config = ConfigDict(
        extra="forbid", strict=True, allow_inf_nan=False, hide_input_in_errors=True
    )

    id: Id


class SheetEntry(Entry):
    """A row of `sheet`."""

    row: Literal["sheet"]
    taken_at: Moment
    unit: Words
    kind: Words
    source: Words
    identity: Words
    dialect: Words | None
    settings: Notes
    notes: Notes
    travel_turns: Figure | None
    orders: Count | None
    versions: Notes


class TurnRow(Entry):
    """A row of `turn`."""

    row: Literal["turn"]
    sheet_id: Id
    number: Count
    taken_at: Moment
    source: Words
    word: Words
    trim: Literal["upper", "lower"] | None
    sense: Literal["clockwise", "counter-clockwise"] | None
    asked_turns: Figure | None
    made_turns: Figure | None
    advice: Annotated[Anything, AfterValidator(_an_advice)] | None
    fundamental_hz: Figure | None
    thd: Figure | None
    thd_sigma: Figure | None
    reading: ReadingDocument
    waveform: Annotated[bytes | None, BeforeValidator(_samples)]
    interval_s: Figure | None
    notes: list[Words]


class StateEntry(Entry):
    """A row of `state`."""

    row: Literal["state"]
    sheet_id: Id
    saved_at: Moment
    document: Anything


class EndEntry(Entry):
    """A row of `sheet_end`."""

    row: Literal["sheet_end"]
    sheet_id: Id
    ended_at: Moment
    verdict: Verdict
    turns: Count
    fundamental_hz: Figure | None
    thd: Figure | None
    thd_sigma: Figure | None
    floor_thd: Figure | None
    floor_sigma: Figure | None
    net_upper: Figure | None
    net_lower: Figure | None
    expected_thd_warm: Figure | None
    remainder: Annotated[list[Anything], AfterValidator(_causes)]
    reason: Words
    reading: ReadingDocument | None


class CorrectionEntry(Entry):
    """A row of `correction`."""

    row: Literal["correction"]
    sheet_id: Id
    at: Moment
    field: Annotated[Words, StringConstraints(pattern=r"^(unit|kind|note:.+)$")]
    value: Words
    reason: Words


class LearnedEntry(Entry):
    """A row of `learned`."""

    row: Literal["learned"]
    sheet_id: Id
    at: Moment
    unit: Words
    kind: Words
    document: Anything


class ReferenceEntry(Entry):
    """A row of `reference`."""

    row: Literal["reference"]
    name: Words
    taken_at: Moment
    source: Words
    reading: ReadingDocument
    document: Anything


class RecordEntry(Entry):
    """A row of `record`."""

    row: Literal["record"]
    what: Literal["warmup", "survey", "recheck", "note", "limits"]
    sheet_id: Id | None
    taken_at: Moment
    unit: Words
    kind: Words
    source: Words
    document: Anything


class PointEntry(Entry):
    """A row of `record_point`."""

    row: Literal["record_point"]
    record_id: Id
    taken_at: Moment
    document: Anything


class RecordEndEntry(Entry):
    """A row of `record_end`."""

    row: Literal["record_end"]
    record_id: Id
    ended_at: Moment
    verdict: Words
    document: Anything


class Head(BaseModel):
    """The first row: what follows."""

    model_config = ConfigDict(extra="ignore", strict=True, hide_input_in_errors=True)

    row: Literal["book"]
    form: int
    steps: list[str]


AnyEntry = Annotated[
    Union[  # noqa: UP007 (a discriminated union is spelled so)
        SheetEntry,
        TurnRow,
        StateEntry,
        EndEntry,
        CorrectionEntry,
        LearnedEntry,
        ReferenceEntry,
        RecordEntry,
        PointEntry,
        RecordEndEntry,
    ],
    Field(discriminator="row"),
]

ENTRY: TypeAdapter[AnyEntry] = TypeAdapter(AnyEntry)
"""Validates one row."""
