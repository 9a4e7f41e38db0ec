"""Formulas in dialect files: arithmetic and comparison over named fields, and nothing else.

A formula is read once into a tree of Python's own grammar, of which only numbers, words, names,
``+ - * / %``, comparisons, ``and or not`` and ``a if b else c`` are admitted: no call, no index, no
attribute. Words compare as SCPI words do, a short form equal to its long form.
"""

from __future__ import annotations

import ast
import math
import operator
from collections.abc import Callable, Mapping
from typing import Any

MOST_CHARACTERS = 300
"""Longest formula."""

_BINARY: dict[type[ast.operator], Callable[[Any, Any], Any]] = {
    ast.Add: operator.add,
    ast.Sub: operator.sub,
    ast.Mult: operator.mul,
    ast.Div: operator.truediv,
    ast.Mod: operator.mod,
}
_ORDER: dict[type[ast.cmpop], Callable[[Any, Any], bool]] = {
    ast.Lt: operator.lt,
    ast.LtE: operator.le,
    ast.Gt: operator.gt,
    ast.GtE: operator.ge,
}
_LEAST_SHORT_FORM = 3


class FormulaError(ValueError):
    """A formula is not admitted, or a field it needs is not there."""


def same_word(one: str, other: str) -> bool:
    """Compare two SCPI words: case does not count, a short form equals its long form."""
    short, long = sorted((one.strip().upper(), other.strip().upper()), key=len)
    return short == long or (len(short) >= _LEAST_SHORT_FORM and long.startswith(short))


class Formula:
    """One formula.

    Parameters
    ----------
    text
        As written: `(code - y_reference) * y_increment + y_origin`.

    Raises
    ------
    FormulaError
        It uses more than is admitted.
    """

    def __init__(self, text: str) -> None:
        self.text = text
        if len(text) > MOST_CHARACTERS:
            raise FormulaError(f"longer than {MOST_CHARACTERS} characters")
        try:
            self._tree = ast.parse(text.strip(), mode="eval").body
        except (SyntaxError, ValueError, RecursionError, MemoryError) as error:
            raise FormulaError(f"{text!r} cannot be read as a formula") from error
        names: set[str] = set()
        _admit(self._tree, names)
        self.names = frozenset(names)
        """Fields it needs."""

    def __call__(self, fields: Mapping[str, Any]) -> Any:
        """Work the formula out.

        Parameters
        ----------
        fields
            Numbers, words, arrays or None by name.

        Raises
        ------
        FormulaError
            A field is missing, or no number where one is needed.
        """
        try:
            return _work(self._tree, fields)
        except (TypeError, ZeroDivisionError, OverflowError) as error:
            raise FormulaError(f"{self.text!r} cannot be worked out: {error}") from error

    def number(self, fields: Mapping[str, Any]) -> float:
        """Work out a finite number.

        Raises
        ------
        FormulaError
            It is none.
        """
        value = self(fields)
        if isinstance(value, str | None) or not math.isfinite(value):
            raise FormulaError(f"{self.text!r} gives {value!r}, not a finite number")
        return float(value)


def _admit(node: ast.expr, names: set[str]) -> None:
    match node:
        case ast.Constant(value=bool() | int() | float() | str()):
            if isinstance(node.value, float) and not math.isfinite(node.value):
                raise FormulaError("a number that is not finite")
        case ast.Name():
            names.add(node.id)
        case ast.BinOp(op=ast.Add() | ast.Sub() | ast.Mult() | ast.Div() | ast.Mod()):
            _admit(node.left, names)
            _admit(node.right, names)
        case ast.UnaryOp(op=ast.USub() | ast.UAdd() | ast.Not()):
            _admit(node.operand, names)
        case ast.BoolOp():
            for value in node.values:
                _admit(value, names)
        case ast.Compare(
            ops=[ast.Eq() | ast.NotEq() | ast.Lt() | ast.LtE() | ast.Gt() | ast.GtE()]
        ):
            _admit(node.left, names)
            _admit(node.comparators[0], names)
        case ast.IfExp():
            for part in (node.test, node.body, node.orelse):
                _admit(part, names)
        case _:
            raise FormulaError(f"{ast.unparse(node)!r} is not admitted in a formula")


def _work(node: ast.expr, fields: Mapping[str, Any]) -> Any:
    match node:
        case ast.Constant():
            return node.value
        case ast.Name():
            if node.id not in fields:
                raise FormulaError(f"there is no field {node.id!r}")
            return fields[node.id]
        case ast.BinOp():
            return _BINARY[type(node.op)](_work(node.left, fields), _work(node.right, fields))
        case ast.UnaryOp():
            value = _work(node.operand, fields)
            if isinstance(node.op, ast.Not):
                return not value
            return -value if isinstance(node.op, ast.USub) else +value
        case ast.BoolOp():
            worked = (_work(value, fields) for value in node.values)
            return all(worked) if isinstance(node.op, ast.And) else any(worked)
        case ast.IfExp():
            return _work(node.body if _work(node.test, fields) else node.orelse, fields)
        case ast.Compare():
            return _compare(
                node.ops[0], _work(node.left, fields), _work(node.comparators[0], fields)
            )
    raise FormulaError("not admitted")


def _compare(how: ast.cmpop, left: Any, right: Any) -> bool:
    if isinstance(how, ast.Eq | ast.NotEq):
        if isinstance(left, str) and isinstance(right, str):
            equal = same_word(left, right)
        else:
            equal = left is not None and right is not None and left == right
        return equal if isinstance(how, ast.Eq) else not equal
    if left is None or right is None:
        return False
    return _ORDER[type(how)](left, right)
