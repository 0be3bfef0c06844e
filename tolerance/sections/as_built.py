"""From the drawn line and draws of the process to finished cross-sections."""

from __future__ import annotations

import numpy as np

from tolerance.process.values import ProcessValues
from tolerance.scenario.tables import Line
from tolerance.sections.section import Mask, Ply, Section
from tolerance.sections.surroundings import PlyPlan, Surroundings


def as_built(line: Line, surroundings: Surroundings, draws: ProcessValues) -> Section:
    """The cross-section of `line` for every draw.

    The finished foot is the drawn width plus the etch; the crest is the foot less twice thickness over etch factor;
    the artwork holds the pitch, so that a wider trace of a pair leaves a narrower gap. Sections that cannot exist
    are not mended: see Section.possible.
    """
    layer = line.layer
    thickness = draws.value(f"{layer}.foil") + draws.value(f"{layer}.plating")
    foot = line.width + draws.etch(layer, width=line.width)
    factor = draws.value(f"{layer}.etch_factor")
    etched = factor > 0.0
    crest = np.where(etched, foot - 2.0 * thickness / np.where(etched, factor, 1.0), -np.inf)
    mask = None
    if surroundings.mask is not None:
        name = surroundings.mask
        mask = Mask(on_laminate=draws.value(f"{name}.thickness"), over_copper=draws.value(f"{name}.over_copper"),
                    dk=draws.value(f"{name}.dk"), name=name)
    return Section(
        foot_width=foot, crest_width=crest, thickness=thickness,
        gap=None if line.gap is None else line.width + line.gap - foot,
        foot_side=tuple(_ply(plan, draws) for plan in surroundings.foot_side),
        foot_plane=surroundings.foot_plane is not None,
        crest_side=tuple(_ply(plan, draws) for plan in surroundings.crest_side),
        crest_plane=surroundings.crest_plane is not None,
        mask=mask,
    )


def _ply(plan: PlyPlan, draws: ProcessValues) -> Ply:
    thickness = draws.value(f"{plan.layer}.thickness")
    for copper in plan.fills:
        thickness = thickness + draws.value(f"{copper}.foil") + draws.value(f"{copper}.plating")
    return Ply(thickness, draws.value(f"{plan.layer}.dk"), plan.layer, plan.kind)
