"""How far a property strays: tolerances and shifts (of the nominal, or absolute), ends, and shares of levels."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from tolerance.scenario.keys import (
    Kind,
    Quantity,
    Range,
    RefusedError,
    is_number,
    listed,
    plain_number,
    quantity_pattern,
)
from tolerance.units import MeasureName, QuantityError, read_quantity, unit_names

LEVELS = ("lot", "panel", "coupon")
SUM_OF_SHARES = 1e-9  # how near to 1 the shares of the levels must add up (the scenario format's own figure)
_LONGEST_LENGTH = 5e-3  # [m]
_LARGEST_NUMBER = 1000.0
_LARGEST_RELATIVE = 10.0  # ten times the nominal
_ANY_MEASURE: tuple[MeasureName, ...] = ("share", "copper length", "number")


@dataclass(frozen=True, slots=True)
class Amount:
    """A half-width or a shift: a share of the nominal (0.1 for "10 %"), or in the SI unit of the property."""

    value: float
    relative: bool

    def of(self, nominal: float) -> float:
        """The amount in the SI unit of the property."""
        return self.value * abs(nominal) if self.relative else self.value


@dataclass(frozen=True, slots=True)
class LevelShares:
    """Which share of the variance of the underlying normal each level carries; they add up to 1."""

    lot: float = 0.0
    panel: float = 0.0
    coupon: float = 0.0


@dataclass(frozen=True, slots=True)
class Reading:
    """Where on a coupon a reflectometer reads: `position` [m], the way from the launch."""

    position: float


@dataclass(frozen=True, slots=True)
class AmountOf(Kind):
    """An amount of a property held in `measure`; None: of whatever property, the measure being checked later."""

    noun: str
    positive: bool
    measure: MeasureName | None = None

    @property
    def allowed(self) -> str:
        if self.measure is None:
            forms = 'a percentage, a length such as "10 um", or, for properties without a unit, a number'
        elif self.measure == "number":
            forms = "a percentage of the nominal or a number"
        elif self.measure == "share":
            forms = 'a percentage of the nominal, such as "10 %", or a number as the absolute share'
        else:
            forms = f"a percentage of the nominal or a length in {listed(unit_names(self.measure))}"
        return f"{self.noun}{' above 0' if self.positive else ''}: {forms}"

    def read(self, given: object, *, from_file: bool) -> Amount:
        if isinstance(given, Amount) and not from_file:
            return given
        amount = self._amount(given)
        largest = _LARGEST_RELATIVE if amount.relative else (
            _LARGEST_NUMBER if is_number(given) else _LONGEST_LENGTH)
        if abs(amount.value) > largest:
            raise RefusedError(f"{self.noun} of at most 1000 %, 5000 um or 1000")
        if self.positive and amount.value <= 0.0:
            raise RefusedError(self.allowed)
        return amount

    def _amount(self, given: object) -> Amount:
        if isinstance(given, str):
            relative = given.rstrip().endswith("%")
            measure: MeasureName = "share" if relative else _length_measure(self.measure)
            if not relative and self.measure in ("number", "share"):
                raise RefusedError(self.allowed)
            try:
                return Amount(read_quantity(given, measure), relative)
            except QuantityError as reason:
                raise RefusedError(f"{self.allowed} ({reason})") from None
        if self.measure not in (None, "number", "share"):
            raise RefusedError(self.allowed)
        return Amount(plain_number(given, self.allowed), relative=False)

    def json_schema(self) -> dict[str, Any]:
        number = {"type": "number", **({"exclusiveMinimum": 0} if self.positive else {})}
        return {"anyOf": [{"type": "string", "pattern": quantity_pattern("share", "copper length")}, number]}


@dataclass(frozen=True, slots=True)
class EndOf(Kind):
    """`low` or `high`: a value of the property itself. `measure` as for AmountOf."""

    measure: MeasureName | None = None

    @property
    def allowed(self) -> str:
        if self.measure is None:
            return 'a value of the property: a length such as "95 um", or, for properties without a unit, a number'
        if self.measure == "number":
            return "a value of the property: a number"
        if self.measure == "share":
            return 'a value of the property: a percentage such as "60 %"'
        return f"a value of the property: a length in {listed(unit_names(self.measure))}"

    def read(self, given: object, *, from_file: bool) -> float:
        if isinstance(given, str):
            value = self._quantity(given)
            largest = _LONGEST_LENGTH
        elif self.measure in (None, "number") or not from_file:
            value = plain_number(given, self.allowed)
            largest = _LARGEST_NUMBER
        else:
            raise RefusedError(self.allowed)
        if abs(value) > (1.0 if self.measure == "share" else largest):
            raise RefusedError(f"{self.allowed}, of at most 5000 um or 1000")
        return value

    def _quantity(self, given: str) -> float:
        share = given.rstrip().endswith("%")
        if self.measure == "number" or (share and self.measure not in (None, "share")):
            raise RefusedError(self.allowed)
        try:
            return read_quantity(given, "share" if share else _length_measure(self.measure))
        except QuantityError as reason:
            raise RefusedError(f"{self.allowed} ({reason})") from None

    def json_schema(self) -> dict[str, Any]:
        text = {"type": "string", "pattern": quantity_pattern("share", "copper length")}
        return {"anyOf": [text, {"type": "number"}]}


@dataclass(frozen=True, slots=True)
class Level(Kind):
    """`lot`, `panel` or `coupon`, or a table of their shares."""

    @property
    def allowed(self) -> str:
        return '"lot", "panel", "coupon", or shares from 0 to 1 of these three that add up to 1'

    def read(self, given: object, *, from_file: bool) -> LevelShares:
        if isinstance(given, LevelShares) and not from_file:
            return given
        if isinstance(given, str) and given in LEVELS:
            return LevelShares(**{given: 1.0})
        if not isinstance(given, Mapping) or not set(given) <= set(LEVELS):
            raise RefusedError(self.allowed)
        shares = {name: plain_number(share, self.allowed) for name, share in given.items()}
        if not all(Range(0.0, 1.0).holds(share) for share in shares.values()):
            raise RefusedError(self.allowed)
        total = math.fsum(shares.values())
        if abs(total - 1.0) > SUM_OF_SHARES:
            raise RefusedError(f"{self.allowed} (they add up to {total:.10g})")
        return LevelShares(**shares)

    def json_schema(self) -> dict[str, Any]:
        share = {"type": "number", "minimum": 0, "maximum": 1}
        shares = {"type": "object", "properties": dict.fromkeys(LEVELS, share), "additionalProperties": False,
                  "minProperties": 1}
        return {"anyOf": [{"enum": list(LEVELS)}, shares]}


@dataclass(frozen=True, slots=True)
class ReadingAt(Kind):
    """A table with one key, `position`, which holds `position`."""

    position: Quantity

    @property
    def allowed(self) -> str:
        return self._words(self.position.allowed)

    @staticmethod
    def _words(position: object) -> str:
        return f'{{ position = "75 mm" }}, the position being {position}'

    def read(self, given: object, *, from_file: bool) -> Reading:
        if isinstance(given, Reading) and not from_file:
            return given
        if not isinstance(given, Mapping) or set(given) != {"position"}:
            raise RefusedError(self.allowed)
        try:
            return Reading(self.position.read(given["position"], from_file=from_file))
        except RefusedError as reason:
            raise RefusedError(self._words(reason)) from None

    def json_schema(self) -> dict[str, Any]:
        return {"type": "object", "properties": {"position": self.position.json_schema()}, "required": ["position"],
                "additionalProperties": False}


def _length_measure(measure: MeasureName | None) -> MeasureName:
    return "length" if measure == "length" else "copper length" if measure in (None, "copper length") else measure
