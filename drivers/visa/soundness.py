"""What the parts of a dialect need of each other, beyond what the schema of each can see."""

from __future__ import annotations

from drivers.visa.dialect import (
    BUILT_IN,
    DescriptorPreamble,
    Dialect,
    Preamble,
    PrefixPreamble,
)
from drivers.visa.formula import Formula

Fault = tuple[str, str]
"""A place, and what is the matter there."""


def faults_between_parts(dialect: Dialect) -> list[Fault]:
    """Give what the parts of a dialect lack of each other, as place and fault."""
    faults = [
        *_unknown_fields(dialect),
        *_ways_of_waiting(dialect),
        *_ways_of_sending(dialect),
        *_ways_of_finding(dialect),
    ]
    if "code" not in dialect.scale.volts.names:
        faults.append(("scale.volts", "does not use 'code'"))
    if dialect.coupling is not None and dialect.coupling not in dialect.also:
        faults.append(("coupling", f"{dialect.coupling!r} is not in [also]"))
    return list(dict.fromkeys(faults))


def formulas(dialect: Dialect) -> list[tuple[str, Formula]]:
    """List the formulas over the fields of a preamble, each with its place."""
    codes, scale = dialect.codes, dialect.scale
    listed: list[tuple[str, Formula | None]] = [
        *[(f"scale.{name}", getattr(scale, name)) for name in type(scale).model_fields],
        *[
            (f"codes.{name}", getattr(codes, name))
            for name in type(codes).model_fields
            if name != "kind"
        ],
        *[(f"refuse[{place}].when", part.when) for place, part in enumerate(dialect.refuse)],
        *[(f"remark[{place}].when", part.when) for place, part in enumerate(dialect.remark)],
    ]
    if dialect.length is not None:
        listed.append(("length.record", dialect.length.record))
    return [(place, formula) for place, formula in listed if formula is not None]


def _fields(preamble: Preamble) -> set[str]:
    fields = set(preamble.fields)
    if isinstance(preamble, PrefixPreamble):
        fields |= set(preamble.optional)
    if isinstance(preamble, DescriptorPreamble):
        fields.add("big_endian")
    return fields


def _unknown_fields(dialect: Dialect) -> list[Fault]:
    faults = []
    for index, preamble in enumerate(dialect.preamble):
        given = _fields(preamble)
        known = BUILT_IN | given | set(dialect.also)
        for place, formula in formulas(dialect):
            missing = formula.names - known - ({"code"} if place == "scale.volts" else set())
            faults += [(place, f"preamble[{index}] gives no field {m!r}") for m in sorted(missing)]
        if isinstance(preamble, DescriptorPreamble):
            for key in ("data_start", "data_bytes", "sound"):
                missing = getattr(preamble, key).names - given
                faults += [(f"preamble[{index}].{key}", f"no field {m!r}") for m in sorted(missing)]
    return faults


def _ways_of_waiting(dialect: Dialect) -> list[Fault]:
    faults = []
    for index, way in enumerate(dialect.acquire):
        told = bool(way.until) + (way.clear_bits is not None) + (way.set_bits is not None)
        if way.poll is not None and told != 1:
            faults.append(
                (f"acquire[{index}]", "`poll` needs one of `until`, `clear_bits`, `set_bits`")
            )
        if way.poll is None and way.finish is None:
            faults.append((f"acquire[{index}]", "needs `finish` or `poll`"))
    return faults


def _ways_of_sending(dialect: Dialect) -> list[Fault]:
    return [
        (f"encoding[{index}]", "`ask` and `matches` need each other")
        for index, encoding in enumerate(dialect.encoding)
        if (encoding.ask is None) != (encoding.matches is None)
    ]


def _ways_of_finding(dialect: Dialect) -> list[Fault]:
    find = dialect.find
    if find is None:
        return []
    faults = []
    if find.numbers is None and find.matches is None and not find.carries_preamble:
        faults.append(("find", "needs `numbers`, `matches` or `carries_preamble`"))
    faults += [
        (f"find.confirm[{index}]", "needs `matches` or `carries_preamble`")
        for index, confirm in enumerate(find.confirm)
        if confirm.matches is None and not confirm.carries_preamble
    ]
    return faults
