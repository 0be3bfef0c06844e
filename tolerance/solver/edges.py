"""The edges that carry unknown charge: faces of copper, and faces of dielectric that are not in the kernel.

Sections are mirror-symmetric, so only the half x >= 0 is discretised. Heights are counted from the lower face of
the body (see kernels). Every array of an edge has shape (sections,).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Literal

import numpy as np

from tolerance.arrays import FloatArray, NumberArray
from tolerance.sections.section import Section
from tolerance.solver.rules import (
    Rule,
    graded_rule,
    ground_rule,
    ground_self_potential,
    refinement,
    self_potential,
    tail_rule,
)

#: Of an edge: unknowns, places of the quadrature, places where far images and waves see it (the unknowns, or more).
NodeCounts = tuple[int, int, int]

Role = Literal["copper", "strip", "ground", "dielectric"]
#: Grading by how the charge grows towards the ends: like distance^(-1/3) at corners of copper, like distance^(-1/2)
#: at the edges of a strip without thickness, more mildly on dielectric faces.
GRADING: Mapping[Role, int] = MappingProxyType({"copper": 3, "strip": 2, "ground": 3, "dielectric": 2})


@dataclass(frozen=True, slots=True)
class Edge:
    """A straight edge from `start` to `stop`, each (x, y) of arrays (sections,) [m].

    folded : it crosses x = 0 symmetrically and only its right half carries unknowns (copper of single lines).
    tail   : it runs sideways from `start` to infinity, and `stop` holds `start` moved by the scale of its nodes.
    left_dk, right_dk : Dk on either side of a dielectric edge, seen along its direction.
    """

    name: str
    role: Role
    start: tuple[FloatArray, FloatArray]
    stop: tuple[FloatArray, FloatArray]
    folded: bool = False
    tail: bool = False
    left_dk: NumberArray | None = None
    right_dk: NumberArray | None = None

    @property
    def conducts(self) -> bool:
        """Whether it is copper, with or without thickness."""
        return self.role != "dielectric"

    @property
    def length(self) -> FloatArray:
        """Length [m]; of a tail, the scale of its nodes."""
        return np.asarray(np.hypot(self.stop[0] - self.start[0], self.stop[1] - self.start[1]))


@dataclass(frozen=True, slots=True)
class Places:
    """Where an edge has its unknowns, and the finer places of its quadrature: arrays (sections, unknowns or fine) [m].

    far_across, far_height : where images that are not near, and waves, see its charge: the unknowns themselves, or
        finer places where those lie further apart than the images are away.
    jacobian : quadrature weight in metres: density is charge over it.  length : (sections,), see Edge.
    """

    across: FloatArray
    height: FloatArray
    fine_across: FloatArray
    fine_height: FloatArray
    far_across: FloatArray
    far_height: FloatArray
    jacobian: FloatArray
    length: FloatArray


@dataclass(frozen=True, slots=True)
class Nodes:
    """An edge with its unknowns.

    refine : (fine, unknowns) charges at fine places from the unknown charges.
    spread : (far, unknowns) charges at far places; None where they are the unknowns themselves.
    alone  : (sections, unknowns, unknowns) logarithmic potential of the edge on itself; None on dielectric.
    mirrored : the same of the mirror image of a folded edge, else None.
    normal : (x, y) of the unit normal to the left, arrays (sections,).
    share, fine_share, far_share : how far along from start to stop the places lie, in every section: (places,).
    """

    edge: Edge
    places: Places
    refine: FloatArray
    spread: FloatArray | None
    alone: FloatArray | None
    mirrored: FloatArray | None
    normal: tuple[FloatArray, FloatArray]
    share: FloatArray
    fine_share: FloatArray
    far_share: FloatArray

    @property
    def across(self) -> FloatArray:
        """x of the unknowns."""
        return self.places.across

    @property
    def height(self) -> FloatArray:
        """y of the unknowns."""
        return self.places.height

    @property
    def fine_across(self) -> FloatArray:
        """x of the quadrature."""
        return self.places.fine_across

    @property
    def fine_height(self) -> FloatArray:
        """y of the quadrature."""
        return self.places.fine_height

    @property
    def jacobian(self) -> FloatArray:
        """See Places."""
        return self.places.jacobian


def edge_places(edge: Edge, counts: NodeCounts) -> Places:
    """Places of `edge`; a folded edge gets half of each count, which must be even."""
    unknowns, fine, far = counts
    rule, fine_rule = (_rule(edge, count) for count in (unknowns, fine))
    length = edge.length
    stretch = length if edge.tail else 0.5 * length
    across, height = _along(edge, length, rule, _kept(edge, unknowns))
    far_across, far_height = (across, height) if far == unknowns else _along(
        edge, length, _rule(edge, far), _kept(edge, far))
    return Places(across, height, *_along(edge, length, fine_rule, _kept(edge, fine)), far_across, far_height,
                  stretch[:, None] * (rule.weights * rule.slope)[_kept(edge, unknowns)], length)


def place_nodes(edge: Edge, counts: NodeCounts) -> Nodes:
    """Nodes of `edge`, with what it does to itself; see edge_places."""
    unknowns, fine, far = counts
    places = edge_places(edge, counts)
    length, power = places.length, GRADING[edge.role]
    keep = _kept(edge, unknowns)
    alone: FloatArray | None = None
    mirrored: FloatArray | None = None
    if edge.conducts and edge.tail:
        alone = ground_self_potential(unknowns) + np.log(length)[:, None, None]
    elif edge.conducts:
        full = self_potential(unknowns, power) + np.log(0.5 * length)[:, None, None]
        alone = full[:, keep, keep]
        mirrored = full[:, keep, : unknowns // 2][:, :, ::-1] if edge.folded else None
    direction = ((edge.stop[0] - edge.start[0]) / length, (edge.stop[1] - edge.start[1]) / length)
    return Nodes(edge=edge, places=places, refine=_refined(edge, unknowns, fine),
                 spread=None if far == unknowns else _refined(edge, unknowns, far), alone=alone, mirrored=mirrored,
                 normal=(-direction[1], direction[0]), share=_share(edge, unknowns)[keep],
                 fine_share=_share(edge, fine)[_kept(edge, fine)], far_share=_share(edge, far)[_kept(edge, far)])


def _kept(edge: Edge, count: int) -> slice:
    """Which of `count` places carry unknowns of their own: the right half of a folded edge."""
    return slice(count // 2, None) if edge.folded else slice(None)


def _refined(edge: Edge, unknowns: int, finer: int) -> FloatArray:
    """Charges at `finer` places from the unknown ones."""
    whole = refinement(unknowns, finer)
    if not edge.folded:
        return whole
    rows, columns = _kept(edge, finer), _kept(edge, unknowns)
    return np.asarray(whole[rows, columns] + whole[rows, : unknowns // 2][:, ::-1])


def _rule(edge: Edge, count: int) -> Rule:
    if not edge.tail:
        return graded_rule(count, GRADING[edge.role])
    return ground_rule(count) if edge.conducts else tail_rule(count)


def _share(edge: Edge, count: int) -> FloatArray:
    position = _rule(edge, count).position
    return position if edge.tail else 0.5 * (1.0 + position)


def _along(edge: Edge, length: FloatArray, rule: Rule, keep: slice) -> tuple[FloatArray, FloatArray]:
    position = rule.position[keep]
    if edge.tail:
        across = edge.start[0][:, None] + length[:, None] * position
        return across, np.broadcast_to(edge.start[1][:, None], across.shape)
    middle = [0.5 * (edge.start[axis] + edge.stop[axis]) for axis in (0, 1)]
    half = [0.5 * (edge.stop[axis] - edge.start[axis]) for axis in (0, 1)]
    across, height = (middle[axis][:, None] + half[axis][:, None] * position for axis in (0, 1))
    return across, height


def trace_edges(section: Section) -> list[Edge]:
    """Faces of the right-hand trace, or of the right half of a single one; one face where it has no thickness."""
    foot_height, crest_height = np.zeros(section.count), section.thickness
    if not section.thickness[0]:
        return _strip_edges(section)
    setback = 0.5 * (section.foot_width - section.crest_width)
    if section.gap is None:
        foot_end, crest_end = 0.5 * section.foot_width, 0.5 * section.crest_width
        return [
            Edge("foot", "copper", (-foot_end, foot_height), (foot_end, foot_height), folded=True),
            Edge("outer side", "copper", (foot_end, foot_height), (crest_end, crest_height)),
            Edge("crest", "copper", (-crest_end, crest_height), (crest_end, crest_height), folded=True),
        ]
    inner, outer = 0.5 * section.gap, 0.5 * section.gap + section.foot_width
    return [
        Edge("foot", "copper", (inner, foot_height), (outer, foot_height)),
        Edge("outer side", "copper", (outer, foot_height), (outer - setback, crest_height)),
        Edge("crest", "copper", (inner + setback, crest_height), (outer - setback, crest_height)),
        Edge("inner side", "copper", (inner, foot_height), (inner + setback, crest_height)),
    ]


def ground_edges(section: Section, *, reach: FloatArray | None = None) -> list[Edge]:
    """Faces of the grounded copper right of a coplanar line: the trace's slope mirrored, reaching far out.

    reach : how far beyond the gap the copper goes [m], where planes on both sides leave it nothing to do further
        out; absent: tails of 50 times gap and height.
    """
    if section.ground_gap is None:
        return []
    zero, thickness = np.zeros(section.count), section.thickness
    foot = outer_foot_edge(section) + section.ground_gap
    crest = foot + 0.5 * (section.foot_width - section.crest_width)
    tail = reach is None
    way = section.ground_gap + section.foot_side[0].thickness if reach is None else reach
    return [
        Edge("ground side", "ground", (foot, zero), (crest, thickness)),
        Edge("ground foot", "ground", (foot, zero), (foot + way, zero), tail=tail),
        Edge("ground crest", "ground", (crest, thickness), (crest + way, thickness), tail=tail),
    ]


def _strip_edges(section: Section) -> list[Edge]:
    zero, outer = np.zeros(section.count), outer_foot_edge(section)
    if section.gap is None:
        return [Edge("foot", "strip", (-outer, zero), (outer, zero), folded=True)]
    return [Edge("foot", "strip", (0.5 * section.gap, zero), (outer, zero))]


def outer_foot_edge(section: Section) -> FloatArray:
    """x of the outer foot edge of the right-hand trace [m]."""
    if section.gap is None:
        return 0.5 * section.foot_width
    return 0.5 * section.gap + section.foot_width


def mask_edges(section: Section, *, merged: bool, ground_merged: bool) -> list[Edge]:
    """Face of a mask that follows the copper: mesa top, its walls, and the flat beyond (height from the foot).

    merged : the mesas of a pair overlap into one. Single lines have one mesa in any case.
    ground_merged : the mesa of the trace and that of the grounded copper beside it overlap, or the flat mask stands
        higher than both.
    """
    mask = section.mask
    if mask is None:
        return []
    flat, top = mask.on_laminate, np.maximum(mask.on_laminate, section.thickness + mask.over_copper)
    outer = outer_foot_edge(section) + flat
    zero = np.zeros(section.count)
    inner = zero if section.gap is None or merged else 0.5 * section.gap - flat

    def face(name: str, start: tuple[FloatArray, FloatArray], stop: tuple[FloatArray, FloatArray]) -> Edge:
        return Edge(name, "dielectric", start, stop, left_dk=np.ones(section.count), right_dk=mask.dk)

    def tail(name: str, start: FloatArray, height: FloatArray) -> Edge:
        scale = 2.0 * flat + 0.3 * np.asarray(sum(ply.thickness for ply in section.foot_side))
        return replace(face(name, (start, height), (start + scale, height)), tail=True)

    edges = []
    if section.gap is not None and not merged:
        edges.append(face("mesa inner wall", (inner, flat), (inner, top)))
        edges.append(face("flat between", (zero, flat), (inner, flat)))
    if section.ground_gap is None:
        return [*edges, face("mesa top", (inner, top), (outer, top)),
                face("mesa outer wall", (outer, top), (outer, flat)), tail("flat tail", outer, flat)]
    ground = outer - flat + section.ground_gap - flat
    if ground_merged:
        end = ground + flat
        return [*edges, face("mesa top", (inner, top), (end, top)), tail("ground mesa top", end, top)]
    return [*edges, face("mesa top", (inner, top), (outer, top)), face("mesa outer wall", (outer, top), (outer, flat)),
            face("flat beside", (outer, flat), (ground, flat)), face("ground mesa wall", (ground, flat), (ground, top)),
            tail("ground mesa top", ground, top)]
