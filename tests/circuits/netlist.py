"""Units of the fixture circuits: a netlist, its nominal values, and one unit's own values.

A netlist is a file of its own in ``fixtures/circuits``, with every value that differs from unit to
unit in a ``.param`` line. The first letters of a parameter's name say what it is and so how far it
strays; parameters without such a name stay as written.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np

FIXTURES = Path(__file__).resolve().parents[2] / "fixtures" / "circuits"
CIRCUITS = (
    "ladder_junctions",
    "tapped_string_diodes",
    "pair_on_offset",
    "pair_coupled",
    "few_sections",
    "few_sections_uneven",
)
"""Names of the netlists, without ending."""

_PARAM = re.compile(r"(\w+)=(\S+)")
_NUMBER = re.compile(r"([-+]?[0-9.]+(?:e[-+]?[0-9]+)?)([a-z]*)", re.IGNORECASE)
_SCALE = {"": 1.0, "p": 1e-12, "n": 1e-9, "u": 1e-6, "m": 1e-3, "k": 1e3, "meg": 1e6}

_RATIO = {
    "r_": 0.015,
    "rail_": 0.01,
    "tri_peak": 0.01,
    "pot_": 0.07,
    "cap_": 0.05,
    "area_": 0.046,
}
_SHIFT = {"tri_offset": 0.020, "tri_rise": 0.002}
_WIDEST = 2.5
"""Standard deviations at which a draw is cut: parts further out were sorted away."""


@dataclass(frozen=True, slots=True)
class Circuit:
    """A netlist with its nominal values."""

    name: str
    """Name of the file without ending."""
    text: str
    """The netlist, up to but without ``.end``."""
    nominal: Mapping[str, float]
    """Every ``.param`` of it, SI units."""


@dataclass(frozen=True, slots=True)
class Unit:
    """One unit of a circuit: what its parts really are."""

    circuit: Circuit
    """The circuit it is a unit of."""
    seed: int | None
    """What its tolerances were drawn from; None is the nominal unit."""
    values: Mapping[str, float]
    """Every ``.param``, SI units."""

    @property
    def name(self) -> str:
        """Name for messages and file names."""
        return f"{self.circuit.name}-{'nominal' if self.seed is None else f'{self.seed:02d}'}"

    @property
    def hz(self) -> float:
        """Frequency of the triangle, Hz."""
        return self.values["hz"]

    @property
    def rise_share(self) -> float:
        """Share of the period in which the triangle rises."""
        return self.values["tri_rise"]


def number(word: str) -> float:
    """Read a value with a simulator's suffix, such as ``2.2k`` or ``10p``."""
    match = _NUMBER.fullmatch(word)
    if match is None or match[2].lower() not in _SCALE:
        raise ValueError(f"not a plain value: {word!r}")
    return float(match[1]) * _SCALE[match[2].lower()]


@cache
def circuit(name: str) -> Circuit:
    """Read a netlist of ``fixtures/circuits``."""
    text = (FIXTURES / f"{name}.cir").read_text(encoding="ascii")
    lines = [line for line in text.splitlines() if line.startswith(".param")]
    values = {key: number(word) for line in lines for key, word in _PARAM.findall(line)}
    return Circuit(name, text, values)


def nominal_unit(name: str) -> Unit:
    """Give the unit whose parts are all as marked."""
    made = circuit(name)
    return Unit(made, None, dict(made.nominal))


def toleranced_unit(name: str, seed: int) -> Unit:
    """Draw a unit's parts around their marked values.

    Resistors stray by 1.5 %, rails and the triangle's peak by 1 %, trims by 7 %, junctions by
    1.2 mV (4.6 % of saturation current), the triangle's offset by 20 mV and its rise share by
    0.2 % of the period (standard deviations; draws beyond 2.5 of them are drawn again).
    """
    made = circuit(name)
    order = sorted(made.nominal)
    rng = np.random.default_rng([seed, *name.encode("ascii")])
    values = {key: _drawn(key, made.nominal[key], rng) for key in order}
    return Unit(made, seed, values)


def with_values(unit: Unit, **values: float) -> Unit:
    """Give the same unit with some of its values replaced, such as ``hz=47.0``."""
    unknown = values.keys() - unit.values.keys()
    if unknown:
        raise ValueError(f"{unit.circuit.name} has no {sorted(unknown)}")
    return Unit(unit.circuit, unit.seed, {**unit.values, **values})


def render(unit: Unit) -> str:
    """Give the netlist's text with the unit's own values in its ``.param`` lines."""

    def own(line: str) -> str:
        if not line.startswith(".param"):
            return line
        return _PARAM.sub(lambda match: f"{match[1]}={unit.values[match[1]]:.15g}", line)

    return "\n".join(own(line) for line in unit.circuit.text.splitlines())


def _drawn(key: str, nominal: float, rng: np.random.Generator) -> float:
    for prefix, sigma in _RATIO.items():
        if key.startswith(prefix):
            return nominal * float(np.exp(sigma * _cut_normal(rng)))
    for prefix, sigma in _SHIFT.items():
        if key.startswith(prefix):
            return nominal + sigma * _cut_normal(rng)
    return nominal


def _cut_normal(rng: np.random.Generator) -> float:
    while True:
        draw = float(rng.standard_normal())
        if abs(draw) <= _WIDEST:
            return draw
