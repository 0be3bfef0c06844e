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
from tolerance.solver.assembly import NearImage, near_system
from tolerance.solver.edges import Edge, Nodes
from tolerance.solver.kernels import LAST_EXPONENT, FlatStack, spectral_rest
from tolerance.solver.plan import PLANE_WAVENUMBERS, SolverSettings, edge_counts


@dataclass(frozen=True, slots=True)
class LayeredPlan:
    """Node counts by edge name, and nodes over the wavenumber for each pair of layers."""

    counts: Mapping[str, tuple[int, int]]
    wavenumbers: Mapping[tuple[int, int], int]
    plane_wavenumbers: int = 0


def plan_layered(section: LayeredSection, settings: SolverSettings) -> LayeredPlan:
    """The plan for sections like the first one."""
    edges = [edge for trace in range(len(section.traces)) for edge in _edges(section, trace)]
    heights = [section.thicknesses[0] * 0.0]
    for thickness in section.thicknesses:
        heights.append(heights[-1] + thickness)
    bases = {name: float(heights[trace.layer][0]) for number, trace in enumerate(section.traces)
             for name in (edge.name for edge in _edges(section, number))}
    planes = [float(heights[0][0])] * section.bottom_plane + [float(heights[-1][0])] * section.top_plane
    counts = edge_counts(edges, settings, levels=planes, bases=bases)
    reach = max(float(np.abs(edge.start[0]).max()) for edge in edges) + max(
        float(np.abs(edge.stop[0]).max()) for edge in edges)
    layers = sorted({trace.layer for trace in section.traces})
    depth = float(heights[-1][0])
    wavenumbers = {}
    for number, low in enumerate(layers):
        for high in layers[number:]:
            way = float((_way_left(section, low) if low == high else _way_between(section, low, high))[0])
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


def trace_charges(section: LayeredSection, plan: LayeredPlan) -> TraceCharges:
    """Solve for 1 V on each trace in turn, the others at nought; complex where a Dk is."""
    layers = sorted({trace.layer for trace in section.traces})
    blocks = {layer: _Block.of(section, plan, layer) for layer in layers}
    rows = []
    for row in layers:
        cells = []
        for column in layers:
            if row == column:
                cells.append(blocks[row].matrix)
            elif row < column:
                cells.append(_between(section, plan, blocks[row], blocks[column]))
            else:
                cells.append(_between(section, plan, blocks[column], blocks[row]).transpose(0, 2, 1))
        rows.append(np.concatenate(cells, axis=2))
    matrix = np.concatenate(rows, axis=1)
    edges = [nodes.edge.name for layer in layers for nodes in blocks[layer].nodes]
    sizes = [nodes.across.shape[1] for layer in layers for nodes in blocks[layer].nodes]
    owner = np.repeat([int(name.split()[0]) for name in edges], sizes)
    order = np.array([number for layer in layers for number, trace in enumerate(section.traces)
                      if trace.layer == layer])
    wanted = -2.0 * np.pi * (owner[:, None] == order)
    charges = np.linalg.solve(matrix, np.broadcast_to(wanted, (section.count, *wanted.shape)))[:, :, np.argsort(order)]
    bases = {layer: np.asarray(sum(section.thicknesses[:layer], start=np.zeros(section.count))) for layer in layers}
    return TraceCharges(
        charges=charges, across=np.concatenate([blocks[layer].across for layer in layers], axis=1),
        height=np.concatenate([blocks[layer].height + bases[layer][:, None] for layer in layers], axis=1),
        jacobian=np.concatenate([nodes.jacobian for layer in layers for nodes in blocks[layer].nodes], axis=1),
        owner=owner, edge_names=tuple(edges), edge=np.repeat(np.arange(len(edges)), sizes),
    )


@dataclass(frozen=True, slots=True)
class _Block:
    """The traces of one layer: M over Dk among themselves, and their nodes; heights from the layer's lower face."""

    layer: int
    matrix: NumberArray
    across: FloatArray
    height: FloatArray
    nodes: tuple[Nodes, ...]

    @staticmethod
    def of(section: LayeredSection, plan: LayeredPlan, layer: int) -> _Block:
        numbers = [number for number, trace in enumerate(section.traces) if trace.layer == layer]
        edges = [edge for number in numbers for edge in _edges(section, number)]
        dk, thickness = section.dks[layer], section.thicknesses[layer]
        below, above = _below(section, layer), _above(section, layer)
        images = (NearImage(None), NearImage(np.zeros(section.count), touching=_touching(section, numbers, up=False)),
                  NearImage(thickness, touching=_touching(section, numbers, up=True)))
        system = near_system(edges, images, counts=[plan.counts[edge.name] for edge in edges], mirror=False)
        factors = (np.ones(section.count), below.first_reflection(dk), above.first_reflection(dk))
        matrix = sum((factor[:, None, None] * own for factor, own in zip(factors, system.own, strict=True)),
                     start=np.zeros((section.count, 1, 1)))
        rest = spectral_rest(below=below, above=above, body_dk=dk, body_thickness=thickness,
                             distance=_way_left(section, layer), count=plan.wavenumbers[layer, layer])
        matrix = matrix + rest.whole_matrix(system.across, system.height)
        return _Block(layer, matrix / dk[:, None, None], system.across, system.height, system.nodes)


def _touching(section: LayeredSection, numbers: Sequence[int], *, up: bool) -> tuple[str, ...]:
    """Which faces of the traces of a layer lie on its upper (`up`) or lower face: feet, and crests as high as it."""
    feet = [f"{number} foot" for number in numbers if section.traces[number].foot_up == up]
    crests = [f"{number} crest" for number in numbers if section.traces[number].foot_up != up
              and np.array_equal(section.traces[number].thickness, section.thicknesses[section.traces[number].layer])]
    return (*feet, *crests)


def _between(section: LayeredSection, plan: LayeredPlan, low: _Block, high: _Block) -> NumberArray:
    """M over Dk of points in the lower and charges in the upper layer: (sections, lower nodes, upper nodes).

    The wave of a charge in the upper layer goes down through every layer between, each with what comes back from
    further below, and is taken up in the lower one.
    """
    nodes, weights = np.polynomial.legendre.leggauss(plan.wavenumbers[low.layer, high.layer])
    last = LAST_EXPONENT / _way_between(section, low.layer, high.layer)
    wavenumber = last[:, None] * (0.5 * (1.0 + nodes)) ** 2
    weight = weights * 2.0 / (1.0 + nodes)

    def through(layer: int) -> FloatArray:
        return np.exp(-wavenumber * section.thicknesses[layer][:, None])

    down = _below(section, high.layer).reflection(wavenumber, section.dks[high.layer])
    up = _above(section, high.layer).reflection(wavenumber, section.dks[high.layer])
    factor = (1.0 + down) / (1.0 - down * up * through(high.layer) ** 2)
    for layer in range(high.layer - 1, low.layer, -1):
        back = _below(section, layer).reflection(wavenumber, section.dks[layer])
        factor = factor * through(layer) * (1.0 + back) / (1.0 + back * through(layer) ** 2)
    back = _below(section, low.layer).reflection(wavenumber, section.dks[low.layer])
    factor = factor / (1.0 + back * through(low.layer) ** 2)
    low_thickness, high_thickness = section.thicknesses[low.layer], section.thicknesses[high.layer]
    k = wavenumber[:, None, :]
    taken = np.exp(-k * (low_thickness[:, None] - low.height)[:, :, None]) + (back * through(low.layer))[
        :, None, :] * np.exp(-k * low.height[:, :, None])
    sent = np.exp(-k * high.height[:, :, None]) + (up * through(high.layer))[:, None, :] * np.exp(
        -k * (high_thickness[:, None] - high.height)[:, :, None])
    taken = taken * (weight * factor / section.dks[high.layer][:, None])[:, None, :]
    phase_low, phase_high = k * low.across[:, :, None], k * high.across[:, :, None]
    left = np.concatenate([taken * np.cos(phase_low), taken * np.sin(phase_low)], axis=2)
    right = np.concatenate([sent * np.cos(phase_high), sent * np.sin(phase_high)], axis=2)
    return np.asarray(-(left @ right.transpose(0, 2, 1)))


def _below(section: LayeredSection, layer: int) -> FlatStack:
    """What lies below a layer, outwards."""
    return FlatStack(section.thicknesses[:layer][::-1], section.dks[:layer][::-1], section.bottom_plane)


def _above(section: LayeredSection, layer: int) -> FlatStack:
    """What lies above a layer, outwards."""
    return FlatStack(section.thicknesses[layer + 1 :], section.dks[layer + 1 :], section.top_plane)


def _edges(section: LayeredSection, number: int) -> list[Edge]:
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


def _way_left(section: LayeredSection, layer: int) -> FloatArray:
    """Shortest ray within one layer that its near images leave out [m]."""
    low, high = _extent(section, layer)
    thickness = section.thicknesses[layer]
    ways = [2.0 * thickness - (high - low)]
    if layer > 0:
        ways.append(2.0 * (low + section.thicknesses[layer - 1]))
    if layer + 1 < len(section.thicknesses):
        ways.append(2.0 * (thickness - high + section.thicknesses[layer + 1]))
    return np.asarray(np.minimum.reduce(ways))


def _way_between(section: LayeredSection, low: int, high: int) -> FloatArray:
    """Shortest upright way from the copper of one layer to that of another [m]."""
    between: Sequence[FloatArray] = section.thicknesses[low + 1 : high]
    top = section.thicknesses[low] - _extent(section, low)[1]
    return np.asarray(sum(between, start=top + _extent(section, high)[0]))
