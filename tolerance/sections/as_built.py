"""From the drawn line and draws of the process to finished cross-sections."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.values import ProcessValues
from tolerance.scenario.tables import Line
from tolerance.sections.layered import LayeredSection, PlacedTrace
from tolerance.sections.section import Mask, Ply, Section
from tolerance.sections.surroundings import BroadsideSurroundings, BroadsideTrace, PlyPlan, Surroundings

#: Height of the layer of air that holds a bare outer trace of a broadside pair, over its copper; only a place to
#: count heights from: beyond it there is air as well.
AIR_OVER_COPPER = 4.0


def as_built(
    line: Line, surroundings: Surroundings | BroadsideSurroundings, values: ProcessValues,
) -> Section | LayeredSection:
    """The cross-section of `line` for every draw.

    The finished foot is the drawn width plus the etch; the crest is the foot less twice thickness over etch factor;
    the artwork holds pitch and centres, so that a wider trace leaves a narrower gap to its partner and to grounded
    copper. Sections that cannot exist are not mended: see `possible` of the result.
    """
    if isinstance(surroundings, BroadsideSurroundings):
        return _broadside(line, surroundings, values)
    foot, crest, thickness = _trace(line, line.layer, values)
    lossy = surroundings.metals is not None
    mask = None
    if surroundings.mask is not None:
        name = surroundings.mask
        mask = Mask(on_laminate=values.value(f"{name}.thickness"), over_copper=values.value(f"{name}.over_copper"),
                    dk=values.value(f"{name}.dk"), name=name, dk_frequency=surroundings.mask_dk_frequency,
                    df=None if surroundings.metals is None else values.value(f"{name}.df"))
    return Section(
        foot_width=foot, crest_width=crest, thickness=thickness,
        gap=None if line.gap is None else line.width + line.gap - foot,
        foot_side=tuple(_ply(plan, values, lossy=lossy) for plan in surroundings.foot_side),
        foot_plane=surroundings.foot_plane is not None,
        crest_side=tuple(_ply(plan, values, lossy=lossy) for plan in surroundings.crest_side),
        crest_plane=surroundings.crest_plane is not None,
        mask=mask, ground_gap=None if line.ground_gap is None else line.ground_gap - (foot - line.width),
        band_dk=None if surroundings.band_dk is None else np.full(foot.shape, surroundings.band_dk),
        metals=surroundings.metals,
    )


def _trace(line: Line, layer: str, values: ProcessValues) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Foot width, crest width and thickness [m] of a trace on `layer`."""
    thickness = values.value(f"{layer}.foil") + values.value(f"{layer}.plating")
    foot = line.width + values.etch(layer, width=line.width)
    factor = values.value(f"{layer}.etch_factor")
    etched = factor > 0.0
    return foot, np.where(etched, foot - 2.0 * thickness / np.where(etched, factor, 1.0), -np.inf), thickness


def _broadside(line: Line, around: BroadsideSurroundings, values: ProcessValues) -> LayeredSection:
    """The partner is shifted by the offset and by what the registration of both layers adds.

    A band of resin at the height of a trace is a layer of its own.
    """
    lossy = around.metals is not None
    plies = [_ply(plan, values, lossy=lossy) for plan in around.plies]
    shapes = [_trace(line, trace.layer, values) for trace in (around.upper, around.lower)]
    above, below = ([] if trace.body is not None else [_air(thickness)]
                    for trace, (_, _, thickness) in zip((around.upper, around.lower), shapes, strict=True))
    plies = [*below, *plies, *above]
    traces: list[PlacedTrace] = []
    for trace, (foot, crest, thickness) in zip((around.upper, around.lower), shapes, strict=True):
        inside = trace.body + len(below) if trace.body is not None else 0 if trace.foot_up else len(plies) - 1
        if trace.band_dk is None:
            plies[inside] = replace(plies[inside], thickness=plies[inside].thickness + thickness)
        else:
            pressing = plies[inside]
            inside += 0 if not trace.foot_up else 1
            plies.insert(inside, _band(trace, thickness, pressing))
            traces = [_lifted(one, inside) for one in traces]
        shift = values.value(f"{trace.layer}.registration") + (line.offset if trace.layer == line.partner else 0.0)
        traces.append(PlacedTrace(inside, trace.foot_up, foot, crest, thickness, shift))
    middle = 0.5 * (traces[0].centre + traces[1].centre)
    return LayeredSection(
        tuple(ply.thickness for ply in plies), tuple(ply.dk for ply in plies), around.bottom_plane is not None,
        around.top_plane is not None, tuple(replace(trace, centre=trace.centre - middle) for trace in traces),
        tuple(ply.name for ply in plies), tuple(ply.kind for ply in plies),
        dfs=tuple(ply.df for ply in plies if ply.df is not None) if lossy else (),
        dk_frequencies=tuple(ply.dk_frequency for ply in plies), metals=around.metals,
    )


def _band(trace: BroadsideTrace, thickness: FloatArray, pressing: Ply) -> Ply:
    """The resin that comes out of the ply `pressing`, with its loss tangent."""
    return replace(pressing, thickness=thickness, dk=np.full(thickness.shape, trace.band_dk),
                   name=f"resin round {trace.layer}", kind="resin")


def _lifted(trace: PlacedTrace, inserted: int) -> PlacedTrace:
    """The trace after a layer has been put in at number `inserted`."""
    return replace(trace, layer=trace.layer + 1) if trace.layer >= inserted else trace


def _air(copper: FloatArray) -> Ply:
    return Ply(AIR_OVER_COPPER * copper, np.ones_like(copper), "air", "air", df=np.zeros_like(copper))


def _ply(plan: PlyPlan, values: ProcessValues, *, lossy: bool) -> Ply:
    thickness = values.value(f"{plan.layer}.thickness")
    for copper in plan.fills:
        thickness = thickness + values.value(f"{copper}.foil") + values.value(f"{copper}.plating")
    return Ply(thickness, values.value(f"{plan.layer}.dk"), plan.layer, plan.kind,
               values.value(f"{plan.layer}.df") if lossy else None, plan.dk_frequency)
