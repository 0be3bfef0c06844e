"""What stands round a line: which dielectrics lie on its foot side and on its crest side, and where planes end them.

Told once from the stackup; the values of thickness and Dk come later, draw by draw (see as_built).
"""

from __future__ import annotations

from dataclasses import dataclass

from tolerance.scenario.stackup import foot_side, position, reference_planes
from tolerance.scenario.tables import COPPER, MASK, PREPREG, Layer, Line, Scenario
from tolerance.sections.section import Metals, PlaneMetal, TraceMetal


@dataclass(frozen=True, slots=True)
class PlyPlan:
    """A dielectric layer beside the line, and the copper that is absent there and whose height it fills."""

    layer: str
    kind: str
    fills: tuple[str, ...] = ()
    dk_frequency: float | None = None


@dataclass(frozen=True, slots=True)
class Surroundings:
    """The neighbours of a line, outwards from its foot and from its crest.

    foot_plane, crest_plane : the plane that ends a side, None where it ends in air.
    mask : the solder mask that follows the trace itself, None where there is none or it lies flat over plies.
    band_dk : of the resin at the height of the copper, None where the ply that presses into it fills it as it is.
    """

    foot_up: bool
    foot_side: tuple[PlyPlan, ...]
    foot_plane: str | None
    crest_side: tuple[PlyPlan, ...]
    crest_plane: str | None
    mask: str | None
    band_dk: float | None = None
    mask_dk_frequency: float | None = None
    metals: Metals | None = None  # where the scenario has a frequency

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
    return Surroundings(
        foot_up, foot, foot_plane, () if mask else crest, crest_plane, mask,
        band_dk=_band_dk(scenario, crest[0].layer if crest else None),
        mask_dk_frequency=crest[0].dk_frequency if mask else None,
        metals=_metals(scenario, (line.layer,), lower=foot_plane, upper=crest_plane, upside_down=foot_up),
    )


@dataclass(frozen=True, slots=True)
class BroadsideTrace:
    """One trace of a broadside pair: its copper layer, which way its foot points, and the ply its crest presses into.

    body : number of that ply, from the bottom; None where the crest stands in air outside all plies.
    band_dk : see Surroundings.
    """

    layer: str
    foot_up: bool
    body: int | None
    band_dk: float | None = None


@dataclass(frozen=True, slots=True)
class BroadsideSurroundings:
    """The plies round a broadside pair from the bottom up, what ends them, and the upper and the lower trace."""

    plies: tuple[PlyPlan, ...]
    bottom_plane: str | None
    top_plane: str | None
    upper: BroadsideTrace
    lower: BroadsideTrace
    metals: Metals | None = None

    @property
    def references(self) -> tuple[str, ...]:
        """Names of the reference planes, top to bottom."""
        return tuple(end for end in (self.top_plane, self.bottom_plane) if end is not None)


def broadside_surroundings_of(scenario: Scenario, line: Line) -> BroadsideSurroundings:
    """The surroundings of a broadside pair in a checked scenario."""
    assert line.partner is not None
    layers = scenario.layers
    high, low = sorted((position(layers, line.layer), position(layers, line.partner)))
    planes = reference_planes(scenario, line)
    above = _side(scenario, layers[:high][::-1], planes.above)
    below = _side(scenario, layers[low + 1 :], planes.below)
    between = _side(scenario, layers[high + 1 : low], None, closed=True)
    plies = (*below[::-1], *between[::-1], *above)
    upper_up, lower_up = (foot_side(scenario, layers[at].name) == "up" for at in (high, low))
    first_above = len(below) + len(between)

    def trace(at: int, up: bool, body: int | None) -> BroadsideTrace:
        return BroadsideTrace(layers[at].name, up, body,
                              _band_dk(scenario, None if body is None else plies[body].layer))

    return BroadsideSurroundings(
        plies, planes.below, planes.above,
        upper=trace(high, upper_up, first_above - 1 if upper_up else first_above if above else None),
        lower=trace(low, lower_up, len(below) if not lower_up else len(below) - 1 if below else None),
        metals=_metals(scenario, (layers[high].name, layers[low].name), lower=planes.below, upper=planes.above),
    )


def _metals(
    scenario: Scenario, traces: tuple[str, ...], *, lower: str | None, upper: str | None, upside_down: bool = False,
) -> Metals | None:
    """The copper of a line, where the scenario has a frequency; `upside_down`: `lower` is the plane above."""
    if scenario.evaluation.frequency is None:
        return None

    def plane(name: str | None, *, seen_from_above: bool) -> PlaneMetal | None:
        if name is None:
            return None
        layer = scenario.layer(name)
        return PlaneMetal(layer.conductivity, layer.copper_thickness,
                          _roughness(scenario, layer, seen_from_above=seen_from_above))

    shapes = tuple(TraceMetal(layer.conductivity, layer.roughness_foot or 0.0, layer.roughness_crest or 0.0)
                   for layer in map(scenario.layer, traces))
    return Metals(shapes, plane(lower, seen_from_above=not upside_down), plane(upper, seen_from_above=upside_down))


def _roughness(scenario: Scenario, plane: Layer, *, seen_from_above: bool) -> float:
    """Rms roughness [m] of the face of a plane that a line above or below it sees."""
    foot, crest = plane.roughness_foot or 0.0, plane.roughness_crest or 0.0
    if foot == crest:
        return foot
    foot_up = foot_side(scenario, plane.name) == "up"
    return foot if foot_up == seen_from_above else crest


def _band_dk(scenario: Scenario, pressing: str | None) -> float | None:
    """Dk of the resin between the copper into which the ply `pressing` presses: given beside the ply's own Dk."""
    if pressing is None:
        return None
    layer = scenario.layer(pressing)
    return layer.resin_dk if layer.kind == PREPREG and layer.resin_content is None else None


def properties_that_reach(surroundings: Surroundings | BroadsideSurroundings, line: Line) -> frozenset[str]:
    """Names of the properties ("P1.thickness") on which the section of `line` depends; df only at a frequency.

    A plane has its nominal thickness in every draw; it matters only where the skin depth comes near it.
    """
    dielectric = ("dk",) if surroundings.metals is None else ("dk", "df")
    copper = ("etch", "foil", "plating", "etch_factor")
    if isinstance(surroundings, BroadsideSurroundings):
        names = {f"{trace.layer}.{item}" for trace in (surroundings.upper, surroundings.lower)
                 for item in (*copper, "registration")}
        return frozenset(names | _of_plies(surroundings.plies, dielectric))
    names = {f"{line.layer}.{item}" for item in copper}
    names |= _of_plies((*surroundings.foot_side, *surroundings.crest_side), dielectric)
    if surroundings.mask is not None:
        names |= {f"{surroundings.mask}.{item}" for item in ("thickness", "over_copper", *dielectric)}
    return frozenset(names)


def _of_plies(plies: tuple[PlyPlan, ...], dielectric: tuple[str, ...]) -> set[str]:
    names = {f"{ply.layer}.{item}" for ply in plies for item in ("thickness", *dielectric)}
    return names | {f"{copper}.{item}" for ply in plies for copper in ply.fills for item in ("foil", "plating")}


def _side(
    scenario: Scenario, layers: tuple[Layer, ...], plane: str | None, *, closed: bool = False,
) -> tuple[PlyPlan, ...]:
    """Dielectrics outwards from the line to `plane` or to the outside; copper between them is absent.

    closed : the last of the layers is not the outside of the board.
    """
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
        if not closed and (beyond is None or beyond.kind == MASK):
            continue  # outermost copper: absent altogether
        assert beyond is not None
        fills[_pressing(scenario, layer.name, nearer=reach[number - 1].name)].append(layer.name)
    return tuple(PlyPlan(layer.name, layer.kind, tuple(fills[layer.name]), layer.dk_frequency)
                 for layer in reach if layer.kind != COPPER)


def _pressing(scenario: Scenario, copper: str, *, nearer: str) -> str:
    """Which of its two neighbours presses into the height of absent copper: the one on its crest side."""
    try:
        up = foot_side(scenario, copper) == "up"
    except ValueError:  # a plane between two prepregs or two cores: either will do
        return nearer
    index = position(scenario.layers, copper)
    return scenario.layers[index + 1 if up else index - 1].name
