"""Which edges and which kernel a line needs: open above, or between two planes."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, IntArray
from tolerance.sections.section import Ply, Section
from tolerance.solver.assembly import Medium, NearImage
from tolerance.solver.edges import (
    Edge,
    flat_cover_edges,
    foot_level_edges,
    mask_edges,
    outer_foot_edge,
    trace_edges,
)
from tolerance.solver.kernels import FlatStack, far_images, plane_image, spectral_rest

@dataclass(frozen=True, slots=True)
class Structure:
    """Edges (copper first), near images, and the kernel's parts: `below` and `above` are counted from the body."""

    edges: tuple[Edge, ...]
    images: tuple[NearImage, ...]
    body_dk: FloatArray
    below: FlatStack
    above: FlatStack | None  # None: open above
    body_thickness: FloatArray | None


def topology(section: Section) -> IntArray:
    """A number for each section; sections with the same number have the same edges: shape (sections,)."""
    result = np.zeros(section.count, dtype=np.int64)
    if section.mask is not None:
        top = section.thickness + section.mask.over_copper
        result += section.mask.on_laminate >= top
        if section.gap is not None:
            result += 2 * (section.gap <= 2.0 * section.mask.on_laminate)
    return result


def structure(section: Section) -> Structure:
    """Edges and kernel of a batch of sections of one topology."""
    if section.foot_plane and section.crest_plane:
        return _between_planes(section)
    if section.foot_plane:
        return _open_over_crest(section)
    return _open_over_foot(section)


def media(parts: Structure, *, multiples: tuple[float, ...], wavenumbers: int) -> tuple[Medium, Medium]:
    """The media of the section as built and of the same copper in air."""
    one = np.ones_like(parts.body_dk)
    if parts.above is None:
        filled = Medium((one, parts.below.first_reflection(parts.body_dk)),
                        far=far_images(parts.below, parts.body_dk, multiples=multiples))
        return filled, Medium((one, 0.0 * one), far=plane_image(parts.below.depth))
    assert parts.body_thickness is not None
    distance = shortest_remaining_way(parts)
    result = []
    for below, above, dk in ((parts.below, parts.above, parts.body_dk),
                             (parts.below.in_air(), parts.above.in_air(), one)):
        rest = spectral_rest(below=below, above=above, body_dk=dk, body_thickness=parts.body_thickness,
                             distance=distance, count=wavenumbers)
        result.append(Medium((one, below.first_reflection(dk), above.first_reflection(dk)), rest=rest))
    return result[0], result[1]


def shortest_remaining_way(parts: Structure) -> FloatArray:
    """Shortest ray between two planes that the near images leave out [m]: shape (sections,)."""
    assert parts.above is not None
    assert parts.body_thickness is not None
    crest = next(edge for edge in parts.edges if edge.name == "crest").start[1]
    ways = [2.0 * parts.below.thicknesses[0], 2.0 * parts.body_thickness - crest]
    if parts.above.thicknesses:
        ways.append(2.0 * (parts.body_thickness - crest + parts.above.thicknesses[0]))
    return np.minimum.reduce(ways)


def _stack(plies: tuple[Ply, ...]) -> FlatStack:
    return FlatStack(tuple(ply.thickness for ply in plies), tuple(ply.dk for ply in plies))


def _between_planes(section: Section) -> Structure:
    body = section.crest_side[0]
    thickness = section.thickness + body.thickness
    zero = np.zeros(section.count)
    return Structure(
        edges=tuple(trace_edges(section, foot_height=zero, crest_height=section.thickness)),
        images=(NearImage(None), NearImage(zero, touching=("foot",)), NearImage(thickness)),
        body_dk=body.dk, below=_stack(section.foot_side), above=_stack(section.crest_side[1:]),
        body_thickness=thickness,
    )


def _open_over_crest(section: Section) -> Structure:
    """The plane on the foot side: bare, under a mask, or under flat plies."""
    zero = np.zeros(section.count)
    edges = trace_edges(section, foot_height=zero, crest_height=section.thickness)
    body_dk = np.ones(section.count)
    outer = outer_foot_edge(section)
    if section.mask is not None:
        mask = section.mask
        body_dk = mask.dk
        number = int(topology(section.rows(slice(0, 1)))[0])
        if number % 2:  # the flat mask stands higher than the mesa
            edges += flat_cover_edges(section, plies=(Ply(mask.on_laminate, mask.dk),), base=zero,
                                      split=outer + mask.on_laminate)
        else:
            edges += mask_edges(section, merged=number >= 2)
    elif section.crest_side:
        first = section.crest_side[0]
        body_dk = first.dk
        plies = (Ply(section.thickness + first.thickness, first.dk), *section.crest_side[1:])
        edges += flat_cover_edges(section, plies=plies, base=zero, split=outer + section.thickness + first.thickness)
    return Structure(edges=tuple(edges), images=(NearImage(None), NearImage(zero, touching=("foot",))),
                     body_dk=body_dk, below=_stack(section.foot_side), above=None, body_thickness=None)


def _open_over_foot(section: Section) -> Structure:
    """The plane on the crest side: the foot looks away from it, at flat plies and then air."""
    zero = np.zeros(section.count)
    body = section.crest_side[0]
    beyond = section.foot_side[0].dk if section.foot_side else np.ones(section.count)
    edges = trace_edges(section, foot_height=section.thickness, crest_height=zero)
    share = beyond / body.dk
    edges = [Edge(e.name, e.role, e.start, e.stop, folded=e.folded, true_share=share if e.name == "foot" else None)
             for e in edges]
    edges += foot_level_edges(section, height=section.thickness, below_dk=body.dk, above_dk=beyond)
    edges += flat_cover_edges(section, plies=section.foot_side, base=section.thickness,
                              split=outer_foot_edge(section) + section.thickness)
    return Structure(edges=tuple(edges), images=(NearImage(None), NearImage(zero, touching=("crest",))),
                     body_dk=body.dk, below=_stack(section.crest_side), above=None, body_thickness=None)
