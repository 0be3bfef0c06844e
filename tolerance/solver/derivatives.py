"""Partial derivatives of the impedance with respect to every dimension and Dk, from one solution more.

With charges q from A q = b and C = w . q, the adjoint A' s = w gives dC = s . (db - dA q) for any change of A. What A
is made of, places of edges and what dielectrics make of images, gets its gradient once (gradient, media_gradient). All
that a structure is told in is linear in the dimensions and Dk of a section, so that every one of them takes its share
by constant factors. The result is the derivative of the discrete solution itself.
Adjoint sensitivities: standard; see for instance M. B. Giles, N. A. Pierce, "An introduction to the adjoint approach
to design", Flow, Turbulence and Combustion 65 (2000), pages 393-415.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any, TypeVar

import numpy as np

from tolerance.arrays import FloatArray, NumberArray
from tolerance.sections.layered import LayeredSection, PlacedTrace
from tolerance.sections.section import Mask, Ply, Section
from tolerance.solver.assembly import Medium, System, full_matrix, near_system
from tolerance.solver.gradient import Excited, Gradient, gradient
from tolerance.solver.layered import LayeredPlan
from tolerance.solver.layered_gradient import layered_coordinates, solve_layered_mode
from tolerance.solver.line import FREE_SPACE_IMPEDANCE, AnyPlan, AnySection, batches, layered_batches
from tolerance.solver.media_gradient import media_gradient
from tolerance.solver.plan import Plan
from tolerance.solver.structure import Structure, media, structure, topology

#: Relative step that tells the constant factors between a section and its structure.
STEP = 1e-3

#: Sections at a time: the gradient of more leaves the cache.
LARGEST_BATCH = 64


@dataclass(frozen=True, slots=True)
class ModeDerivatives:
    """Impedance [ohm] of a mode and its derivatives, all (sections,), by name of what changes [ohm/m, or ohm].

    Names: foot_width, crest_width, thickness, gap, ground_gap, band_dk, foot_side.0.thickness, foot_side.0.dk, ...,
    crest_side.0.thickness, ..., mask.on_laminate, mask.over_copper, mask.dk. Of a broadside pair:
    traces.0.foot_width, traces.0.crest_width, traces.0.thickness, traces.0.centre, traces.1..., layers.0.thickness,
    layers.0.dk, .... Each is with all others held.
    """

    impedance: FloatArray
    by: Mapping[str, FloatArray]


@dataclass(frozen=True, slots=True)
class Slopes:
    """Impedance [ohm] of a mode, shape (sections,), and how its logarithm answers to every dimension and Dk.

    names : of the dimensions, as of ModeDerivatives.  values : the dimensions [m, or -], (sections, dimensions).
    slopes : d ln Z / d value [1/m, or -], (sections, dimensions). Times `values` it is d ln Z / d ln value.
    """

    names: tuple[str, ...]
    impedance: FloatArray
    values: FloatArray
    slopes: FloatArray


def impedance_slopes(section: AnySection, plan: AnyPlan, *, mode: int) -> Slopes:
    """Solve one mode (1 even or single, -1 odd) of all sections with the slopes of ln Z: what a fit with gradients
    calls. Twice the odd or half the even mode's impedance has the same slopes."""
    found = parameters(section)
    impedance, slopes = np.empty(section.count), np.empty((section.count, len(found)))
    values = np.stack([value for _, value, _ in found], axis=1)
    if isinstance(section, LayeredSection):
        assert isinstance(plan, LayeredPlan)
        of_names = _shares(section)
        for chosen in layered_batches(section, plan):
            capacitances, gradients = solve_layered_mode(section.rows(chosen), plan, mode)
            impedance[chosen] = FREE_SPACE_IMPEDANCE / np.sqrt(capacitances[0] * capacitances[1])
            slopes[chosen] = gradients @ of_names
        return Slopes(tuple(name for name, _, _ in found), impedance, values, slopes)
    assert isinstance(plan, Plan)
    kinds = topology(section)
    shares = {kind: _shares(section.rows(np.flatnonzero(kinds == kind)[:1])) for kind in np.unique(kinds)}
    for rows in batches(section, plan, largest=LARGEST_BATCH):
        impedance[rows], gradients = _solve_batch(section.rows(rows), plan, mode)
        slopes[rows] = gradients @ shares[kinds[rows[0]]]
    return Slopes(tuple(name for name, _, _ in found), impedance, values, slopes)


def solve_with_derivatives(section: AnySection, plan: AnyPlan, *, mode: int) -> ModeDerivatives:
    """Solve one mode (1 even or single, -1 odd) with all partial derivatives."""
    found = impedance_slopes(section, plan, mode=mode)
    return ModeDerivatives(found.impedance, dict(zip(found.names, (found.impedance[:, None] * found.slopes).T,
                                                     strict=True)))


_Setter = Callable[[AnySection, FloatArray], AnySection]


def parameters(section: AnySection) -> list[tuple[str, FloatArray, _Setter]]:
    """Name, value and how to set it, of all that a section is made of."""
    return _layered_parameters(section) if isinstance(section, LayeredSection) else _plain_parameters(section)


def _layered_parameters(section: LayeredSection) -> list[tuple[str, FloatArray, _Setter]]:
    found: list[tuple[str, FloatArray, _Setter]] = []

    def of_part(part: str, number: int, name: str) -> _Setter:
        def put(one: AnySection, value: FloatArray) -> AnySection:
            parts = list(getattr(one, part))
            parts[number] = _with(parts[number], name, value) if name else value
            return _with(one, part, tuple(parts))
        return put

    for number, trace in enumerate(section.traces):
        found += [(f"traces.{number}.{name}", getattr(trace, name), of_part("traces", number, name))
                  for name in ("foot_width", "crest_width", "thickness", "centre")]
    for number, (thickness, dk) in enumerate(zip(section.thicknesses, section.dks, strict=True)):
        found += [(f"layers.{number}.thickness", thickness, of_part("thicknesses", number, "")),
                  (f"layers.{number}.dk", dk, of_part("dks", number, ""))]
    return found


def _plain_parameters(section: Section) -> list[tuple[str, FloatArray, _Setter]]:
    found: list[tuple[str, FloatArray, _Setter]] = []

    def plain(name: str) -> _Setter:
        return lambda one, value: _with(one, name, value)

    def of_ply(side: str, number: int, name: str) -> _Setter:
        def put(one: AnySection, value: FloatArray) -> AnySection:
            plies: list[Ply] = list(getattr(one, side))
            plies[number] = _with(plies[number], name, value)
            return _with(one, side, tuple(plies))
        return put

    def of_mask(name: str) -> _Setter:
        def put(one: AnySection, value: FloatArray) -> AnySection:
            assert isinstance(one, Section)
            assert one.mask is not None
            return _with(one, "mask", _with(one.mask, name, value))
        return put

    for name in ("foot_width", "crest_width", "thickness", "gap", "ground_gap", "band_dk"):
        value = getattr(section, name)
        if value is not None:
            found.append((name, value, plain(name)))
    for side in ("foot_side", "crest_side"):
        for number, ply in enumerate(getattr(section, side)):
            found += [(f"{side}.{number}.{name}", getattr(ply, name), of_ply(side, number, name))
                      for name in ("thickness", "dk")]
    if section.mask is not None:
        found += [(f"mask.{name}", getattr(section.mask, name), of_mask(name))
                  for name in ("on_laminate", "over_copper", "dk")]
    return found


Part = TypeVar("Part", bound=Section | LayeredSection | Ply | Mask | PlacedTrace)


def _with(part: Part, name: str, value: object) -> Part:
    changes: dict[str, Any] = {name: value}
    return replace(part, **changes)


def _shares(section: AnySection) -> FloatArray:
    """How all that a solution is told in moves with each parameter of `section`: (coordinates, parameters).

    Every row of a batch has the first of `section` with another parameter moved. All is linear, so that one section of
    a topology stands for all.
    """
    found = parameters(section)
    rows: AnySection = section.rows(np.zeros(len(found) + 1, dtype=np.int64))
    steps = []
    for number, (_, value, put) in enumerate(found, start=1):
        moved = np.repeat(value[:1], len(found) + 1)
        steps.append(STEP * (float(value[0]) or float(found[0][1][0])))
        moved[number] += steps[-1]
        rows = put(rows, moved)
    told = layered_coordinates(rows) if isinstance(rows, LayeredSection) else _coordinates(structure(rows))
    return np.asarray((told[1:] - told[0]).T / np.array(steps))


def _coordinates(parts: Structure) -> FloatArray:
    """All that a structure is told in: (sections, coordinates), in the order of _gradients."""
    zero = np.zeros(parts.body_dk.shape)
    values = [end[axis] for pick in (0, 1) for axis in (0, 1) for end in (
        (edge.start, edge.stop)[pick] for edge in parts.edges)]
    values += [zero if image.level is None else image.level for image in parts.images]
    values += [zero if edge.left_dk is None else edge.left_dk for edge in parts.edges]
    values += [zero if edge.right_dk is None else edge.right_dk for edge in parts.edges]
    values += [parts.body_dk, *parts.below.thicknesses, *parts.below.dks]
    if parts.above is not None:
        values += [*parts.above.thicknesses, *parts.above.dks, zero if parts.body_thickness is None
                   else parts.body_thickness]
    return np.stack(values, axis=1)


def _solve_batch(section: Section, plan: Plan, mode: int) -> tuple[FloatArray, NumberArray]:
    """Impedance, and the gradient of its logarithm with respect to _coordinates."""
    parts = structure(section)
    system = near_system(parts.edges, parts.images, counts=[plan.count(edge) for edge in parts.edges])
    both = media(parts, multiples=plan.multiples, wavenumbers=plan.wavenumbers)
    one = np.ones(section.count)
    solved, capacitances = [], []
    for medium, dk, air in zip(both, (parts.body_dk, one), (False, True), strict=True):
        excited, capacitance = _excited(system, medium, dk, mode, air=air)
        solved.append(excited)
        capacitances.append(capacitance)
    halves = 2.0 if section.gap is None else 1.0
    impedance = FREE_SPACE_IMPEDANCE / np.sqrt(halves**2 * capacitances[0] * capacitances[1])
    found = gradient(system, parts.images, solved, sign=mode)
    charged = 2.0 * np.pi * solved[0].adjoint[:, : system.trace].sum(axis=1)
    return np.asarray(impedance), _gradients(parts, plan, found, charged)


def _excited(
    system: System, medium: Medium, body_dk: NumberArray, mode: int, *, air: bool,
) -> tuple[Excited, NumberArray]:
    """The solution with the adjoint of -ln C / 2, and C over the halves of a trace."""
    kept: list[FloatArray] = []
    matrix = full_matrix(system, medium, sign=mode, air=air, kept=kept)
    wanted = np.zeros((*matrix.shape[:2], 1))
    wanted[:, : system.trace] = 1.0
    charges = (-2.0 * np.pi * body_dk)[:, None] * np.linalg.solve(matrix, wanted)[:, :, 0]
    capacitance = charges[:, : system.trace].sum(axis=1)
    adjoint = np.linalg.solve(matrix.transpose(0, 2, 1), wanted)[:, :, 0] * (0.5 / capacitance)[:, None]
    return Excited(medium, charges, adjoint, kept), capacitance


def _gradients(parts: Structure, plan: Plan, found: Gradient, charged: NumberArray) -> NumberArray:
    """The gradient with respect to _coordinates: (sections, coordinates); `charged`: what the Dk of the body has on
    the right-hand side."""
    of_media = media_gradient(parts, found.media, multiples=plan.multiples, wavenumbers=plan.wavenumbers)
    columns = [*found.ends.reshape(len(charged), -1).T, *found.levels.T, *found.left.T, *found.right.T,
               of_media.body_dk + charged, *of_media.below]
    if parts.above is not None:
        columns += [*of_media.above, of_media.body_thickness]
    return np.stack(columns, axis=1)
