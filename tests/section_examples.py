"""Cross-sections built from plain numbers, for checks of the solver: floats or arrays, lengths in any one unit."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from tolerance.arrays import FloatArray
from tolerance.sections.section import Mask, Ply, Section
from tolerance.solver.line import ModeSolution, solve_modes
from tolerance.solver.plan import Plan, SolverSettings, plan_for

EVEN, ODD = 1, -1
Number = float | FloatArray


def microstrip(
    *, foot: Number, crest: Number, thickness: Number, height: Number, dk: Number, gap: Number | None = None,
    mask: tuple[Number, Number, Number] | None = None, cover: tuple[Number, Number] | None = None,
    lower_ply: tuple[Number, Number] | None = None,
) -> Section:
    """A trace over a plane; `mask` = (on laminate, over copper, Dk), `cover` = (thickness from the crest, Dk).

    lower_ply : a second ply between the first and the plane, (thickness, Dk).
    """
    foot_, crest_, thickness_, height_, dk_, gap_, *rest = _arrays(
        foot, crest, thickness, height, dk, gap, *(mask or ()), *(cover or ()), *(lower_ply or ()))
    values = iter(rest)
    coat = None if mask is None else Mask(next(values), next(values), next(values))
    crest_side = () if cover is None else (Ply(next(values), next(values)),)
    below = () if lower_ply is None else (Ply(next(values), next(values)),)
    return Section(foot_, crest_, thickness_, None if gap is None else gap_, (Ply(height_, dk_), *below), True,
                   crest_side, False, coat)


def stripline(
    *, foot: Number, crest: Number, thickness: Number, core: tuple[Number, Number], prepreg: tuple[Number, Number],
    gap: Number | None = None,
) -> Section:
    """A trace between planes; `core` below the foot and `prepreg` from the crest on, each (thickness, Dk)."""
    foot_, crest_, thickness_, gap_, core_, dk_core, prepreg_, dk_prepreg = _arrays(
        foot, crest, thickness, gap, *core, *prepreg)
    return Section(foot_, crest_, thickness_, None if gap is None else gap_, (Ply(core_, dk_core),), True,
                   (Ply(prepreg_, dk_prepreg),), True)


def solve(
    section: Section, *, settings: SolverSettings | None = None, plan: Plan | None = None,
) -> dict[int, ModeSolution]:
    """Every mode that the section has, planned for its first row where no `plan` is given."""
    modes = (EVEN,) if section.gap is None else (EVEN, ODD)
    return solve_modes(section, plan or plan_for(section, settings), modes=modes)


def impedance(section: Section, *, mode: int = EVEN, settings: SolverSettings | None = None) -> float:
    """Impedance [ohm] of one mode of the first row."""
    return float(solve(section, settings=settings)[mode].impedance[0])


def _arrays(*values: Number | None) -> list[FloatArray]:
    """All as arrays of one common shape (sections,); None stands as nought."""
    given: list[npt.ArrayLike] = [0.0 if value is None else value for value in values]
    shape = np.broadcast_shapes((1,), *(np.shape(value) for value in given))
    return [np.array(np.broadcast_to(np.asarray(value, dtype=np.float64), shape)) for value in given]
