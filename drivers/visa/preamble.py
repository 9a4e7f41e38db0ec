"""Preambles of every shape, read into fields by name."""

from __future__ import annotations

import re
import struct
from collections.abc import Callable
from typing import Any

import numpy as np

from drivers.contract import SourceRefused, clean
from drivers.visa import answers
from drivers.visa.blocks import Block
from drivers.visa.conversation import Conversation
from drivers.visa.dialect import (
    AskedPreamble,
    DescriptorPreamble,
    KeywordsPreamble,
    NumbersPreamble,
    Place,
    Preamble,
    PrefixPreamble,
)
from drivers.visa.formula import FormulaError

_LETTERS = {
    "int8": "b",
    "uint8": "B",
    "int16": "h",
    "uint16": "H",
    "int32": "i",
    "uint32": "I",
    "float32": "f",
    "float64": "d",
}
_REMEDY = "Check the channel with `--channel`, or choose another dialect with `--dialect`."


def ask_fields(talk: Conversation, preamble: Preamble, deadline: float) -> dict[str, Any]:
    """Ask for a preamble that is sent apart from the data.

    Returns
    -------
    dict
        Numbers and words by field. Empty for a preamble that travels with its data.

    Raises
    ------
    SourceRefused
        The answer lacks a field.
    """
    match preamble:
        case NumbersPreamble():
            return _around(talk, preamble, deadline, preamble.ask, _numbers)
        case KeywordsPreamble():
            return _around(talk, preamble, deadline, preamble.ask, _keywords)
        case AskedPreamble():
            for command in preamble.send:
                talk.tell(command, deadline)
            fields = {
                name: answers.field(talk.ask(query, deadline))
                for name, query in preamble.fields.items()
            }
            for command in preamble.after:
                talk.tell(command, deadline)
            return fields
    return {}


def _around(
    talk: Conversation,
    preamble: Any,
    deadline: float,
    query: str,
    read: Callable[[Any, str], dict[str, Any]],
) -> dict[str, Any]:
    for command in preamble.send:
        talk.tell(command, deadline)
    answer = talk.ask(query, deadline)
    for command in preamble.after:
        talk.tell(command, deadline)
    try:
        return read(preamble, answer)
    except answers.AnswerError as error:
        raise SourceRefused(
            f"{clean(query)} is answered with {clean(answer, 60)!r}: {clean(str(error))}", _REMEDY
        ) from error


def _numbers(preamble: NumbersPreamble, answer: str) -> dict[str, Any]:
    values = answers.numbers(answer)
    if len(values) < len(preamble.fields):
        raise answers.AnswerError(f"{len(values)} numbers of {len(preamble.fields)}")
    return dict(zip(preamble.fields, values, strict=False))


def _keywords(preamble: KeywordsPreamble, answer: str) -> dict[str, Any]:
    given = answers.keywords(answer)
    fields: dict[str, Any] = {}
    for name, form in preamble.fields.items():
        for word, value in given.items():
            if answers.matches_form(word, form):
                fields[name] = answers.field(value)
                break
        else:
            raise answers.AnswerError(f"there is no {form}")
    return fields


def fields_in_block(preamble: Preamble, block: Block) -> tuple[dict[str, Any], bytes]:
    """Take the preamble out of the reply that carries the data.

    Returns
    -------
    dict, bytes
        The fields, and the bytes of the samples.

    Raises
    ------
    SourceRefused
        It lacks a field, or its lengths do not fit the block.
    """
    match preamble:
        case PrefixPreamble():
            given = answers.keyed(block.prefix)
            missing = [key for key in preamble.fields.values() if key.lower() not in given]
            if missing:
                raise SourceRefused(f"the header before the data has no {missing[0]!r}", _REMEDY)
            fields: dict[str, Any] = {
                name: answers.field(given[key.lower()]) for name, key in preamble.fields.items()
            }
            for name, key in preamble.optional.items():
                told = given.get(key.lower())
                fields[name] = None if told is None else answers.field(told)
            return fields, block.payload
        case DescriptorPreamble():
            return _descriptor(preamble, block.payload)
    return {}, block.payload


def _descriptor(preamble: DescriptorPreamble, payload: bytes) -> tuple[dict[str, Any], bytes]:
    order = _place(payload, Place(at=preamble.order_at, type="uint16"), "<")
    letter = "<" if order else ">"
    fields = {name: _place(payload, place, letter) for name, place in preamble.fields.items()}
    fields["big_endian"] = not order
    try:
        if not preamble.sound(fields):
            raise SourceRefused("the block before the samples is no descriptor", _REMEDY)
        start = int(preamble.data_start.number(fields))
        length = int(preamble.data_bytes.number(fields))
    except FormulaError as error:
        raise SourceRefused(f"the descriptor cannot be used: {error}", _REMEDY) from error
    end = start + length if length else len(payload)
    if not 0 <= start <= end <= len(payload):
        raise SourceRefused(
            f"the descriptor places the data at bytes {start} to {end} of a block of {len(payload)}",
            _REMEDY,
        )
    return fields, payload[start:end]


def _place(payload: bytes, place: Place, order: str) -> float:
    letter = _LETTERS[place.type]
    if place.at + struct.calcsize(letter) > len(payload):
        raise SourceRefused(
            f"a block of {len(payload)} bytes is too short for a descriptor", _REMEDY
        )
    value = struct.unpack_from(order + letter, payload, place.at)[0]
    if letter == "f":
        # The shortest decimal that is this 32-bit number: what the maker of 1e-6 meant, where
        # the number itself is 9.99999997e-7.
        return float(str(np.float32(value)))
    return float(value)


def carries(preamble: Preamble, block: Block) -> bool:
    """Say whether a block carries a sound preamble of this shape."""
    if not isinstance(preamble, PrefixPreamble | DescriptorPreamble):
        return False
    try:
        fields_in_block(preamble, block)
    except SourceRefused:
        return False
    return True


def matches(answer: str, pattern: str) -> bool:
    """Say whether an answer matches a pattern from its beginning, whatever its case."""
    return re.match(pattern, answer, re.IGNORECASE) is not None
