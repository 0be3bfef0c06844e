"""Which edges and which kernel a line needs: open above, or flat plies on both sides."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import FloatArray, IntArray, NumberArray
from tolerance.sections.section import Mask, Ply, Section
from tolerance.solver.assembly import Medium, NearImage
from tolerance.solver.edges import Edge, ground_edges, mask_edges, trace_edges
from tolerance.solver.kernels import FlatStack, far_images, plane_image, spectral_rest


@dataclass(frozen=True, slots=True)
class Structure:
    """Edges (copper first), near images, and the kernel's parts: `below` and `above` are counted from the body."""

    edges: tuple[Edge, ...]
    images: tuple[NearImage, ...]
    body_dk: NumberArray
    below: FlatStack
    above: FlatStack | None  # None: air, or a mask with a face of its own
    body_thickness: FloatArray | None

    @property
    def crest_touches(self) -> bool:
        """Whether the crest lies on the upper face of the body."""
        return any("crest" in image.touching for image in self.images)


#: What changes the edges of a section: bits of its topology.
FLAT_ABOVE, MERGED, GROUND_MERGED, STRIP = 1, 2, 4, 8


def topology(section: Section) -> IntArray:
    """A number for each section; sections with the same number have the same edges: shape (sections,)."""
    result = STRIP * (section.thickness == 0.0).astype(np.int64)
    if section.mask is not None:
        top = section.thickness + section.mask.over_copper
        result += FLAT_ABOVE * (section.mask.on_laminate >= top)
        if section.gap is not None:
            result += MERGED * (section.gap <= 2.0 * section.mask.on_laminate)
        if section.ground_gap is not None:
            result += GROUND_MERGED * (section.ground_gap <= 2.0 * section.mask.on_laminate)
    return np.asarray(result, dtype=np.int64)


def structure(section: Section) -> Structure:
    """Edges and kernel of a batch of sections of one topology.

    A coplanar line under one flat cover is a line under a mask as high as the cover: its grounded copper reaches
    further than a quadrature over the wavenumber could follow.
    """
    open_cover = len(section.crest_side) == 1 and not section.crest_plane
    if section.ground_gap is not None and open_cover and not _has_band(section):
        cover = section.crest_side[0]
        mask = Mask(section.thickness + cover.thickness, cover.thickness, cover.dk)
        return structure(replace(section, crest_side=(), mask=mask))
    if section.mask is not None:
        mask = section.mask
        if _is(section, FLAT_ABOVE) and section.ground_gap is None:  # the flat mask stands higher than the mesa
            cover = Ply(mask.on_laminate - section.thickness, mask.dk)
            return _between_flat_plies(section, (cover,))
        return _open_above(section, mask.dk)
    if section.foot_plane and not section.crest_side:
        return _open_above(section, np.ones(section.count))
    return _between_flat_plies(section, section.crest_side)


def media(
    parts: Structure, *, multiples: tuple[float, ...], wavenumbers: int, distance: FloatArray | None = None,
) -> tuple[Medium, Medium]:
    """The media of the section as built and of the same copper in air.

    distance : (sections,) [m] what sets the wavenumbers between flat plies; absent: the shortest remaining way.
    """
    one = np.ones(parts.body_dk.shape)
    if parts.above is None:
        filled = Medium((one, parts.below.first_reflection(parts.body_dk)),
                        far=far_images(parts.below, parts.body_dk, multiples=multiples))
        return filled, Medium((one, 0.0 * one), far=plane_image(parts.below.depth))
    assert parts.body_thickness is not None
    distance = shortest_remaining_way(parts) if distance is None else distance
    result = []
    for below, above, dk in ((parts.below, parts.above, parts.body_dk),
                             (parts.below.in_air(), parts.above.in_air(), one)):
        rest = spectral_rest(below=below, above=above, body_dk=dk, body_thickness=parts.body_thickness,
                             distance=distance, count=wavenumbers)
        result.append(Medium((one, below.first_reflection(dk), above.first_reflection(dk)), rest=rest))
    return result[0], result[1]


def shortest_remaining_way(parts: Structure) -> FloatArray:
    """Shortest ray between flat plies that the near images leave out [m]: shape (sections,)."""
    assert parts.above is not None
    assert parts.body_thickness is not None
    crest = np.maximum.reduce([edge.start[1] for edge in parts.edges])
    ways = [2.0 * parts.body_thickness - crest]
    if parts.below.thicknesses:
        ways.append(2.0 * parts.below.thicknesses[0])
    if parts.above.thicknesses:
        ways.append(2.0 * (parts.body_thickness - crest + parts.above.thicknesses[0]))
    return np.asarray(np.minimum.reduce(ways), dtype=np.float64)


def _is(section: Section, bit: int) -> bool:
    """Whether a batch of one topology has this bit."""
    return bool(int(topology(section.rows(slice(0, 1)))[0]) & bit)


def _open_above(section: Section, body_dk: NumberArray) -> Structure:
    """The plane on the foot side; over the trace air, or a mask whose face carries unknowns."""
    zero = np.zeros(section.count)
    edges = trace_edges(section) + ground_edges(section)
    if section.mask is not None:
        flat = _is(section, FLAT_ABOVE)
        edges += mask_edges(section, merged=flat or _is(section, MERGED),
                            ground_merged=flat or _is(section, GROUND_MERGED))
    return Structure(edges=tuple(edges), images=(NearImage(None), NearImage(zero, touching=("foot", "ground foot"))),
                     body_dk=body_dk, below=_stack(section.foot_side, plane=True), above=None, body_thickness=None)


def _between_flat_plies(section: Section, crest_side: tuple[Ply, ...]) -> Structure:
    """Flat plies or planes on both sides: every dielectric is in the kernel.

    The body is the ply that presses into the copper, or the band of resin at the copper's height.
    """
    zero = np.zeros(section.count)
    body_dk, thickness, further = crest_side[0].dk, section.thickness + crest_side[0].thickness, crest_side[1:]
    touching: tuple[str, ...] = ()
    if section.band_dk is not None and _has_band(section):
        body_dk, thickness, further = section.band_dk, section.thickness, crest_side
        touching = ("crest", "ground crest")
    return Structure(
        edges=tuple(trace_edges(section) + ground_edges(section, reach=_ground_reach(section, crest_side))),
        images=(NearImage(None), NearImage(zero, touching=("foot", "ground foot")), NearImage(thickness, touching)),
        body_dk=body_dk, below=_stack(section.foot_side, plane=section.foot_plane),
        above=_stack(further, plane=section.crest_plane), body_thickness=thickness,
    )


def _has_band(section: Section) -> bool:
    """Whether resin of its own Dk stands at the height of the traces of a batch of one topology."""
    return section.band_dk is not None and not _is(section, STRIP)


def _ground_reach(section: Section, crest_side: tuple[Ply, ...]) -> FloatArray:
    """So far out nothing is left of the field between grounded copper and planes, which falls like e^(-pi x / h)."""
    plies = sum(ply.thickness for ply in (*section.foot_side, *crest_side))
    return np.asarray(3.0 * (plies + section.thickness))


def _stack(plies: tuple[Ply, ...], *, plane: bool) -> FlatStack:
    return FlatStack(tuple(ply.thickness for ply in plies), tuple(ply.dk for ply in plies), plane)
