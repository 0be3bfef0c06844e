"""Several traces anywhere between flat plies, without mirror symmetry: broadside pairs, shifted or not.

Each trace lies in one layer of the stack, its foot on that layer's lower or upper face. Traces of one layer see each
other by near images and a spectral rest, as in structure; traces of different layers by the spectral kernel alone,
for whatever lies between them makes it smooth.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, IntArray, NumberArray
from tolerance.sections.layered import LayeredSection
from tolerance.solver.assembly import Medium, NearImage, System, near_system, sent_from
from tolerance.solver.edges import Edge, NodeCounts
from tolerance.solver.kernels import LAST_EXPONENT, FlatStack, spectral_quadrature, spectral_rest
from tolerance.solver.plan import PLANE_WAVENUMBERS, SolverSettings, edge_counts


@dataclass(frozen=True, slots=True)
class LayeredPlan:
    """Node counts by edge name, and nodes over the wavenumber for each pair of layers."""

    counts: Mapping[str, NodeCounts]
    wavenumbers: Mapping[tuple[int, int], int]
    plane_wavenumbers: int = 0


def plan_layered(section: LayeredSection, settings: SolverSettings) -> LayeredPlan:
    """The plan for sections like the first one."""
    edges = [edge for trace in range(len(section.traces)) for edge in trace_faces(section, trace)]
    heights = [section.thicknesses[0] * 0.0]
    for thickness in section.thicknesses:
        heights.append(heights[-1] + thickness)
    bases = {name: float(heights[trace.layer][0]) for number, trace in enumerate(section.traces)
             for name in (edge.name for edge in trace_faces(section, number))}
    planes = [float(heights[0][0])] * section.bottom_plane + [float(heights[-1][0])] * section.top_plane
    counts = edge_counts(edges, settings, levels=planes, bases=bases)
    reach = max(float(np.abs(edge.start[0]).max()) for edge in edges) + max(
        float(np.abs(edge.stop[0]).max()) for edge in edges)
    layers = sorted({trace.layer for trace in section.traces})
    depth = float(heights[-1][0])
    wavenumbers = {}
    for number, low in enumerate(layers):
        for high in layers[number:]:
            way = float((way_left(section, low) if low == high else way_between(section, low, high))[0])
            wavenumbers[low, high] = math.ceil(16.0 + 0.5 * LAST_EXPONENT * reach / way + 4.0 * math.sqrt(depth / way))
    ways = [abs(bases[edge.name] + float(end[1][0]) - plane) for edge in edges for end in (edge.start, edge.stop)
            for plane in planes]
    return LayeredPlan(counts, wavenumbers, math.ceil(PLANE_WAVENUMBERS + 0.7 * LAST_EXPONENT * reach / min(ways)))


@dataclass(frozen=True, slots=True)
class TraceCharges:
    """Charges (sections, unknowns, traces) for 1 V on each trace, and where they are: edges with heights, trace by
    trace in the order of the section.

    owner : (unknowns,) number of the trace.  edge : (unknowns,) number of its edge.  jacobian as of Nodes.
    height : (sections, unknowns) from the bottom of the stack [m].
    """

    charges: NumberArray
    across: FloatArray
    height: FloatArray
    jacobian: FloatArray
    owner: IntArray
    edge_names: tuple[str, ...]
    edge: IntArray

    @property
    def matrix(self) -> NumberArray:
        """Capacitance matrix over vacuum permittivity: (sections, traces, traces)."""
        order = list(dict.fromkeys(self.owner.tolist()))  # from the bottom up, as the equations stand
        belongs = (self.owner == np.array(order)[:, None]).astype(np.float64)
        result = np.empty((len(self.charges), len(order), len(order)), dtype=self.charges.dtype)
        result[:, np.array(order)[:, None], np.array(order)[None, :]] = belongs @ self.charges[:, :, order]
        return result


def capacitance_matrix(section: LayeredSection, plan: LayeredPlan) -> NumberArray:
    """Capacitance matrix over vacuum permittivity: (sections, traces, traces), a row the charges for 1 V on a trace."""
    return trace_charges(section, plan).matrix


def trace_charges(
    section: LayeredSection, plan: LayeredPlan, systems: Mapping[int, System] | None = None,
) -> TraceCharges:
    """Solve for 1 V on each trace in turn, the others at nought; complex where a Dk is.

    systems : layer_systems of the section, where they are at hand.
    """
    systems = systems or layer_systems(section, plan)
    layers = list(systems)
    matrix = whole_matrix(section, plan, systems)
    edges = [nodes.edge.name for system in systems.values() for nodes in system.nodes]
    sizes = [nodes.across.shape[1] for system in systems.values() for nodes in system.nodes]
    owner = np.repeat([int(name.split()[0]) for name in edges], sizes)
    order = np.array([number for layer in layers for number, trace in enumerate(section.traces)
                      if trace.layer == layer])
    wanted = -2.0 * np.pi * (owner[:, None] == order)
    charges = np.linalg.solve(matrix, np.broadcast_to(wanted, (section.count, *wanted.shape)))[:, :, np.argsort(order)]
    bases = {layer: np.asarray(sum(section.thicknesses[:layer], start=np.zeros(section.count))) for layer in layers}
    return TraceCharges(
        charges=charges, across=np.concatenate([system.across for system in systems.values()], axis=1),
        height=np.concatenate([system.height + bases[layer][:, None] for layer, system in systems.items()], axis=1),
        jacobian=np.concatenate([nodes.jacobian for system in systems.values() for nodes in system.nodes], axis=1),
        owner=owner, edge_names=tuple(edges), edge=np.repeat(np.arange(len(edges)), sizes),
    )


def layer_systems(section: LayeredSection, plan: LayeredPlan) -> dict[int, System]:
    """The near images of the traces of each layer that holds any, from the bottom up; no Dk enters."""
    result = {}
    for layer in sorted({trace.layer for trace in section.traces}):
        edges = [edge for number, trace in enumerate(section.traces) if trace.layer == layer
                 for edge in trace_faces(section, number)]
        result[layer] = near_system(edges, layer_images(section, layer), counts=[
            plan.counts[edge.name] for edge in edges], mirror=False)
    return result


def whole_matrix(section: LayeredSection, plan: LayeredPlan, systems: Mapping[int, System]) -> NumberArray:
    """The matrix of all conditions, M over Dk: (sections, unknowns, unknowns), layer by layer."""
    ends = np.cumsum([0] + [system.across.shape[1] for system in systems.values()])
    parts = {layer: slice(start, stop) for layer, start, stop in zip(systems, ends[:-1], ends[1:], strict=True)}
    result = np.empty((section.count, ends[-1], ends[-1]), dtype=np.result_type(*section.dks))
    for low in systems:
        result[:, parts[low], parts[low]] = _within(section, plan, low, systems[low])
        for high in systems:
            if high > low:
                result[:, parts[low], parts[high]], result[:, parts[high], parts[low]] = _between(
                    section, plan, (low, systems[low]), (high, systems[high]))
    return result


def layer_images(section: LayeredSection, layer: int) -> tuple[NearImage, ...]:
    """The near images of a layer, heights from its lower face: the traces themselves, and at both of its faces."""
    numbers = [number for number, trace in enumerate(section.traces) if trace.layer == layer]
    return (NearImage(None), NearImage(np.zeros(section.count), touching=_touching(section, numbers, up=False)),
            NearImage(section.thicknesses[layer], touching=_touching(section, numbers, up=True)))


def layer_medium(section: LayeredSection, plan: LayeredPlan, layer: int) -> Medium:
    """What the dielectrics make of the images of a layer."""
    below, above, dk = stack_below(section, layer), stack_above(section, layer), section.dks[layer]
    rest = spectral_rest(below=below, above=above, body_dk=dk, body_thickness=section.thicknesses[layer],
                         distance=way_left(section, layer), count=plan.wavenumbers[layer, layer])
    return Medium((np.ones(section.count), below.first_reflection(dk), above.first_reflection(dk)), rest=rest)


def _within(section: LayeredSection, plan: LayeredPlan, layer: int, system: System) -> NumberArray:
    """M over Dk of the traces of one layer among themselves."""
    medium = layer_medium(section, plan, layer)
    assert medium.rest is not None
    sent = sent_from(system, system.across.shape[1])
    nodes = system.across, system.height
    matrix = medium.rest.whole_matrix(nodes, nodes if sent.spread is None else (sent.across, sent.height))
    if sent.spread is not None:
        matrix = matrix @ sent.spread
    for factor, own in zip(medium.factors, system.own, strict=True):
        if np.any(factor):
            matrix += factor[:, None, None] * own
    return np.asarray(matrix / section.dks[layer][:, None, None])


def _touching(section: LayeredSection, numbers: Sequence[int], *, up: bool) -> tuple[str, ...]:
    """Which faces of the traces of a layer lie on its upper (`up`) or lower face: feet, and crests as high as it."""
    feet = [f"{number} foot" for number in numbers if section.traces[number].foot_up == up]
    crests = [f"{number} crest" for number in numbers if section.traces[number].foot_up != up
              and np.array_equal(section.traces[number].thickness, section.thicknesses[section.traces[number].layer])]
    return (*feet, *crests)


@dataclass(frozen=True, slots=True)
class Waves:
    """How charges of an upper layer are taken up in a lower one, by wavenumber: arrays (sections, k).

    wavenumber [1/m].  weight : (k,) of the quadrature.  down, up : reflections seen from the upper layer; back : seen
    downwards from the layers from the upper one (excluded) to the lower one.  factor : of the whole way.
    """

    wavenumber: FloatArray
    weight: FloatArray
    down: NumberArray
    up: NumberArray
    back: Mapping[int, NumberArray]
    factor: NumberArray


def waves_between(section: LayeredSection, plan: LayeredPlan, low: int, high: int) -> Waves:
    """The wave of a charge in the upper layer goes down through every layer between, each with what comes back from
    further below, and is taken up in the lower one."""
    wavenumber, weight = spectral_quadrature(way_between(section, low, high), plan.wavenumbers[low, high])
    down = stack_below(section, high).reflection(wavenumber, section.dks[high])
    up = stack_above(section, high).reflection(wavenumber, section.dks[high])
    factor = (1.0 + down) / (1.0 - down * up * through(section, high, wavenumber) ** 2)
    back = {}
    for layer in range(high - 1, low - 1, -1):
        back[layer] = stack_below(section, layer).reflection(wavenumber, section.dks[layer])
        way = through(section, layer, wavenumber)
        factor = factor * ((way * (1.0 + back[layer])) if layer > low else 1.0) / (1.0 + back[layer] * way**2)
    return Waves(wavenumber, weight, down, up, back, factor)


def through(section: LayeredSection, layer: int, wavenumber: FloatArray) -> FloatArray:
    """What is left of a wave that has gone through a layer."""
    return np.asarray(np.exp(-wavenumber * section.thicknesses[layer][:, None]))


def _between(
    section: LayeredSection, plan: LayeredPlan, lower: tuple[int, System], upper: tuple[int, System],
) -> tuple[NumberArray, NumberArray]:
    """M over Dk of points in the lower and charges in the upper layer, and the other way round: (sections, nodes,
    nodes)."""
    low, high = lower[0], upper[0]
    waves = waves_between(section, plan, low, high)
    back, up = (factor * through(section, layer, waves.wavenumber)
                for factor, layer in ((waves.back[low], low), (waves.up, high)))
    strength = (waves.weight * waves.factor / section.dks[high][:, None])[:, None, :]

    def carried(layer: int, across: FloatArray, height: FloatArray) -> NumberArray:
        k = waves.wavenumber[:, None, :]
        at_foot = np.exp(-k * height[:, :, None])
        at_top = np.exp(-k * (section.thicknesses[layer][:, None] - height)[:, :, None])
        wave = at_top + back[:, None, :] * at_foot if layer == low else at_foot + up[:, None, :] * at_top
        phase = k * across[:, :, None]
        return np.concatenate([wave * np.cos(phase), wave * np.sin(phase)], axis=2)

    at_nodes = [carried(layer, system.across, system.height) for layer, system in (lower, upper)]
    sources = []
    for (layer, system), same in zip((lower, upper), at_nodes, strict=True):
        sent = sent_from(system, system.across.shape[1])
        sources.append(same if sent.spread is None else sent.spread.T @ carried(layer, sent.across, sent.height))
    twice = np.concatenate([strength, strength], axis=2)
    downwards = -(at_nodes[0] * twice) @ sources[1].transpose(0, 2, 1)
    if sources[0] is at_nodes[0] and sources[1] is at_nodes[1]:
        return downwards, downwards.transpose(0, 2, 1)
    return downwards, -(at_nodes[1] * twice) @ sources[0].transpose(0, 2, 1)


def stack_below(section: LayeredSection, layer: int) -> FlatStack:
    """What lies below a layer, outwards."""
    return FlatStack(section.thicknesses[:layer][::-1], section.dks[:layer][::-1], section.bottom_plane)


def stack_above(section: LayeredSection, layer: int) -> FlatStack:
    """What lies above a layer, outwards."""
    return FlatStack(section.thicknesses[layer + 1 :], section.dks[layer + 1 :], section.top_plane)


def trace_faces(section: LayeredSection, number: int) -> list[Edge]:
    """Faces of one trace, heights from the lower face of its layer."""
    trace = section.traces[number]
    thickness = section.thicknesses[trace.layer]
    foot = thickness if trace.foot_up else np.zeros(section.count)
    crest = foot - trace.thickness if trace.foot_up else trace.thickness
    half_foot, half_crest = 0.5 * trace.foot_width, 0.5 * trace.crest_width
    left, right = trace.centre - half_foot, trace.centre + half_foot
    inner, outer = trace.centre - half_crest, trace.centre + half_crest
    return [
        Edge(f"{number} foot", "copper", (left, foot), (right, foot)),
        Edge(f"{number} right side", "copper", (right, foot), (outer, crest)),
        Edge(f"{number} crest", "copper", (inner, crest), (outer, crest)),
        Edge(f"{number} left side", "copper", (left, foot), (inner, crest)),
    ]


def _extent(section: LayeredSection, layer: int) -> tuple[FloatArray, FloatArray]:
    """Lowest and highest copper in a layer, from its lower face [m]."""
    lows, highs = [], []
    for trace in section.traces:
        if trace.layer == layer:
            thickness = section.thicknesses[layer]
            lows.append(thickness - trace.thickness if trace.foot_up else 0.0 * thickness)
            highs.append(thickness if trace.foot_up else trace.thickness)
    return np.minimum.reduce(lows), np.maximum.reduce(highs)


def way_left(section: LayeredSection, layer: int) -> FloatArray:
    """Shortest ray within one layer that its near images leave out [m]."""
    low, high = _extent(section, layer)
    thickness = section.thicknesses[layer]
    ways = [2.0 * thickness - (high - low)]
    if layer > 0:
        ways.append(2.0 * (low + section.thicknesses[layer - 1]))
    if layer + 1 < len(section.thicknesses):
        ways.append(2.0 * (thickness - high + section.thicknesses[layer + 1]))
    return np.asarray(np.minimum.reduce(ways))


def way_between(section: LayeredSection, low: int, high: int) -> FloatArray:
    """Shortest upright way from the copper of one layer to that of another [m]."""
    between: Sequence[FloatArray] = section.thicknesses[low + 1 : high]
    top = section.thicknesses[low] - _extent(section, low)[1]
    return np.asarray(sum(between, start=top + _extent(section, high)[0]))
