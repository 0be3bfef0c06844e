"""Partial derivatives of the impedance with respect to every dimension and Dk, from one solution more.

With charges q from A q = b and C = w . q, the adjoint A' s = w gives dC = s . (db - dA q) for any change of A. The
entries of A depend on places of nodes, on levels and factors of images and on the smooth rest. Their derivatives are
summed once into gradients with respect to places, levels and factors (matrix-vector products with the derivative of
the logarithm); every dimension and Dk then takes its share by how it moves them, which is told by differences of the
nodes' places and of the kernel's factors alone. The result is the derivative of the discrete solution itself.
Adjoint sensitivities: standard; see for instance M. B. Giles, N. A. Pierce, "An introduction to the adjoint approach
to design", Flow, Turbulence and Combustion 65 (2000), pages 393-415.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any, TypeVar

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.sections.section import Mask, Ply, Section
from tolerance.solver.assembly import Medium
from tolerance.solver.edges import Edge, Places, edge_places
from tolerance.solver.gradient import Sensitivity, joined, sensitivities
from tolerance.solver.line import FREE_SPACE_IMPEDANCE, batches
from tolerance.solver.plan import Plan
from tolerance.solver.structure import Structure, media, shortest_remaining_way, structure, topology

#: Relative step by which places and factors are differenced: they are smooth and cheap, so central differences do.
STEP = 1e-4


@dataclass(frozen=True, slots=True)
class ModeDerivatives:
    """Impedance [ohm] of a mode and its derivatives, all (sections,), by name of what changes [ohm/m, or ohm].

    Names: foot_width, crest_width, thickness, gap, ground_gap, band_dk, foot_side.0.thickness, foot_side.0.dk, ...,
    crest_side.0.thickness, ..., mask.on_laminate, mask.over_copper, mask.dk. Each is with all others held.
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


def impedance_slopes(section: Section, plan: Plan, *, mode: int) -> Slopes:
    """Solve one mode (1 even or single, -1 odd) of all sections with the slopes of ln Z: what a fit with gradients
    calls. Twice the odd or half the even mode's impedance has the same slopes."""
    solved = solve_with_derivatives(section, plan, mode=mode)
    values = np.stack([value for _, value, _ in parameters(section)], axis=1)
    slopes = np.stack(list(solved.by.values()), axis=1) / solved.impedance[:, None]
    return Slopes(tuple(solved.by), solved.impedance, values, slopes)


def solve_with_derivatives(section: Section, plan: Plan, *, mode: int) -> ModeDerivatives:
    """Solve one mode (1 even or single, -1 odd) with all partial derivatives."""
    impedance = np.empty(section.count)
    by = {name: np.empty(section.count) for name, _, _ in parameters(section)}
    kinds = topology(section)
    for kind in np.unique(kinds):
        rows = np.flatnonzero(kinds == kind)
        impedance[rows], derivatives = _solve_alike(section.rows(rows), plan, mode)
        for name, values in derivatives.items():
            by[name][rows] = values
    return ModeDerivatives(impedance, by)


_Setter = Callable[[Section, FloatArray], Section]


def parameters(section: Section) -> list[tuple[str, FloatArray, _Setter]]:
    """Name, value and how to set it, of all that a section is made of."""
    found: list[tuple[str, FloatArray, _Setter]] = []

    def plain(name: str) -> _Setter:
        return lambda one, value: _with(one, name, value)

    def of_ply(side: str, number: int, name: str) -> _Setter:
        def put(one: Section, value: FloatArray) -> Section:
            plies: list[Ply] = list(getattr(one, side))
            plies[number] = _with(plies[number], name, value)
            return _with(one, side, tuple(plies))
        return put

    def of_mask(name: str) -> _Setter:
        def put(one: Section, value: FloatArray) -> Section:
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


Part = TypeVar("Part", Section, Ply, Mask)


def _with(part: Part, name: str, value: object) -> Part:
    changes: dict[str, Any] = {name: value}
    return replace(part, **changes)


@dataclass(frozen=True, slots=True)
class _State:
    """Where the nodes of sections are, and their media: what a parameter can move."""

    parts: Structure
    places: tuple[Places, ...]
    media: tuple[Medium, Medium]  # filled, air

    @staticmethod
    def of(section: Section, plan: Plan, *, distance: FloatArray | None, media_of: _State | None = None) -> _State:
        """The state of `section`; `media_of`: a state whose media are the same."""
        parts = structure(section)
        places = tuple(edge_places(edge, unknowns=count[0], fine=count[1])
                       for edge, count in ((edge, plan.count(edge)) for edge in parts.edges))
        same = media_of.media if media_of is not None else media(
            parts, multiples=plan.multiples, wavenumbers=plan.wavenumbers, distance=distance)
        return _State(parts, places, same)


def _solve_alike(section: Section, plan: Plan, mode: int) -> tuple[FloatArray, dict[str, FloatArray]]:
    """Sections of one topology."""
    parts = structure(section)
    distance = None if parts.above is None else shortest_remaining_way(parts)
    base = _State.of(section, plan, distance=distance)
    pieces = [sensitivities(section.rows(rows), plan, mode) for rows in batches(section, plan)]
    filled, air = (joined([piece[number] for piece in pieces]) for number in (0, 1))
    halves = 2.0 if section.gap is None else 1.0
    capacitances = halves * filled.charge, halves * air.charge
    impedance = FREE_SPACE_IMPEDANCE / np.sqrt(capacitances[0] * capacitances[1])
    derivatives = {}
    for name, value, put in parameters(section):
        step = STEP * value
        same = base if not _moves_media(name, base.parts) else None
        up, down = (_State.of(put(section, value + way * step), plan, distance=distance, media_of=same)
                    for way in (1.0, -1.0))
        change = sum(
            halves * _change(base, up, down, number, known) / (2.0 * step * capacitance)
            for number, (known, capacitance) in enumerate(zip((filled, air), capacitances, strict=True)))
        derivatives[name] = -0.5 * impedance * np.asarray(change)
    return impedance, derivatives


def _moves_media(name: str, parts: Structure) -> bool:
    """Whether a dimension or Dk changes factors and shifts of images, not only places."""
    return name.startswith(("foot_side", "crest_side")) or name in ("mask.dk", "band_dk") or (
        parts.above is not None and name in ("thickness", "mask.on_laminate"))


def _change(base: _State, up: _State, down: _State, number: int, known: Sensitivity) -> FloatArray:
    """Difference of the charge between the states `up` and `down`, to first order; number 0: filled, 1: air."""
    count = known.charges.shape[0]
    total = np.zeros(count)
    start = fine_start = 0
    for place, (edge, a, b) in enumerate(zip(base.parts.edges, up.places, down.places, strict=True)):
        if number and not edge.conducts:
            break
        part = slice(start, start + a.across.shape[1])
        fine = slice(fine_start, fine_start + a.fine_across.shape[1])
        start, fine_start = part.stop, fine.stop
        for gradient, one, other in (
                (known.across[:, part], a.across, b.across), (known.height[:, part], a.height, b.height),
                (known.fine_across[:, fine], a.fine_across, b.fine_across),
                (known.fine_height[:, fine], a.fine_height, b.fine_height)):
            total += (gradient * (one - other)).sum(axis=1)
        total += known.lengths[:, place] * np.log(a.length / b.length)
        if not edge.conducts:
            edges = (edge, up.parts.edges[place], down.parts.edges[place])
            total += _interface_change(
                edges, (base.places[place], a, b), known.charges[:, part], known.adjoint[:, part])
    for image, (a_image, b_image) in enumerate(zip(up.parts.images, down.parts.images, strict=True)):
        if a_image.level is not None and b_image.level is not None:
            total += known.levels[:, image] * (a_image.level - b_image.level)
    total += _medium_change(up.media[number], down.media[number], base.media[number], known)
    if number:
        return -total
    trace = sum(a.across.shape[1] for edge, a in zip(base.parts.edges, base.places, strict=True)
                if edge.conducts and edge.role != "ground")
    bodies = up.parts.body_dk - down.parts.body_dk
    return np.asarray(-2.0 * np.pi * bodies * known.adjoint[:, :trace].sum(axis=1) - total)


def _medium_change(up: Medium, down: Medium, base: Medium, known: Sensitivity) -> FloatArray:
    total = np.zeros(known.charge.shape)
    if up is down:
        return total
    for image, (a, b) in enumerate(zip(up.factors, down.factors, strict=True)):
        total += known.near[:, image] * (a - b)
    if up.far is not None and down.far is not None:
        total += (known.far * (up.far.factors - down.far.factors)).sum(axis=1)
        total += (known.shifts * (up.far.shifts - down.far.shifts)).sum(axis=1)
    if up.rest is not None and down.rest is not None and base.rest is not None:
        taken, sent = known.taken, known.sent
        forms = ((up.rest.lower - down.rest.lower) * taken[:, 0] * sent[:, 0]
                 + (up.rest.upper - down.rest.upper) * taken[:, 1] * sent[:, 1]
                 + (up.rest.cross - down.rest.cross) * (taken[:, 0] * sent[:, 1] + taken[:, 1] * sent[:, 0])
                 + (up.rest.level - down.rest.level) * taken[:, 2] * sent[:, 2])
        total -= 2.0 * forms.sum(axis=1)
        total += known.thickness * (up.rest.body_thickness - down.rest.body_thickness)
        total += known.logarithm * (up.rest.compensation - down.rest.compensation)
    return total


def _interface_change(
    edges: tuple[Edge, Edge, Edge], places: tuple[Places, Places, Places], charges: FloatArray, adjoint: FloatArray,
) -> FloatArray:
    """What the factors of the interface conditions add: rows (l - r) / (2 pi) M + (l + r) / (2 jacobian)."""
    (left, right), (left_up, right_up), (left_down, right_down) = (_dks(edge) for edge in edges)
    here, up, down = (place.jacobian for place in places)
    field = -(0.5 * (left + right))[:, None] / here * charges / ((left - right) / (2.0 * np.pi))[:, None]
    steps = (left_up - right_up - left_down + right_down) / (2.0 * np.pi)
    diagonal = 0.5 * ((left_up + right_up)[:, None] / up - (left_down + right_down)[:, None] / down)
    return np.asarray((adjoint * (steps[:, None] * field + diagonal * charges)).sum(axis=1))


def _dks(edge: Edge) -> tuple[FloatArray, FloatArray]:
    assert edge.left_dk is not None
    assert edge.right_dk is not None
    return edge.left_dk, edge.right_dk
