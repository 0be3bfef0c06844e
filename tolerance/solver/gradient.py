"""The gradient behind partial derivatives: how the charge of a solution answers to places, levels and factors.

With charges q from A q = b and the adjoint A' s = w, every change of A costs s . (dA q). What A is made of depends on
the places of nodes, on levels and factors of images, and on the smooth rest; here the share of each is summed up.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.sections.section import Section
from tolerance.solver.assembly import Medium, NearImage, System, far_places, full_matrix, near_system
from tolerance.solver.edges import Nodes
from tolerance.solver.kernels import FarImages, SpectralRest
from tolerance.solver.plan import Plan
from tolerance.solver.structure import media, structure


@dataclass(frozen=True, slots=True)
class Sensitivity:
    """One medium: charge, charges, adjoint, and the gradient of s . M q; sections along the first axis.

    across, height, fine_across, fine_height : with respect to the places.  levels : of the near images.
    lengths : of the logarithm of each edge's length.  near, far : s . P q of each image, the derivative of its factor.
    shifts : of the far images.  taken, sent : adjoint and charges seen by the waves of the rest, (sections, 3, k).
    thickness : of the body's thickness in the rest.  logarithm : s . (compensating logarithm) q.
    """

    charge: FloatArray
    charges: FloatArray
    adjoint: FloatArray
    across: FloatArray
    height: FloatArray
    fine_across: FloatArray
    fine_height: FloatArray
    levels: FloatArray
    lengths: FloatArray
    near: FloatArray
    far: FloatArray
    shifts: FloatArray
    taken: FloatArray
    sent: FloatArray
    thickness: FloatArray
    logarithm: FloatArray


def joined(pieces: list[Sensitivity]) -> Sensitivity:
    """The batches of one run together."""
    return Sensitivity(*(np.concatenate([getattr(piece, part.name) for piece in pieces])
                          for part in fields(Sensitivity)))


@dataclass(slots=True)
class _Sums:
    """What is summed up for one medium of a batch while its images are gone through."""

    charges: FloatArray
    weighted: FloatArray  # the adjoint, rows of dielectric weighted as their M is in the conditions
    across: FloatArray
    height: FloatArray
    fine_across: FloatArray
    fine_height: FloatArray
    levels: FloatArray
    lengths: FloatArray
    shifts: FloatArray


def sensitivities(section: Section, plan: Plan, mode: int) -> tuple[Sensitivity, Sensitivity]:
    """Both media of a batch."""
    parts = structure(section)
    system = near_system(parts.edges, parts.images, counts=[plan.count(edge) for edge in parts.edges])
    both = media(parts, multiples=plan.multiples, wavenumbers=plan.wavenumbers)
    dks = (parts.body_dk, np.ones(section.count))
    found, sums = [], []
    for medium, dk, air in zip(both, dks, (False, True), strict=True):
        kept: list[FloatArray] = []
        matrix = full_matrix(system, medium, sign=mode, air=air, kept=kept)
        charges, adjoint = _charges_and_adjoint(matrix, system.trace, dk)
        found.append((charges, adjoint, kept))
        sums.append(_empty_sums(system, medium, charges, _weighted(system, adjoint, air=air)))
    for number, image in enumerate(parts.images):
        _add_near(sums, [medium.factors[number] for medium in both], system, image, number, mode)
    return (_finished(system, both[0], sums[0], *found[0], mode), _finished(system, both[1], sums[1], *found[1], mode))


def _charges_and_adjoint(matrix: FloatArray, trace: int, body_dk: FloatArray) -> tuple[FloatArray, FloatArray]:
    wanted = np.zeros((*matrix.shape[:2], 1))
    wanted[:, :trace, 0] = (-2.0 * np.pi * body_dk)[:, None]
    ones = np.zeros_like(wanted)
    ones[:, :trace] = 1.0
    charges, adjoint = np.linalg.solve(matrix, wanted), np.linalg.solve(matrix.transpose(0, 2, 1), ones)
    return np.asarray(charges[:, :, 0], dtype=np.float64), np.asarray(adjoint[:, :, 0], dtype=np.float64)


def _weighted(system: System, adjoint: FloatArray, *, air: bool) -> FloatArray:
    result = adjoint.copy()
    for nodes, part in ([] if air else _parts(system)):
        edge = nodes.edge
        if edge.left_dk is not None and edge.right_dk is not None:
            result[:, part] *= ((edge.left_dk - edge.right_dk) / (2.0 * np.pi))[:, None]
    return result


def _parts(system: System) -> list[tuple[Nodes, slice]]:
    """Each edge's nodes with their place among the unknowns."""
    ends = np.cumsum([0] + [nodes.across.shape[1] for nodes in system.nodes])
    return [(nodes, slice(start, stop)) for nodes, start, stop in zip(system.nodes, ends[:-1], ends[1:], strict=True)]


def _empty_sums(system: System, medium: Medium, charges: FloatArray, weighted: FloatArray) -> _Sums:
    count, size = charges.shape
    fine = sum(nodes.fine_across.shape[1] for nodes, part in _parts(system) if part.start < size)
    far = 0 if medium.far is None else medium.far.shifts.shape[1]
    widths = (size, size, fine, fine, len(medium.factors), len(system.nodes), far)
    return _Sums(charges, weighted, *(np.zeros((count, width)) for width in widths))


def _slopes(run: FloatArray, rise: FloatArray, normals: Sequence[FloatArray], copper: int) -> tuple[
        FloatArray, FloatArray]:
    """Derivatives of the kernel (ln r on copper, its normal derivative on dielectric) along run and rise."""
    inverse = run * run
    inverse += rise * rise
    np.reciprocal(inverse, out=inverse)
    along, up = run * inverse, rise * inverse
    if copper < run.shape[1]:
        rows = slice(copper, None)
        a, u, i = along[:, rows], up[:, rows], inverse[:, rows]
        x, y = normals[0][:, rows, None], normals[1][:, rows, None]
        both = 2.0 * a * u
        along[:, rows], up[:, rows] = x * (i - 2.0 * a * a) - y * both, y * (i - 2.0 * u * u) - x * both
    return along, up


def _add_near(
    sums: list[_Sums], factors: list[FloatArray], system: System, image: NearImage, number: int, mode: int,
) -> None:
    wanted = [(one, factor) for one, factor in zip(sums, factors, strict=True) if np.any(factor)]
    if not wanted:
        return
    size = max(one.charges.shape[1] for one, _ in wanted)
    across, height = system.across[:, :size], system.height[:, :size]
    normals = [values[:, :size] for values in system.normals]
    fine_start = 0
    for place, (source, part) in enumerate(_parts(system)):
        fine = slice(fine_start, fine_start + source.fine_across.shape[1])
        fine_start = fine.stop
        if part.start >= size:
            break
        level_height = source.fine_height if image.level is None else 2.0 * image.level[:, None] - source.fine_height
        itself = image.level is None or source.edge.name in image.touching
        for side in (1.0, -1.0):
            along, up = _slopes(across[:, :, None] - side * source.fine_across[:, None, :],
                                height[:, :, None] - level_height[:, None, :], normals, system.copper)
            alone = itself and (side > 0 or source.edge.folded)
            if alone:
                along[:, part] = up[:, part] = 0.0
            for one, factor in wanted:
                if part.start >= one.charges.shape[1]:
                    continue
                way = (factor if side > 0 else mode * factor)[:, None]
                if alone and source.edge.conducts:
                    one.lengths[:, place] += way[:, 0] * one.weighted[:, part].sum(1) * one.charges[:, part].sum(1)
                _add_near_source(one, way, along, up, part, fine, source, side, image, number)


def _add_near_source(
    one: _Sums, way: FloatArray, along: FloatArray, up: FloatArray, part: slice, fine: slice, source: Nodes,
    side: float, image: NearImage, number: int,
) -> None:
    """Share of one edge's charge, directly or mirrored, in the gradient."""
    rows = slice(0, one.charges.shape[1])
    charges = one.charges[:, part] @ source.refine.T
    carried = way * one.weighted
    one.across += carried * (along[:, rows] @ charges[:, :, None])[:, :, 0]
    one.height += carried * (up[:, rows] @ charges[:, :, None])[:, :, 0]
    one.fine_across[:, fine] -= side * (carried[:, None, :] @ along[:, rows])[:, 0] * charges
    back = (carried[:, None, :] @ up[:, rows])[:, 0] * charges
    if image.level is None:
        one.fine_height[:, fine] -= back
    else:
        one.fine_height[:, fine] += back
        one.levels[:, number] -= 2.0 * back.sum(axis=1)


def _add_far(one: _Sums, system: System, far: FarImages, mode: int) -> None:
    size = one.charges.shape[1]
    across, height = system.across[:, :size], system.height[:, :size]
    normals = [values[:, :size] for values in system.normals]
    fine_start = 0
    for source, part in _parts(system):
        fine = slice(fine_start, fine_start + source.fine_across.shape[1])
        fine_start = fine.stop
        if part.start >= size:
            break
        tail = source.edge.tail
        places, heights = far_places(source)
        charges = one.charges[:, part] @ source.refine.T if tail else one.charges[:, part]
        to_across, to_height, here = ((one.fine_across, one.fine_height, fine) if tail
                                      else (one.across, one.height, part))
        total = height[:, :, None] + heights[:, None, :]
        for image in range(far.shifts.shape[1]):
            rise = total + far.shifts[:, image, None, None]
            for side, sign in ((1.0, 1.0), (-1.0, float(mode))):
                along, up = _slopes(across[:, :, None] - side * places[:, None, :], rise, normals, system.copper)
                carried = (sign * far.factors[:, image])[:, None] * one.weighted
                one.across += carried * (along @ charges[:, :, None])[:, :, 0]
                upward = carried * (up @ charges[:, :, None])[:, :, 0]
                one.height += upward
                one.shifts[:, image] += upward.sum(axis=1)
                to_across[:, here] -= side * (carried[:, None, :] @ along)[:, 0] * charges
                to_height[:, here] += (carried[:, None, :] @ up)[:, 0] * charges


def _finished(
    system: System, medium: Medium, sums: _Sums, charges: FloatArray, adjoint: FloatArray, kept: list[FloatArray],
    mode: int,
) -> Sensitivity:
    count, size = charges.shape
    near = [_form(sums.weighted, own[:, :size, :size] + mode * mirrored[:, :size, :size], charges)
            for own, mirrored in zip(system.own, system.mirrored, strict=True)]
    far = np.zeros((count, 0))
    if medium.far is not None:
        far = np.stack([_form(sums.weighted, kernel, charges) for kernel in kept], axis=1)
        _add_far(sums, system, medium.far, mode)
    waves = np.zeros((count, 3, 0)), np.zeros((count, 3, 0)), np.zeros(count), np.zeros(count)
    if medium.rest is not None:
        waves = _add_rest(sums, system, medium.rest, mode)
    return Sensitivity(
        charges[:, : system.trace].sum(axis=1), charges, adjoint, sums.across, sums.height, sums.fine_across,
        sums.fine_height, sums.levels, sums.lengths, np.stack(near, axis=1), far, sums.shifts, *waves)


def _form(left: FloatArray, matrix: FloatArray, right: FloatArray) -> FloatArray:
    return np.asarray((left * (matrix @ right[:, :, None])[:, :, 0]).sum(axis=1))


def _add_rest(sums: _Sums, system: System, rest: SpectralRest, mode: int) -> tuple[
        FloatArray, FloatArray, FloatArray, FloatArray]:
    """Adds the gradient with respect to places; what adjoint and charges send, and the body's thickness."""
    size = sums.charges.shape[1]
    across, height = system.across[:, :size], system.height[:, :size]
    k = rest.wavenumber[:, None, :]
    phase = k * across[:, :, None]
    wave, slope = (np.cos(phase), -k * np.sin(phase)) if mode > 0 else (np.sin(phase), k * np.cos(phase))
    down = np.exp(-k * height[:, :, None])
    up = np.exp(-k * (rest.body_thickness[:, None] - height)[:, :, None])
    carriers = (wave * down, wave * up, wave)
    taken, sent = (np.stack([(weights[:, None, :] @ carrier)[:, 0] for carrier in carriers], axis=1)
                   for weights in (sums.weighted, sums.charges))
    for weights, other in ((sums.weighted, sent), (sums.charges, taken)):
        of_down = (rest.lower * other[:, 0] + rest.cross * other[:, 1])[:, None, :]
        of_up = (rest.upper * other[:, 1] + rest.cross * other[:, 0])[:, None, :]
        of_level = (rest.level * other[:, 2])[:, None, :]
        sums.across -= 2.0 * weights * (slope * (down * of_down + up * of_up + of_level)).sum(axis=2)
        sums.height -= 2.0 * weights * (wave * k * (up * of_up - down * of_down)).sum(axis=2)
    thickness = 2.0 * (rest.wavenumber * (2.0 * rest.upper * taken[:, 1] * sent[:, 1] + rest.cross * (
        taken[:, 0] * sent[:, 1] + taken[:, 1] * sent[:, 0]))).sum(axis=1)
    logarithm = np.zeros(len(across))
    for side, sign in ((1.0, 1.0), (-1.0, float(mode))) if np.any(rest.compensation) else ():
        run = across[:, :, None] - side * across[:, None, :]
        square = run * run + (rest.distance**2)[:, None, None]
        logarithm -= 0.5 * sign * _form(sums.weighted, np.log(square), sums.charges)
        along = run / square
        carried = -(sign * rest.compensation)[:, None] * sums.weighted
        sums.across += carried * (along @ sums.charges[:, :, None])[:, :, 0]
        sums.across -= side * (carried[:, None, :] @ along)[:, 0] * sums.charges
    return taken, sent, thickness, logarithm
