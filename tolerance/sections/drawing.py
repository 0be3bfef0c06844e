"""A line's nominal cross-section as outlines to be drawn to scale."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import FloatArray, read_only
from tolerance.sections.layered import LayeredSection
from tolerance.sections.section import Ply, Section
from tolerance.sections.surroundings import BroadsideSurroundings, Surroundings


@dataclass(frozen=True, slots=True)
class Region:
    """A dielectric of a cross-section: outline (corners, 2) in metres, x sideways and y up.

    filled : how much of its height [m] lies where copper is absent.
    """

    name: str
    kind: str  # mask | prepreg | core | resin (at the height of the copper)
    dk: float
    outline: FloatArray
    filled: float = 0.0


@dataclass(frozen=True, slots=True)
class Conductor:
    """Copper of a cross-section: outline (corners, 2) in metres. role: trace | plane | ground."""

    name: str
    role: str
    outline: FloatArray


@dataclass(frozen=True, slots=True)
class Drawing:
    """A line's nominal cross-section to scale.

    bands : where tolerances move its edges, quadrilaterals (4, 2) in metres; see sections/bands.py.
    """

    regions: tuple[Region, ...]
    conductors: tuple[Conductor, ...]
    bands: tuple[FloatArray, ...] = ()


def with_fills(
    drawing: Drawing, surroundings: Surroundings | BroadsideSurroundings, nominals: Mapping[str, float],
) -> Drawing:
    """The drawing with the height of absent copper that each ply fills; nominals [SI] by property name."""
    plies = surroundings.plies if isinstance(surroundings, BroadsideSurroundings) \
        else (*surroundings.foot_side, *surroundings.crest_side)
    filled = {ply.layer: sum(nominals[f"{copper}.{item}"] for copper in ply.fills for item in ("foil", "plating"))
              for ply in plies}
    return replace(drawing, regions=tuple(
        replace(region, filled=float(filled.get(region.name, 0.0))) for region in drawing.regions))


def drawing_of(
    section: Section | LayeredSection, surroundings: Surroundings | BroadsideSurroundings, layer: str,
) -> Drawing:
    """Outlines of the first section of the batch; `layer` names the copper of the traces.

    Heights run as in the stackup, top layer up, whichever way the foot points.
    """
    if isinstance(section, LayeredSection):
        assert isinstance(surroundings, BroadsideSurroundings)
        return _broadside_drawing(section.rows(slice(0, 1)), surroundings)
    assert isinstance(surroundings, Surroundings)
    one = section.rows(slice(0, 1))
    reach = _reach(one)
    thickness, foot_depth = float(one.thickness[0]), sum(float(ply.thickness[0]) for ply in one.foot_side)
    crest_top = thickness + sum(float(ply.thickness[0]) for ply in one.crest_side)
    band = _band(one, layer, reach)
    crest_start, first_extra = (thickness, 0.0) if band else (0.0, thickness)
    regions = [*_plies(one.foot_side, reach, start=0.0, way=-1.0), *band,
               *_plies(one.crest_side, reach, start=crest_start, way=1.0, first_extra=first_extra), *_mask(one, reach)]
    copper = [Conductor(layer, "trace", outline) for outline in _traces(one)]
    copper += [Conductor(layer, "ground", outline) for outline in _grounds(one, reach)]
    sheet = 0.35 * thickness + 0.02 * (foot_depth + crest_top)
    for plane, low, high in ((surroundings.foot_plane, -foot_depth - sheet, -foot_depth),
                             (surroundings.crest_plane, crest_top, crest_top + sheet)):
        if plane is not None:
            copper.append(Conductor(plane, "plane", _box(reach, low, high)))
    way = -1.0 if surroundings.foot_up else 1.0
    return Drawing(
        tuple(Region(part.name, part.kind, part.dk, read_only(part.outline * [1.0, way])) for part in regions),
        tuple(Conductor(part.name, part.role, read_only(part.outline * [1.0, way])) for part in copper),
    )


def _reach(one: Section) -> float:
    """How far sideways the drawing goes."""
    depth = sum(float(ply.thickness[0]) for ply in (*one.foot_side, *one.crest_side))
    mask = 0.0 if one.mask is None else 2.0 * float(one.mask.on_laminate[0])
    gap = 0.0 if one.gap is None else float(one.gap[0]) + float(one.foot_width[0])
    ground = 0.0 if one.ground_gap is None else float(one.ground_gap[0])
    return 0.5 * gap + 0.5 * float(one.foot_width[0]) + ground + mask + max(depth, float(one.foot_width[0]))


def _plies(
    plies: tuple[Ply, ...], reach: float, *, start: float, way: float, first_extra: float = 0.0,
) -> list[Region]:
    regions, height = [], start
    for number, ply in enumerate(plies):
        further = height + way * (float(ply.thickness[0]) + (first_extra if number == 0 else 0.0))
        regions.append(Region(ply.name, ply.kind, float(ply.dk[0]), _box(reach, min(height, further),
                                                                           max(height, further))))
        height = further
    return regions


def _band(one: Section, layer: str, reach: float) -> list[Region]:
    """Resin of its own Dk at the height of the copper `layer`."""
    if one.band_dk is None:
        return []
    return [Region(f"resin round {layer}", "resin", float(one.band_dk[0]), _box(reach, 0.0, float(one.thickness[0])))]


def _mask(one: Section, reach: float) -> list[Region]:
    if one.mask is None:
        return []
    flat = float(one.mask.on_laminate[0])
    top = max(flat, float(one.thickness[0] + one.mask.over_copper[0]))
    outer = [(-reach, 0.0)]
    for left, right in _mesas(one, flat, reach):
        outer += [(left, flat), (left, top), (right, top), (right, flat)]
    if one.ground_gap is None:
        outer = [outer[0], (-reach, flat), *outer[1:], (reach, flat)]
    return [Region(one.mask.name, "mask", float(one.mask.dk[0]), np.array([*outer, (reach, 0.0)]))]


def _mesas(one: Section, flat: float, reach: float) -> list[tuple[float, float]]:
    """Left and right end of each mesa; those that overlap are one."""
    half, outer = 0.5 * float(one.foot_width[0]), _outer(one)
    middles = [0.0] if one.gap is None else [-outer + half, outer - half]
    mesas = [(middle - half - flat, middle + half + flat) for middle in middles]
    if one.ground_gap is not None:
        begin = outer + float(one.ground_gap[0]) - flat
        mesas = [(-reach, -begin), *mesas, (begin, reach)]
    joined: list[tuple[float, float]] = []
    for left, right in mesas:
        if joined and left <= joined[-1][1]:
            joined[-1] = (joined[-1][0], right)
        else:
            joined.append((left, right))
    return joined


def _outer(one: Section) -> float:
    """x of the outer foot edge of the right-hand trace."""
    width = float(one.foot_width[0])
    return 0.5 * width if one.gap is None else 0.5 * float(one.gap[0]) + width


def _grounds(one: Section, reach: float) -> list[FloatArray]:
    """Grounded copper on both sides, the trace's slope mirrored."""
    if one.ground_gap is None:
        return []
    foot, thickness = _outer(one) + float(one.ground_gap[0]), float(one.thickness[0])
    crest = foot + 0.5 * float(one.foot_width[0] - one.crest_width[0])
    shape = np.array([(foot, 0.0), (reach, 0.0), (reach, thickness), (crest, thickness)])
    return [shape * [-1.0, 1.0], shape]


def _traces(one: Section) -> list[FloatArray]:
    foot, crest, thickness = (float(value[0]) for value in (one.foot_width, one.crest_width, one.thickness))
    shape = np.array([(-0.5 * foot, 0.0), (0.5 * foot, 0.0), (0.5 * crest, thickness), (-0.5 * crest, thickness)])
    if one.gap is None:
        return [shape]
    shift = np.array([0.5 * (float(one.gap[0]) + foot), 0.0])
    return [shape - shift, shape + shift]


def _box(reach: float, low: float, high: float) -> FloatArray:
    return np.array([(-reach, low), (reach, low), (reach, high), (-reach, high)])


def _broadside_drawing(one: LayeredSection, around: BroadsideSurroundings) -> Drawing:
    heights = np.concatenate([[0.0], np.cumsum([float(thickness[0]) for thickness in one.thicknesses])])
    widest = max(float(trace.foot_width[0]) + abs(float(trace.centre[0])) for trace in one.traces)
    reach = widest + float(heights[-1])
    regions = [Region(name, kind, float(dk[0]), read_only(_box(reach, heights[number], heights[number + 1])))
               for number, (name, kind, dk) in enumerate(zip(one.names, one.kinds, one.dks, strict=True))
               if kind != "air"]
    copper = []
    for trace, told in zip(one.traces, (around.upper, around.lower), strict=True):
        foot, crest, thickness, centre = (
            float(value[0]) for value in (trace.foot_width, trace.crest_width, trace.thickness, trace.centre))
        level = heights[trace.layer + 1] if trace.foot_up else heights[trace.layer]
        further = level - thickness if trace.foot_up else level + thickness
        copper.append(Conductor(told.layer, "trace", read_only([
            (centre - 0.5 * foot, level), (centre + 0.5 * foot, level),
            (centre + 0.5 * crest, further), (centre - 0.5 * crest, further)])))
    sheet = 0.35 * float(one.traces[0].thickness[0]) + 0.02 * float(heights[-1])
    for plane, low, high in ((around.bottom_plane, -sheet, 0.0), (around.top_plane, heights[-1], heights[-1] + sheet)):
        if plane is not None:
            copper.append(Conductor(plane, "plane", read_only(_box(reach, float(low), float(high)))))
    return Drawing(tuple(regions), tuple(copper))
