"""Where charge and current sit on the faces of a trace, how much capacitance is fringe, how far a pair couples."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.sections.layered import LayeredSection
from tolerance.sections.section import Ply, Section
from tolerance.solver.assembly import near_system, node_charges
from tolerance.solver.current import face_currents, layered_face_currents
from tolerance.solver.layered import LayeredPlan, capacitance_matrix, trace_charges
from tolerance.solver.line import AnyPlan, AnySection, solve_modes
from tolerance.solver.lossy import mode_charges
from tolerance.solver.plan import Plan
from tolerance.solver.structure import media, structure

EVEN, ODD = 1, -1


@dataclass(frozen=True, slots=True)
class FaceShares:
    """Of one mode, loss-free: shares of a trace's charge and of its current (at small skin depth) by face, (sections,).

    fringe : share of the capacitance beyond that of parallel plates as wide as foot and crest; None for broadside
        pairs, whose traces face planes and each other.
    """

    charge: Mapping[str, FloatArray]
    current: Mapping[str, FloatArray]
    fringe: FloatArray | None


@dataclass(frozen=True, slots=True)
class Coupling:
    """Of a pair, loss-free: (sections,). inductive : mutual over own inductance.  capacitive : likewise.

    backward : backward crosstalk coefficient, (inductive + capacitive) / 4: what a step on one trace of a long pair
        sends back along the quiet one. Textbook, for weak coupling and matched ends.
    """

    inductive: FloatArray
    capacitive: FloatArray
    backward: FloatArray


def face_shares(section: AnySection, plan: AnyPlan, *, mode: int) -> FaceShares:
    """Shares by face in words: foot, crest, and each side; of a broadside pair of the upper and the lower trace."""
    if isinstance(section, LayeredSection):
        assert isinstance(plan, LayeredPlan)
        filled, air = trace_charges(section, plan), trace_charges(section.in_air(), plan)
        charge, current = ({f"{which} {face}": share for trace, which in enumerate(("upper", "lower"))
                            for face, share in layered_face_currents(
                                found, mode_charges(found, mode), trace).share.items()} for found in (filled, air))
        return FaceShares(charge, current, None)
    assert isinstance(plan, Plan)
    parts = structure(section)
    in_medium, in_air = media(parts, multiples=plan.multiples, wavenumbers=plan.wavenumbers)
    system = near_system(parts.edges, parts.images, counts=[plan.count(edge) for edge in parts.edges])
    halves = 2.0 if section.gap is None else 1.0
    filled_charges = node_charges(system, in_medium, body_dk=parts.body_dk, sign=mode)
    air_charges = node_charges(system, in_air, body_dk=np.ones(section.count), sign=mode, air=True)
    charge, current = (_in_words(face_currents(system, charges, halves=halves).share, single=section.gap is None)
                       for charges in (filled_charges, air_charges))
    capacitance = halves * filled_charges[:, : system.trace].sum(axis=1)
    return FaceShares(charge, current, np.asarray(1.0 - _parallel_plates(section) / capacitance))


def coupling(section: AnySection, plan: AnyPlan) -> Coupling:
    """Coupling coefficients of a pair."""
    if isinstance(section, LayeredSection):
        assert isinstance(plan, LayeredPlan)
        filled, air = (capacitance_matrix(one, plan) for one in (section, section.in_air()))
        inductance = np.linalg.inv(air)
        capacitive, inductive = -_mutual(filled), _mutual(inductance)
    else:
        modes = solve_modes(section, plan, modes=(EVEN, ODD))
        even, odd = modes[EVEN], modes[ODD]
        capacitive = (odd.capacitance - even.capacitance) / (odd.capacitance + even.capacitance)
        inductive = (odd.capacitance_in_air - even.capacitance_in_air) / (
            odd.capacitance_in_air + even.capacitance_in_air)
    return Coupling(inductive, capacitive, 0.25 * (inductive + capacitive))


def _mutual(matrix: FloatArray) -> FloatArray:
    return np.asarray(matrix[:, 0, 1] / np.sqrt(matrix[:, 0, 0] * matrix[:, 1, 1]))


def _in_words(share: Mapping[str, FloatArray], *, single: bool) -> dict[str, FloatArray]:
    """Faces of the trace; both sides of a single line are one edge in the solution."""
    of_trace = {face: value for face, value in share.items() if not face.startswith("ground")}
    if not single or "outer side" not in of_trace:
        return of_trace
    side = 0.5 * of_trace.pop("outer side")
    return {**of_trace, "left side": side, "right side": side}


def _parallel_plates(section: Section) -> FloatArray:
    """Capacitance over vacuum permittivity between the faces of a trace and the planes that they see."""
    result = np.zeros(section.count)
    for width, plies, plane in ((section.foot_width, section.foot_side, section.foot_plane),
                                (section.crest_width, section.crest_side, section.crest_plane)):
        if plane:
            result += width / _electric_depth(plies)
    return result


def _electric_depth(plies: tuple[Ply, ...]) -> FloatArray:
    return np.asarray(sum(ply.thickness / ply.dk for ply in plies))
