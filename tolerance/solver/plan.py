"""How many nodes each edge gets: chosen once from a line's nominal section, then kept for every draw.

Keeping the counts fixed keeps the impedance a smooth function of every dimension.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.sections.section import Section
from tolerance.solver.edges import Edge, NodeCounts
from tolerance.solver.kernels import LAST_EXPONENT, image_multiples
from tolerance.solver.structure import Structure, shortest_remaining_way, structure

#: Unknowns per unit of length over distance: keeps centred strips within 2e-5 of Cohn 1954 at any width.
NODES_ALONG_BROAD_FACE = 1.6
#: Unknowns that are enough for any broad face.
BROADEST = 24

#: Longer edges, over the way to their neighbours, get no more places for it.
LONGEST = 4000.0
LONGEST_GROUND = 200.0
#: More nodes over the wavenumber than this would only follow grounded copper far out, where nothing is left.
MOST_WAVENUMBERS = 4000
#: Nodes over the wavenumber for the current in planes under a narrow line.
PLANE_WAVENUMBERS = 24


@dataclass(frozen=True, slots=True)
class SolverSettings:
    """What sets the accuracy: nodes on a copper face, on a dielectric face, on a face that runs to infinity.

    They hold for edges not much longer than their distance to the next edge; longer ones get more.
    """

    copper_nodes: int = 8
    dielectric_nodes: int = 12
    tail_nodes: int = 12


@dataclass(frozen=True, slots=True)
class Plan:
    """Node counts by edge name, image places, and nodes over the wavenumber.

    plane_wavenumbers : those for the currents in the planes.
    """

    counts: Mapping[str, NodeCounts]
    multiples: tuple[float, ...]
    wavenumbers: int
    plane_wavenumbers: int = 0
    settings: SolverSettings = field(default_factory=SolverSettings)

    def count(self, edge: Edge) -> NodeCounts:
        """Node counts of `edge`, also of one that the nominal section does not have."""
        return self.counts.get(edge.name) or _counts(edge, 4.0, self.settings)

    def serving(self, other: Plan) -> Plan:
        """This plan with so many nodes on every edge that it serves sections of the other plan too."""
        counts = {name: (max(own[0], more[0]), max(own[1], more[1]), max(own[2], more[2]))
                  for name, own in self.counts.items() for more in [other.counts.get(name, own)]}
        return replace(self, counts={**other.counts, **counts})


def plan_for(section: Section, settings: SolverSettings | None = None) -> Plan:
    """The plan for a line whose nominal section is the first of `section`."""
    settings = settings or SolverSettings()
    counts: dict[str, NodeCounts] = {}
    multiples: tuple[float, ...] = ()
    wavenumbers, plane_wavenumbers = 0, 0
    for section_as in _as_drawn_and_across(section.rows(slice(0, 1))):
        parts = structure(section_as)
        for edge, ratio, breadth in _crowding(parts):
            counts.setdefault(edge.name, _counts(edge, ratio, settings, breadth=breadth))
        multiples = multiples or _multiples(parts)
        wavenumbers = wavenumbers or _wavenumbers(parts)
        plane_wavenumbers = max(plane_wavenumbers, _plane_wavenumbers(parts))
    return Plan(counts=counts, multiples=multiples, wavenumbers=wavenumbers, plane_wavenumbers=plane_wavenumbers,
                settings=settings)


def _as_drawn_and_across(nominal: Section) -> list[Section]:
    """The nominal section and, with a mask, the same where the flat mask stands as high as the mesa, or lower.

    Draws may lie on the other side of that limit, where the kernel is another one: a plan serves both.
    """
    mask = nominal.mask
    if mask is None:
        return [nominal]
    top = nominal.thickness + mask.over_copper
    level = np.where(mask.on_laminate >= top, 0.5 * (nominal.thickness + top), top)
    return [nominal, replace(nominal, mask=replace(mask, on_laminate=level))]


def _counts(edge: Edge, ratio: float, settings: SolverSettings, *, breadth: float = 0.0) -> NodeCounts:
    """Node counts for an edge `ratio` times as long as the way to its next neighbour.

    breadth : length over the way to the next flat face. Along a broad face the charge is level but for its ends,
    each as long as that way, and the quadrature needs places in proportion. So do the unknowns up to a limit:
    beyond, they crowd at the ends closely enough, and images see the finer places. A long edge
    along a near one needs places closer than their distance.
    """
    if edge.tail:
        fine = (6 if edge.conducts else 3) * settings.tail_nodes
        return settings.tail_nodes, fine, fine
    base = settings.copper_nodes if edge.conducts else settings.dielectric_nodes
    more = max(0.0, math.log2(ratio / 2.5)) if ratio > 0.0 else 0.0
    if edge.role == "ground":  # further out than this from its corner nothing is left
        ratio, breadth = min(ratio, LONGEST_GROUND), min(breadth, LONGEST_GROUND)
    along = NODES_ALONG_BROAD_FACE * breadth
    unknowns = _even(max(base + 4.0 * more, min(along, BROADEST)))
    far = _even(2.0 * along)
    fine = _even(max(2.0 * unknowns, 2.0 * along, 2.0 * ratio, 6.0 * ratio - 150.0))
    return unknowns, fine, far if far > 2 * unknowns else unknowns


def _multiples(parts: Structure) -> tuple[float, ...]:
    return image_multiples(parts.below, parts.body_dk) if parts.above is None else ()


def _wavenumbers(parts: Structure) -> int:
    """Enough to follow cos(k x) across the section and the decay with the whole depth of the plies."""
    if parts.above is None:
        return 0
    shortest = float(shortest_remaining_way(parts)[0])
    across = max(float(np.abs(end[0]).max()) for edge in parts.edges for end in (edge.start, edge.stop))
    depth = float(np.max([parts.below.depth + parts.above.depth]))
    wanted = math.ceil(16.0 + 0.5 * LAST_EXPONENT * 2.0 * across / shortest + 4.0 * math.sqrt(depth / shortest))
    return min(wanted, MOST_WAVENUMBERS)


def _plane_wavenumbers(parts: Structure) -> int:
    """Enough for the square of what charges induce in planes, which goes like cos(2 k x) exp(-2 k distance)."""
    heights = [float(end[1][0]) for edge in parts.edges for end in (edge.start, edge.stop) if edge.conducts]
    across = max(float(np.abs(end[0][0])) for edge in parts.edges for end in (edge.start, edge.stop) if edge.conducts)
    ways = []
    if parts.below.plane:
        ways.append(float(parts.below.depth[0]) + min(heights))
    if parts.above is not None and parts.above.plane and parts.body_thickness is not None:
        ways.append(float((parts.body_thickness + parts.above.depth)[0]) - max(heights))
    return math.ceil(PLANE_WAVENUMBERS + 0.7 * LAST_EXPONENT * across / min(ways))


def edge_counts(
    edges: Sequence[Edge], settings: SolverSettings, *, levels: Sequence[float], bases: Mapping[str, float],
) -> dict[str, NodeCounts]:
    """Node counts of edges without mirror: their heights are counted from `bases` [m] by name.

    levels : heights of the planes [m]. Half-way to another trace there may be the like of a plane too.
    """
    outlines = [(edge, _points(edge) + np.array([0.0, bases[edge.name]])) for edge in edges]
    counts = {}
    for edge, points in outlines:
        length = float(edge.length[0])
        flat = min((float(np.abs(points[:, 1] - level).min()) for level in levels), default=np.inf)
        beside = [_way(points, there, float(other.length[0])) for other, there in outlines if other is not edge]
        partner = min((_way(points, there, 0.0) for other, there in outlines
                       if other.name.split()[0] != edge.name.split()[0]), default=np.inf)
        breadth = length / max(min(flat, 0.5 * partner), length / LONGEST)
        counts[edge.name] = _counts(edge, length / max(min(flat, *beside), length / LONGEST), settings, breadth=breadth)
    return counts


def _crowding(parts: Structure) -> list[tuple[Edge, float, float]]:
    """Every edge with its length over the way to the nearest edge, image or flat face that it does not touch.

    The second number is its length over the way to the nearest flat face alone.
    A touching edge counts with its length: it sets the scale on which the charge next to the corner varies.
    """
    outlines = [(edge, _points(edge)) for edge in parts.edges]
    others = [(edge, points) for edge, points in outlines]
    others += [(edge, points * [-1.0, 1.0]) for edge, points in outlines if not edge.folded]
    levels = [-float(parts.below.thicknesses[0][0])] if parts.below.thicknesses else []
    if parts.above is not None and parts.body_thickness is not None:
        levels.append(float((parts.body_thickness + (parts.above.thicknesses[0] if parts.crest_touches else 0.0))[0]))
    result = []
    for edge, points in outlines:
        length = float(edge.length[0])
        ways = [float(np.abs(points[:, 1] - level).min()) for level in levels]
        flat = min(ways, default=np.inf)
        ways += [_way(points, there, float(other.length[0])) for other, there in others
                 if other is not edge or there[0, 0] != points[0, 0]]
        result.append((edge, length / max(min(ways), length / LONGEST), length / max(flat, length / LONGEST)))
    return result


def _points(edge: Edge) -> FloatArray:
    """Places along the first section's edge: shape (places, 2) [m]."""
    steps = np.linspace(0.0, 1.0, 33)[:, None]
    start, stop = (np.array([float(end[0][0]), float(end[1][0])]) for end in (edge.start, edge.stop))
    return np.asarray(start + steps * (stop - start))


def _way(here: FloatArray, there: FloatArray, length: float) -> float:
    distance = np.hypot(*(here[:, None, :] - there[None, :, :]).transpose(2, 0, 1))
    nearest = float(distance.min())
    ends = distance[np.ix_([0, -1], [0, -1])]
    return length if float(ends.min()) < 1e-6 * length else nearest


def _even(number: float) -> int:
    """The smallest even whole number not below `number`."""
    return 2 * math.ceil(0.5 * number - 1e-9)
