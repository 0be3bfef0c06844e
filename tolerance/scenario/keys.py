"""What a key of the scenario may hold: one class for each kind of value, which reads it into SI, says in words what is
allowed, and describes itself for the JSON Schema.

A key's kind stands in the annotation of its field. pydantic calls `read`; from a file (validation context `FROM_FILE`)
quantities must be texts with units, while a caller in Python may hand SI numbers to the models directly.
"""

from __future__ import annotations

import difflib
import math
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Any, TypeGuard

from pydantic import GetCoreSchemaHandler, ValidationInfo
from pydantic_core import PydanticCustomError, core_schema

from tolerance.units import MEASURES, MeasureName, QuantityError, read_quantity, unit_names, write_quantity

FROM_FILE: Mapping[str, bool] = MappingProxyType({"from_file": True})
_LONGEST_TEXT = 500
_MOST_LISTED = 20
_LARGEST_EXAMPLE = 1e6
MOST_DIGITS = 4000  # of a whole number: with more it could not be written down again
MOST_BITS = int(MOST_DIGITS * math.log2(10.0))
_NUMBER_PATTERN = r"\s*[+-]?([0-9]+(\.[0-9]*)?|\.[0-9]+)([eE][+-]?[0-9]{1,3})?\s*"


class RefusedError(Exception):
    """A value that a key does not take; the text says what is allowed, as it follows "must be"."""


class Kind:
    """Base of the kinds of value a key may hold."""

    @property
    def allowed(self) -> str:
        """What the key takes, in words that follow "must be"."""
        raise NotImplementedError

    def read(self, given: object, *, from_file: bool) -> object:
        """The value in SI. Raises RefusedError with what is allowed."""
        raise NotImplementedError

    def json_schema(self) -> dict[str, Any]:
        """The JSON Schema of the value as a file writes it."""
        raise NotImplementedError

    def __get_pydantic_core_schema__(self, _source: object, _handler: GetCoreSchemaHandler) -> core_schema.CoreSchema:
        return core_schema.with_info_plain_validator_function(self._validate)

    def _validate(self, given: object, info: ValidationInfo) -> object:
        from_file = info.context is not None and bool(info.context.get("from_file"))
        if given is None and not from_file:
            return None
        try:
            return self.read(given, from_file=from_file)
        except RefusedError as reason:
            raise PydanticCustomError("refused", "{allowed}", {"allowed": f"must be {reason}"}) from None


@dataclass(frozen=True, slots=True)
class Range:
    """An interval of numbers, each end in or out."""

    low: float = -math.inf
    high: float = math.inf
    low_in: bool = True
    high_in: bool = True

    def holds(self, value: float) -> bool:
        """Whether the value lies inside; never true of a value that is not a number."""
        above = value >= self.low if self.low_in else value > self.low
        return above and (value <= self.high if self.high_in else value < self.high)

    def words(self, write: Callable[[float], str]) -> str:
        """`above 0 um and up to 5000 um`; `write` makes the text of an end."""
        low = f"{'from' if self.low_in else 'above'} {write(self.low)}" if math.isfinite(self.low) else ""
        high = f"{'up to' if self.high_in else 'below'} {write(self.high)}" if math.isfinite(self.high) else ""
        if low and high:
            return f"{low} {high}" if self.low_in and self.high_in else f"{low} and {high}"
        return f"{low} up" if low and self.low_in else f"{low}{high}"


@dataclass(frozen=True, slots=True)
class Quantity(Kind):
    """A number with a unit, written as a text; SI inside."""

    measure: MeasureName
    range: Range
    unit: str | None = None  # in which the range is told; default: the measure's first

    @property
    def allowed(self) -> str:
        words = self.range.words(lambda end: write_quantity(end, self.measure, self.unit))
        return f"{MEASURES[self.measure].noun} {words}"

    def read(self, given: object, *, from_file: bool) -> float:
        value = self._number(given, from_file)
        if not self.range.holds(value):
            raise RefusedError(self.allowed)
        return value

    def _number(self, given: object, from_file: bool) -> float:
        if isinstance(given, str):
            try:
                return read_quantity(given, self.measure)
            except QuantityError as reason:
                raise RefusedError(f"{self.allowed} ({reason})") from None
        if not from_file:
            return plain_number(given, self.allowed)
        example = ""
        if is_number(given) and abs(given) < _LARGEST_EXAMPLE:
            meant = 100.0 * given if self.measure == "share" and abs(given) < 1.0 else given
            example = f', such as "{meant:.6g} {self.unit or unit_names(self.measure)[0]}"'
        raise RefusedError(f"{self.allowed}, a text with its unit{example}")

    def json_schema(self) -> dict[str, Any]:
        return {"type": "string", "pattern": quantity_pattern(self.measure)}


@dataclass(frozen=True, slots=True)
class Number(Kind):
    """A pure number: finite, or also infinite where `infinite` says so."""

    range: Range
    noun: str = "a number"
    infinite: bool = False

    @property
    def allowed(self) -> str:
        words = f"{self.noun} {self.range.words(lambda end: f'{end:.6g}')}".strip()
        return f"{words}, or inf" if self.infinite else words

    def read(self, given: object, *, from_file: bool) -> float:
        del from_file
        value = plain_number(given, self.allowed, infinite=self.infinite)
        if not (self.range.holds(value) or (self.infinite and value == math.inf)):
            raise RefusedError(self.allowed)
        return value

    def json_schema(self) -> dict[str, Any]:
        span = replace(self.range, high=math.inf) if self.infinite else self.range
        return {"type": "number", **schema_range(span)}


@dataclass(frozen=True, slots=True)
class Whole(Kind):
    """A whole number."""

    range: Range
    noun: str = "a whole number"
    more: str = ""  # what else is to be said of it

    @property
    def allowed(self) -> str:
        return f"{self.noun} {self.range.words(lambda end: str(int(end)))}{self.more}".strip()

    def read(self, given: object, *, from_file: bool) -> int:
        del from_file
        if isinstance(given, bool) or not isinstance(given, int) or not self.range.holds(given):
            raise RefusedError(self.allowed)
        if given.bit_length() > MOST_BITS:
            raise RefusedError(f"{self.allowed}, of fewer than {MOST_DIGITS} digits")
        return given

    def json_schema(self) -> dict[str, Any]:
        return {"type": "integer", **schema_range(self.range)}


@dataclass(frozen=True, slots=True)
class Word(Kind):
    """One of a few words."""

    words: tuple[str, ...]

    @property
    def allowed(self) -> str:
        return listed([f'"{word}"' for word in self.words])

    def read(self, given: object, *, from_file: bool) -> str:
        del from_file
        if not isinstance(given, str) or given not in self.words:
            raise RefusedError(self.allowed)
        return given

    def json_schema(self) -> dict[str, Any]:
        return {"enum": list(self.words)}


@dataclass(frozen=True, slots=True)
class Text(Kind):
    """A text that is not empty and stands on one line; `forbidden` characters may not occur in it."""

    noun: str = "a text"
    forbidden: str = ""

    @property
    def allowed(self) -> str:
        without = f", without {listed(list(self.forbidden))}" if self.forbidden else ""
        return f"{self.noun}: printable text on one line, no blanks at its ends{without}"

    def read(self, given: object, *, from_file: bool) -> str:
        del from_file
        if not isinstance(given, str) or not given:
            raise RefusedError(self.allowed)
        if len(given) > _LONGEST_TEXT:
            raise RefusedError(f"{self.allowed}; at most {_LONGEST_TEXT} letters, not {len(given)}")
        if given != given.strip() or not given.isprintable() or any(one in given for one in self.forbidden):
            raise RefusedError(self.allowed)
        return given

    def json_schema(self) -> dict[str, Any]:
        return {"type": "string", "minLength": 1, "maxLength": _LONGEST_TEXT}


@dataclass(frozen=True, slots=True)
class Flag(Kind):
    """true or false."""

    @property
    def allowed(self) -> str:
        return "true or false"

    def read(self, given: object, *, from_file: bool) -> bool:
        del from_file
        if not isinstance(given, bool):
            raise RefusedError(self.allowed)
        return given

    def json_schema(self) -> dict[str, Any]:
        return {"type": "boolean"}


@dataclass(frozen=True, slots=True)
class Texts(Kind):
    """A list of texts, none twice; a single text alone where `single` allows it."""

    noun: str
    single: bool = False
    count: int | None = None  # exactly so many; default: one or more

    @property
    def allowed(self) -> str:
        if self.single:
            return f"{self.noun}, or a list of different ones"
        return f"a list of {self.count} different {self.noun}" if self.count else f"a list of different {self.noun}"

    def read(self, given: object, *, from_file: bool) -> tuple[str, ...]:
        del from_file
        texts = [given] if self.single and isinstance(given, str) else given
        if not isinstance(texts, (list, tuple)) or not texts or len(texts) != (self.count or len(texts)):
            raise RefusedError(self.allowed)
        if not all(isinstance(text, str) and text for text in texts) or len(set(texts)) != len(texts):
            raise RefusedError(self.allowed)
        return tuple(texts)

    def json_schema(self) -> dict[str, Any]:
        text = {"type": "string", "minLength": 1}
        many = {"type": "array", "items": text, "minItems": self.count or 1, "uniqueItems": True}
        if self.count:
            many["maxItems"] = self.count
        return {"anyOf": [text, many]} if self.single else many


@dataclass(frozen=True, slots=True)
class Values(Kind):
    """A list of values, each as it would stand in the scenario."""

    most: int

    @property
    def allowed(self) -> str:
        return f"a list of 1 to {self.most} values, each as it would stand in the scenario"

    def read(self, given: object, *, from_file: bool) -> tuple[object, ...]:
        del from_file
        if not isinstance(given, (list, tuple)) or not 1 <= len(given) <= self.most:
            raise RefusedError(self.allowed)
        if not all(isinstance(one, (str, int, float, list, tuple, dict)) for one in given):
            raise RefusedError(self.allowed)
        return tuple(given)

    def json_schema(self) -> dict[str, Any]:
        return {"type": "array", "minItems": 1, "maxItems": self.most}


def is_number(given: object) -> TypeGuard[float]:
    """Whether the value is a number; true and false are none."""
    return isinstance(given, (int, float)) and not isinstance(given, bool)


def plain_number(given: object, allowed: str, *, infinite: bool = False) -> float:
    """The value as a float. Raises RefusedError(allowed) for anything but a number, for nan, and for infinity."""
    if not isinstance(given, (int, float)) or isinstance(given, bool):
        raise RefusedError(allowed)
    try:
        value = float(given)
    except OverflowError:
        raise RefusedError(allowed) from None
    if math.isnan(value) or (math.isinf(value) and not infinite):
        raise RefusedError(allowed)
    return value


def quantity_pattern(*measures: MeasureName) -> str:
    """The regular expression of a quantity of one of these measures, for a JSON Schema."""
    units = dict.fromkeys(unit for measure in measures for unit in unit_names(measure))
    escaped = [unit.replace("^", r"\^") for unit in units] + (["[µμ]m"] if "um" in units else [])
    return f"^{_NUMBER_PATTERN}({'|'.join(escaped)})\\s*$"


def schema_range(span: Range) -> dict[str, float]:
    """The keywords of a JSON Schema for a range of numbers."""
    ends: dict[str, float] = {}
    if math.isfinite(span.low):
        ends["minimum" if span.low_in else "exclusiveMinimum"] = span.low
    if math.isfinite(span.high):
        ends["maximum" if span.high_in else "exclusiveMaximum"] = span.high
    return ends


def listed(items: Sequence[str], last: str = "or") -> str:
    """`a, b or c`."""
    return items[0] if len(items) == 1 else f"{', '.join(items[:-1])} {last} {items[-1]}" if items else "none"


def meant_by(name: str, known: Iterable[str]) -> str | None:
    """The known name that a misspelled one comes near to."""
    names = list(known)
    same = [one for one in names if _plain(one) == _plain(name)]
    near = same or difflib.get_close_matches(name, names, n=1, cutoff=0.6)
    return near[0] if near else None


def _plain(name: str) -> str:
    """Without what people spell differently: capitals, hyphens, underscores, blanks."""
    return name.casefold().replace("-", "").replace("_", "").replace(" ", "")


def close_match(name: str, known: Iterable[str]) -> str:
    """`; did you mean "gap"?` where one of the known names is near, else what is known."""
    names = list(known)
    meant = meant_by(name, names)
    if meant is not None:
        return f'; did you mean "{meant}"?'
    if len(names) > _MOST_LISTED:
        names = [*names[:_MOST_LISTED], f"{len(names) - _MOST_LISTED} more"]
    return f"; known are {listed(names, 'and')}" if names else ""
