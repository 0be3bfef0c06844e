"""What the order of the layers decides: which way the foot of a trace points, and which planes a line refers to.

Conventions: the foot is bonded to the core the trace was etched on or, for foil at the outside, to the laminate below
it; copper between two prepregs, or between two cores, says so itself with `foot`.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple, Protocol

from tolerance.scenario.tables import COPPER, CORE, MASK, PREPREG, Foot, Line, Scenario

LAMINATES = (PREPREG, CORE)


class StackLayer(Protocol):
    """What of a layer the order of the stackup is about."""

    @property
    def name(self) -> str: ...
    @property
    def kind(self) -> str: ...
    @property
    def use(self) -> str | None: ...
    @property
    def foot(self) -> Foot | None: ...


class Planes(NamedTuple):
    """Reference planes of a line by name, None where there is none on that side."""

    above: str | None
    below: str | None


def foot_side(scenario: Scenario, layer_name: str) -> Foot:
    """Which way the foot of this copper points: "down" to the laminate below it, or "up".

    Raises KeyError for a name that is no layer's, ValueError for a layer that is not copper and for a plane whose
    stackup does not decide it; of the signal copper of a checked scenario it is always known.
    """
    index = position(scenario.layers, layer_name)
    side = foot_at(scenario.layers, index)
    if side is None:
        raise ValueError(f"the stackup does not decide which way the foot of {layer_name!r} points")
    return side


def reference_planes(scenario: Scenario, line: Line) -> Planes:
    """The planes above and below the line: those of `references`, else the nearest on each side.

    Of a broadside pair: above the upper and below the lower trace.
    """
    upper, lower = span(scenario.layers, line.layer, line.partner)
    names = [layer.name if layer.kind == COPPER and layer.use == "plane" else "" for layer in scenario.layers]
    if line.references is not None:
        names = [name if name in line.references else "" for name in names]
    above = next((name for name in reversed(names[:upper]) if name), None)
    below = next((name for name in names[lower + 1:] if name), None)
    return Planes(above, below)


def position(layers: Sequence[StackLayer], name: str) -> int:
    """Index of the layer from the top. Raises KeyError."""
    for index, layer in enumerate(layers):
        if layer.name == name:
            return index
    raise KeyError(name)


def span(layers: Sequence[StackLayer], layer: str, partner: str | None) -> tuple[int, int]:
    """Indices of the upper and the lower trace layer of a line; the same one without a partner."""
    first = position(layers, layer)
    second = first if partner is None else position(layers, partner)
    return min(first, second), max(first, second)


def foot_at(layers: Sequence[StackLayer], index: int) -> Foot | None:
    """Which way the foot points, by the neighbours or else by the layer's own word; None where neither says."""
    return decided_foot(layers, index) or layers[index].foot


def decided_foot(layers: Sequence[StackLayer], index: int) -> Foot | None:
    """Which way the foot points by the neighbours alone. Raises ValueError for what is not copper."""
    if layers[index].kind != COPPER:
        raise ValueError(f"{layers[index].name!r} is not copper")
    above = layers[index - 1].kind if index > 0 else None
    below = layers[index + 1].kind if index + 1 < len(layers) else None
    if (above == CORE) != (below == CORE):
        return "up" if above == CORE else "down"
    if above in LAMINATES and below in (None, MASK):
        return "up"
    if below in LAMINATES and above in (None, MASK):
        return "down"
    return None
