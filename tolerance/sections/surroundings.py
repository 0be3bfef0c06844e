"""What stands round a line: which dielectrics lie on its foot side and on its crest side, and where planes end them.

Told once from the stackup; the values of thickness and Dk come later, draw by draw (see as_built).
"""

from __future__ import annotations

from dataclasses import dataclass

from tolerance.scenario.stackup import foot_side, position, reference_planes
from tolerance.scenario.tables import COPPER, MASK, Layer, Line, Scenario


@dataclass(frozen=True, slots=True)
class PlyPlan:
    """A dielectric layer beside the line, and the copper that is absent there and whose height it fills."""

    layer: str
    kind: str
    fills: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Surroundings:
    """The neighbours of a line, outwards from its foot and from its crest.

    foot_plane, crest_plane : the plane that ends a side, None where it ends in air.
    mask : the solder mask that follows the trace itself, None where there is none or it lies flat over plies.
    """

    foot_up: bool
    foot_side: tuple[PlyPlan, ...]
    foot_plane: str | None
    crest_side: tuple[PlyPlan, ...]
    crest_plane: str | None
    mask: str | None

    @property
    def references(self) -> tuple[str, ...]:
        """Names of the reference planes, top to bottom."""
        ends = (self.foot_plane, self.crest_plane) if self.foot_up else (self.crest_plane, self.foot_plane)
        return tuple(end for end in ends if end is not None)


def surroundings_of(scenario: Scenario, line: Line) -> Surroundings:
    """The surroundings of `line` in a checked scenario."""
    index = position(scenario.layers, line.layer)
    planes = reference_planes(scenario, line)
    above = _side(scenario, scenario.layers[:index][::-1], planes.above)
    below = _side(scenario, scenario.layers[index + 1 :], planes.below)
    foot_up = foot_side(scenario, line.layer) == "up"
    foot, crest = (above, below) if foot_up else (below, above)
    foot_plane, crest_plane = (planes.above, planes.below) if foot_up else (planes.below, planes.above)
    mask = crest[0].layer if crest and crest[0].kind == MASK else None
    return Surroundings(foot_up, foot, foot_plane, () if mask else crest, crest_plane, mask)


def properties_that_reach(surroundings: Surroundings, line: Line) -> frozenset[str]:
    """Names of the properties ("P1.thickness") on which the section of `line` depends."""
    names = {f"{line.layer}.{item}" for item in ("etch", "foil", "plating", "etch_factor")}
    for ply in (*surroundings.foot_side, *surroundings.crest_side):
        names |= {f"{ply.layer}.thickness", f"{ply.layer}.dk"}
        names |= {f"{copper}.{item}" for copper in ply.fills for item in ("foil", "plating")}
    if surroundings.mask is not None:
        names |= {f"{surroundings.mask}.{item}" for item in ("thickness", "over_copper", "dk")}
    return frozenset(names)


def _side(scenario: Scenario, layers: tuple[Layer, ...], plane: str | None) -> tuple[PlyPlan, ...]:
    """Dielectrics outwards from the line to `plane` or to the outside; copper between them is absent."""
    reach: list[Layer] = []
    for layer in layers:
        if layer.name == plane:
            break
        reach.append(layer)
    fills: dict[str, list[str]] = {layer.name: [] for layer in reach if layer.kind != COPPER}
    for number, layer in enumerate(reach):
        if layer.kind != COPPER:
            continue
        beyond = reach[number + 1] if number + 1 < len(reach) else None
        if beyond is None or beyond.kind == MASK:
            continue  # outermost copper: absent altogether
        fills[_pressing(scenario, layer.name, nearer=reach[number - 1].name)].append(layer.name)
    return tuple(PlyPlan(layer.name, layer.kind, tuple(fills[layer.name])) for layer in reach if layer.kind != COPPER)


def _pressing(scenario: Scenario, copper: str, *, nearer: str) -> str:
    """Which of its two neighbours presses into the height of absent copper: the one on its crest side."""
    try:
        up = foot_side(scenario, copper) == "up"
    except ValueError:  # a plane between two prepregs or two cores: either will do
        return nearer
    index = position(scenario.layers, copper)
    return scenario.layers[index + 1 if up else index - 1].name
