"""Quantities as a scenario writes them, a number and a unit in one text, read into SI.

The units are those of the scenario format and no others; pint holds them in a small registry of our own,
with exact fractions, so that "110 um" is the float nearest to 110 micrometres and a mil is 25.4 um exactly.
"""

from __future__ import annotations

import functools
import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from types import MappingProxyType
from typing import Any, Literal

import pint

from tolerance.errors import InputError

MeasureName = Literal[
    "length", "copper length", "resistance", "frequency", "share", "conductivity", "areal weight", "number"
]

_DEFINITIONS = (
    "meter = [length] = m",
    "um = 1e-6 * meter",
    "mm = 1e-3 * meter",
    "mil = 25.4e-6 * meter",  # a thousandth of an inch; the inch is 25.4 mm exactly (international agreement of 1959)
    "inch = 25.4e-3 * meter",
    "oz = 34.3e-6 * meter",  # copper of one ounce per square foot; thickness by IPC-4562
    "ohm = [resistance]",
    "hertz = [frequency] = Hz",
    "kHz = 1e3 * hertz",
    "MHz = 1e6 * hertz",
    "GHz = 1e9 * hertz",
    "unity = []",
    "percent = 0.01 * unity",
    "siemens_per_meter = [conductivity]",
    "megasiemens_per_meter = 1e6 * siemens_per_meter",
    "kilogram_per_square_meter = [areal_weight]",
    "gram_per_square_meter = 1e-3 * kilogram_per_square_meter",
)


@dataclass(frozen=True, slots=True)
class Measure:
    """One kind of quantity: its noun, the SI unit it is held in, and the units a scenario may write."""

    noun: str
    base: str
    units: Mapping[str, str]  # as written -> as the registry calls it; the first is the one messages use


def _measure(noun: str, base: str, **units: str) -> Measure:
    return Measure(noun, base, MappingProxyType(units))


MEASURES: Mapping[str, Measure] = MappingProxyType({
    "length": _measure("a length", "meter", um="um", mm="mm", mil="mil", inch="inch"),
    "copper length": _measure("a length", "meter", um="um", mm="mm", mil="mil", inch="inch", oz="oz"),
    "resistance": _measure("a resistance", "ohm", ohm="ohm"),
    "frequency": _measure("a frequency", "hertz", GHz="GHz", MHz="MHz", kHz="kHz", Hz="hertz"),
    "share": _measure("a percentage", "unity", **{"%": "percent"}),
    "conductivity": _measure(
        "a conductivity", "siemens_per_meter",
        **{"MS/m": "megasiemens_per_meter", "S/m": "siemens_per_meter"},
    ),
    "areal weight": _measure(
        "a weight per area", "kilogram_per_square_meter",
        **{"g/m^2": "gram_per_square_meter"},
    ),
    "number": Measure("a number", "unity", MappingProxyType({"": "unity"})),
})

_NUMBER = r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]{1,3})?"
_QUANTITY = re.compile(rf"\s*({_NUMBER})\s*(.*?)\s*", re.DOTALL)
_COMMA = re.compile(r"[.,]?,\s*[0-9]")
_SPELLINGS = MappingProxyType({"µm": "um", "μm": "um", "g/m2": "g/m^2", "g/m²": "g/m^2"})  # micro sign, Greek mu
_LONGEST_QUANTITY = 60


class QuantityError(InputError):
    """A text that is not a quantity of the measure asked for; the message says why, without the text."""


def unit_names(measure: str) -> tuple[str, ...]:
    """The units a scenario may write for this measure."""
    return tuple(MEASURES[measure].units)


def read_quantity(text: str, measure: MeasureName) -> float:
    """The SI value of a text such as "110 um", "4.3mil" or "10 %" (a share: 0.1).

    Raises QuantityError: no number in front, no unit, a unit that is not one of the measure's, or a number that is
    not finite.
    """
    match = _QUANTITY.fullmatch(text) if len(text) <= _LONGEST_QUANTITY else None
    allowed = _listed(unit_names(measure))
    if match is None:
        raise QuantityError(f"it is no number with a unit: {allowed}")
    digits, unit = match.groups()
    unit = _SPELLINGS.get(unit, unit)
    if _COMMA.match(unit):
        raise QuantityError("a number is written with a decimal point and without commas")
    if not unit:
        raise QuantityError(f"the unit is missing: {allowed}")
    if unit not in MEASURES[measure].units:
        raise QuantityError(f"the unit must be {allowed}")
    try:
        return float(Fraction(digits) * unit_factor(unit, measure))
    except OverflowError:
        raise QuantityError("the number is too large") from None


def write_quantity(value: float, measure: MeasureName, unit: str | None = None) -> str:
    """The SI value as a text with its unit (default: the measure's first), to six digits: "110 um"."""
    unit = unit_names(measure)[0] if unit is None else unit
    return f"{value / float(unit_factor(unit, measure)):.6g} {unit}".rstrip()


@functools.cache
def unit_factor(unit: str, measure: str) -> Fraction:
    """How many SI units one `unit` is, exactly."""
    kind = MEASURES[measure]
    factor = _registry().Quantity(Fraction(1), kind.units[unit]).to(kind.base).magnitude
    return Fraction(factor)


@functools.cache
def _registry() -> pint.UnitRegistry[Any]:
    """The registry with the format's units alone; built at the first use, never changed after."""
    registry: pint.UnitRegistry[Any] = pint.UnitRegistry(None, non_int_type=Fraction)
    for definition in _DEFINITIONS:
        registry.define(definition)
    return registry


def _listed(names: tuple[str, ...]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} or {names[-1]}"
