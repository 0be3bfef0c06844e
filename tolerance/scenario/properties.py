"""What can vary: the properties of each layer with their nominals, and the patterns by which variations name them."""

from __future__ import annotations

import math
from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

from tolerance.scenario.tables import COPPER, CORE, MASK, PREPREG, Layer, Scenario, Variation
from tolerance.units import MeasureName

#: kind of layer -> its properties that vary, in the order of the format's table
VARYING: Mapping[str, tuple[str, ...]] = MappingProxyType({
    MASK: ("thickness", "over_copper", "dk", "df"),
    COPPER: ("etch", "foil", "plating", "etch_factor", "registration"),
    PREPREG: ("thickness", "dk", "df", "resin_content"),
    CORE: ("thickness", "dk", "df", "resin_content"),
})

#: property -> what it is measured in
MEASURE: Mapping[str, MeasureName] = MappingProxyType({
    "thickness": "length", "over_copper": "length", "dk": "number", "df": "number", "resin_content": "share",
    "etch": "length", "foil": "copper length", "plating": "copper length", "etch_factor": "number",
    "registration": "length",
})


@dataclass(frozen=True, slots=True)
class Property:
    """One property of one layer that can vary; the nominal is SI."""

    name: str  # "P1.thickness"
    layer: str
    property: str
    nominal: float


def properties(scenario: Scenario) -> tuple[Property, ...]:
    """Everything that can vary, in layer order."""
    return tuple(item for layer in scenario.layers for item in properties_of(layer))


def properties_of(layer: Layer) -> tuple[Property, ...]:
    """What of this layer can vary: etch and registration of copper about 0, the rest about what the layer gives.

    A key that is not given does not vary; nor does a plating of 0, nor an infinite etch factor.
    """
    found = []
    for name in VARYING[layer.kind]:
        nominal = 0.0 if name in ("etch", "registration") else getattr(layer, name)
        absent = nominal is None or math.isinf(nominal) or (name == "plating" and nominal == 0.0)
        if not absent:
            found.append(Property(f"{layer.name}.{name}", layer.name, name, nominal))
    return tuple(found)


def members(scenario: Scenario, variation: Variation) -> tuple[Property, ...]:
    """The properties that the variation names, each once, in layer order."""
    return matching(variation.of, properties(scenario))


def matching(of: Collection[str], known: Iterable[Property]) -> tuple[Property, ...]:
    """Those of the known properties that a name or pattern of `of` matches; `*` stands for any characters."""
    names = {text for text in of if "*" not in text}
    patterns = [text for text in of if "*" in text]
    return tuple(item for item in known if item.name in names or any(matches(text, item.name) for text in patterns))


def named_by(text: str, known: Mapping[str, Property]) -> list[Property]:
    """Those of the known properties, given by their names, that one name or pattern matches."""
    if "*" not in text:
        return [known[text]] if text in known else []
    return [item for name, item in known.items() if matches(text, name)]


def matches(pattern: str, name: str) -> bool:
    """Whether the pattern covers the whole name; `*` stands for any characters, nothing else is special."""
    first, *rest = pattern.split("*")
    if not rest:
        return name == first
    *middle, last = rest
    if len(name) < len(first) + len(last) or not (name.startswith(first) and name.endswith(last)):
        return False
    start, end = len(first), len(name) - len(last)
    for part in filter(None, middle):
        found = name.find(part, start, end)
        if found < 0:
            return False
        start = found + len(part)
    return True
