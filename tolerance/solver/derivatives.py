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

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.sections.section import Ply, Section
from tolerance.solver.assembly import Medium, NearImage, System, full_matrix, near_system
from tolerance.solver.edges import Nodes, place_nodes
from tolerance.solver.kernels import SpectralRest
from tolerance.solver.line import FREE_SPACE_IMPEDANCE, batches
from tolerance.solver.plan import Plan
from tolerance.solver.structure import Structure, media, shortest_remaining_way, structure

#: Relative step by which places and factors are differenced: they are smooth and cheap, so central differences do.
STEP = 1e-4


@dataclass(frozen=True, slots=True)
class ModeDerivatives:
    """Impedance [ohm] of a mode and its derivatives, all (sections,), by name of what changes [ohm/m, or ohm].

    Names: foot_width, crest_width, thickness, gap, ground_gap, foot_side.0.thickness, foot_side.0.dk, ...,
    crest_side.0.thickness, ..., mask.on_laminate, mask.over_copper, mask.dk. Each is with all others held.
    """

    impedance: FloatArray
    by: Mapping[str, FloatArray]


def solve_with_derivatives(section: Section, plan: Plan, *, mode: int) -> ModeDerivatives:
    """Solve one mode (1 even or single, -1 odd) with all partial derivatives."""
    impedance = np.empty(section.count)
    by = {name: np.empty(section.count) for name, _, _ in _parameters(section)}
    for rows in batches(section, plan):
        part = section.rows(rows)
        impedance[rows], derivatives = _solve_batch(part, plan, mode)
        for name, values in derivatives.items():
            by[name][rows] = values
    return ModeDerivatives(impedance, by)


_Setter = Callable[[Section, FloatArray], Section]


def _parameters(section: Section) -> list[tuple[str, FloatArray, _Setter]]:
    """Name, value and how to set it, of all that a section is made of."""
    found: list[tuple[str, FloatArray, _Setter]] = []

    def plain(name: str) -> _Setter:
        return lambda one, value: replace(one, **{name: value})

    def of_ply(side: str, number: int, name: str) -> _Setter:
        def put(one: Section, value: FloatArray) -> Section:
            plies: list[Ply] = list(getattr(one, side))
            plies[number] = replace(plies[number], **{name: value})
            return replace(one, **{side: tuple(plies)})
        return put

    def of_mask(name: str) -> _Setter:
        def put(one: Section, value: FloatArray) -> Section:
            assert one.mask is not None
            return replace(one, mask=replace(one.mask, **{name: value}))
        return put

    for name in ("foot_width", "crest_width", "thickness", "gap", "ground_gap"):
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


@dataclass(frozen=True, slots=True)
class _State:
    """Where the nodes of a section are, and its media: what a parameter can move."""

    parts: Structure
    nodes: tuple[Nodes, ...]
    medium: tuple[Medium, Medium]  # filled, air

    @staticmethod
    def of(section: Section, plan: Plan, *, distance: FloatArray | None = None) -> _State:
        parts = structure(section)
        nodes = tuple(place_nodes(edge, unknowns=count[0], fine=count[1])
                      for edge, count in ((edge, plan.count(edge)) for edge in parts.edges))
        medium = media(parts, multiples=plan.multiples, wavenumbers=plan.wavenumbers, distance=distance)
        return _State(parts, nodes, medium)


@dataclass(slots=True)
class _Gradient:
    """Sum of s . dM q over one medium: derivatives with respect to places, levels, shifts and lengths."""

    across: FloatArray
    height: FloatArray
    fine_across: FloatArray
    fine_height: FloatArray
    levels: list[FloatArray]
    shifts: FloatArray
    lengths: FloatArray  # (sections, edges): of the logarithm of an edge's length
    near: list[FloatArray]  # s . P q of each near image
    far: FloatArray  # s . K q of each far image


def _solve_batch(section: Section, plan: Plan, mode: int) -> tuple[FloatArray, dict[str, FloatArray]]:
    distance = None
    base_parts = structure(section)
    if base_parts.above is not None:
        distance = shortest_remaining_way(base_parts)
    base = _State.of(section, plan, distance=distance)
    system = near_system(base.parts.edges, base.parts.images, counts=[plan.count(edge) for edge in base.parts.edges])
    pairs = [_Solved.of(system, medium, body_dk, mode, air=air) for medium, body_dk, air in (
        (base.medium[0], base.parts.body_dk, False), (base.medium[1], np.ones(section.count), True))]
    halves = 2.0 if section.gap is None else 1.0
    capacitance = [halves * pair.charge for pair in pairs]
    impedance = FREE_SPACE_IMPEDANCE / np.sqrt(capacitance[0] * capacitance[1])
    gradients = [_gradient(system, base.parts.images, medium, pair, mode)
                 for medium, pair in zip(base.medium, pairs, strict=True)]
    derivatives = {}
    for name, value, put in _parameters(section):
        step = STEP * value
        up, down = (_State.of(put(section, value + way * step), plan, distance=distance) for way in (1.0, -1.0))
        total = np.zeros(section.count)
        for number, (pair, gradient) in enumerate(zip(pairs, gradients, strict=True)):
            change = _change(base, up, down, number, pair, gradient, mode) / (2.0 * step)
            total += halves * change / capacitance[number]
        derivatives[name] = -0.5 * impedance * total
    return impedance, derivatives


@dataclass(frozen=True, slots=True)
class _Solved:
    """Charges, adjoint (rows of dielectric weighted as in M), and the plain adjoint of one medium."""

    charges: FloatArray
    adjoint: FloatArray
    weighted: FloatArray
    charge: FloatArray
    trace: int
    air: bool

    @staticmethod
    def of(system: System, medium: Medium, body_dk: FloatArray, mode: int, *, air: bool) -> _Solved:
        matrix = full_matrix(system, medium, sign=mode, air=air)
        size = matrix.shape[1]
        wanted = np.zeros((matrix.shape[0], size, 1))
        wanted[:, : system.trace, 0] = (-2.0 * np.pi * body_dk)[:, None]
        ones = np.zeros_like(wanted)
        ones[:, : system.trace] = 1.0
        charges = np.linalg.solve(matrix, wanted)[:, :, 0]
        adjoint = np.linalg.solve(matrix.transpose(0, 2, 1), ones)[:, :, 0]
        weighted = adjoint.copy()
        start = 0
        for nodes in system.nodes:
            stop = start + nodes.across.shape[1]
            edge = nodes.edge
            if stop <= size and edge.left_dk is not None and edge.right_dk is not None:
                weighted[:, start:stop] *= ((edge.left_dk - edge.right_dk) / (2.0 * np.pi))[:, None]
            start = stop
        return _Solved(charges, adjoint, weighted, charges[:, : system.trace].sum(axis=1), system.trace, air)


def _gradient(system: System, images: tuple[NearImage, ...], medium: Medium, pair: _Solved, mode: int) -> _Gradient:
    size = pair.charges.shape[1]
    nodes = [n for n in system.nodes if n.edge.conducts] if pair.air else list(system.nodes)
    count = system.across.shape[0]
    fine = sum(n.fine_across.shape[1] for n in nodes)
    result = _Gradient(
        across=np.zeros((count, size)), height=np.zeros((count, size)), fine_across=np.zeros((count, fine)),
        fine_height=np.zeros((count, fine)), levels=[np.zeros(count) for _ in images],
        shifts=np.zeros((count, 0)), lengths=np.zeros((count, len(nodes))), near=[], far=np.zeros((count, 0)))
    for number, (image, factor) in enumerate(zip(images, medium.factors, strict=True)):
        own, mirrored = (matrix[:, :size, :size] for matrix in (system.own[number], system.mirrored[number]))
        result.near.append(_form(pair.weighted, own + mode * mirrored, pair.charges))
        if np.any(factor):
            _add_near(result, system, nodes, image, number, factor, pair, mode)
    if medium.far is not None:
        _add_far(result, system, nodes, medium, pair, mode)
    if medium.rest is not None:
        _add_rest(result, system, medium.rest, pair, mode)
    return result


def _form(left: FloatArray, matrix: FloatArray, right: FloatArray) -> FloatArray:
    return np.asarray(np.einsum("si,si->s", left, (matrix @ right[:, :, None])[:, :, 0]))


def _slopes(run: FloatArray, rise: FloatArray, normals: tuple[FloatArray, FloatArray], copper: int) -> tuple[
        FloatArray, FloatArray]:
    """Derivatives of the kernel (ln r on copper, its normal derivative on dielectric) along run and rise."""
    inverse = 1.0 / (run * run + rise * rise)
    along, up = run * inverse, rise * inverse
    if copper < run.shape[1]:
        rows = slice(copper, None)
        a, u, i = along[:, rows], up[:, rows], inverse[:, rows]
        x, y = normals[0][:, rows, None], normals[1][:, rows, None]
        along[:, rows], up[:, rows] = (x * (i - 2.0 * a * a) - 2.0 * y * a * u, y * (i - 2.0 * u * u) - 2.0 * x * a * u)
    return along, up


def _add_near(
    result: _Gradient, system: System, nodes: list[Nodes], image: NearImage, number: int, factor: FloatArray,
    pair: _Solved, mode: int,
) -> None:
    size = pair.charges.shape[1]
    across, height = system.across[:, :size], system.height[:, :size]
    normals = (system.normals[0][:, :size], system.normals[1][:, :size])
    start = fine_start = 0
    for place, source in enumerate(nodes):
        stop, fine_stop = start + source.across.shape[1], fine_start + source.fine_across.shape[1]
        charges = pair.charges[:, start:stop] @ source.refine.T
        rise_source = source.fine_height if image.level is None else 2.0 * image.level[:, None] - source.fine_height
        itself = image.level is None or source.edge.name in image.touching
        for side, way in ((1.0, factor), (-1.0, mode * factor)):
            along, up = _slopes(across[:, :, None] - side * source.fine_across[:, None, :],
                                height[:, :, None] - rise_source[:, None, :], normals, system.copper)
            if itself and (side > 0 or source.edge.folded):
                along[:, start:stop] = up[:, start:stop] = 0.0
                if source.edge.conducts:
                    result.lengths[:, place] += way * pair.weighted[:, start:stop].sum(axis=1) * pair.charges[
                        :, start:stop].sum(axis=1)
            for slope, coarse, fine_part, turn in (
                    (along, result.across, result.fine_across, side), (up, result.height, result.fine_height, 1.0)):
                coarse += way[:, None] * pair.weighted * (slope @ charges[:, :, None])[:, :, 0]
                back = way[:, None] * (pair.weighted[:, None, :] @ slope)[:, 0] * charges
                if slope is up and image.level is not None:
                    fine_part[:, fine_start:fine_stop] += back
                    result.levels[number] -= 2.0 * back.sum(axis=1)
                else:
                    fine_part[:, fine_start:fine_stop] -= turn * back
        start, fine_start = stop, fine_stop


def _add_far(
    result: _Gradient, system: System, nodes: list[Nodes], medium: Medium, pair: _Solved, mode: int,
) -> None:
    far = medium.far
    assert far is not None
    size = pair.charges.shape[1]
    across, height = system.across[:, :size], system.height[:, :size]
    normals = (system.normals[0][:, :size], system.normals[1][:, :size])
    result.shifts, result.far = np.zeros_like(far.shifts), np.zeros_like(far.shifts)
    start = fine_start = 0
    for source in nodes:
        stop, fine_stop = start + source.across.shape[1], fine_start + source.fine_across.shape[1]
        tail = source.edge.tail
        places, heights = ((source.fine_across, source.fine_height) if tail else (source.across, source.height))
        charges = pair.charges[:, start:stop] @ source.refine.T if tail else pair.charges[:, start:stop]
        target_x, target_y, part = ((result.fine_across, result.fine_height, slice(fine_start, fine_stop)) if tail
                                    else (result.across, result.height, slice(start, stop)))
        total = height[:, :, None] + heights[:, None, :]
        for image in range(far.shifts.shape[1]):
            rise = total + far.shifts[:, image, None, None]
            for side, sign in ((1.0, 1.0), (-1.0, float(mode))):
                run = across[:, :, None] - side * places[:, None, :]
                along, up = _slopes(run, rise, normals, system.copper)
                kernel = 0.5 * np.log(run * run + rise * rise)
                if system.copper < size:
                    rows = slice(system.copper, None)
                    kernel[:, rows] = ((normals[0][:, rows, None] * run[:, rows] + normals[1][:, rows, None]
                                        * rise[:, rows]) / (run[:, rows] ** 2 + rise[:, rows] ** 2))
                result.far[:, image] += sign * _form(pair.weighted, kernel, charges)
                way = (sign * far.factors[:, image])[:, None]
                result.across += way * pair.weighted * (along @ charges[:, :, None])[:, :, 0]
                upward = way * pair.weighted * (up @ charges[:, :, None])[:, :, 0]
                result.height += upward
                result.shifts[:, image] += upward.sum(axis=1)
                target_x[:, part] -= side * way * (pair.weighted[:, None, :] @ along)[:, 0] * charges
                target_y[:, part] += way * (pair.weighted[:, None, :] @ up)[:, 0] * charges
        start, fine_start = stop, fine_stop


def _waves(rest: SpectralRest, across: FloatArray, height: FloatArray, mode: int) -> tuple[FloatArray, ...]:
    """Wave along x and its derivative, decay from the lower and from the upper face: (sections, nodes, k)."""
    k = rest.wavenumber[:, None, :]
    phase = k * across[:, :, None]
    wave, slope = (np.cos(phase), -k * np.sin(phase)) if mode > 0 else (np.sin(phase), k * np.cos(phase))
    return (wave, slope, np.exp(-k * height[:, :, None]),
            np.exp(-k * (rest.body_thickness[:, None] - height)[:, :, None]))


def _add_rest(result: _Gradient, system: System, rest: SpectralRest, pair: _Solved, mode: int) -> None:
    size = pair.charges.shape[1]
    across, height = system.across[:, :size], system.height[:, :size]
    wave, slope, down, up = _waves(rest, across, height, mode)
    k = rest.wavenumber[:, None, :]

    def projected(weights: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        carried = weights[:, :, None] * wave
        return (carried * down).sum(axis=1), (carried * up).sum(axis=1), carried.sum(axis=1)

    taken, sent = projected(pair.weighted), projected(pair.charges)
    for weights, other in ((pair.weighted, sent), (pair.charges, taken)):
        of_down = rest.lower * other[0] + rest.cross * other[1]
        of_up = rest.upper * other[1] + rest.cross * other[0]
        of_level = rest.level * other[2]
        field = down * of_down[:, None, :] + up * of_up[:, None, :] + of_level[:, None, :]
        result.across -= 2.0 * weights * (slope * field).sum(axis=2)
        result.height -= 2.0 * weights * (
            wave * k * (up * of_up[:, None, :] - down * of_down[:, None, :])).sum(axis=2)
    if np.any(rest.compensation):
        for side, sign in ((1.0, 1.0), (-1.0, float(mode))):
            run = across[:, :, None] - side * across[:, None, :]
            along = run / (run * run + (rest.distance**2)[:, None, None])
            way = -(sign * rest.compensation)[:, None]
            result.across += way * pair.weighted * (along @ pair.charges[:, :, None])[:, :, 0]
            result.across -= side * way * (pair.weighted[:, None, :] @ along)[:, 0] * pair.charges


def _rest_form(rest: SpectralRest, base: SpectralRest, across: FloatArray, height: FloatArray, pair: _Solved,
               mode: int) -> FloatArray:
    """s . R q with the factors of `rest` and the places of the base section."""
    moved = replace(rest, wavenumber=base.wavenumber, distance=base.distance)
    return _form(pair.weighted, moved.matrix(across, height, mode), pair.charges)


def _change(
    base: _State, up: _State, down: _State, number: int, pair: _Solved, gradient: _Gradient, mode: int,
) -> FloatArray:
    """Difference of the charge between the states `up` and `down`, to first order."""
    nodes = [n for n in base.nodes if n.edge.conducts or not pair.air]
    ups, downs = ([n for n in state.nodes if n.edge.conducts or not pair.air] for state in (up, down))

    def moved(name: str) -> FloatArray:
        return np.concatenate([getattr(a, name) - getattr(b, name) for a, b in zip(ups, downs, strict=True)], axis=1)

    total = np.einsum("si,si->s", gradient.across, moved("across"))
    total += np.einsum("si,si->s", gradient.height, moved("height"))
    total += np.einsum("si,si->s", gradient.fine_across, moved("fine_across"))
    total += np.einsum("si,si->s", gradient.fine_height, moved("fine_height"))
    for place, (a, b) in enumerate(zip(ups, downs, strict=True)):
        total += gradient.lengths[:, place] * np.log(a.edge.length / b.edge.length)
    for image, (a, b) in enumerate(zip(up.parts.images, down.parts.images, strict=True)):
        if a.level is not None and b.level is not None:
            total += gradient.levels[image] * (a.level - b.level)
    media_up, media_down, medium = up.medium[number], down.medium[number], base.medium[number]
    for form, a, b in zip(gradient.near, media_up.factors, media_down.factors, strict=True):
        total += form * (a - b)
    if media_up.far is not None and media_down.far is not None:
        total += np.einsum("si,si->s", gradient.far, media_up.far.factors - media_down.far.factors)
        total += np.einsum("si,si->s", gradient.shifts, media_up.far.shifts - media_down.far.shifts)
    if medium.rest is not None and media_up.rest is not None and media_down.rest is not None:
        across = np.concatenate([n.across for n in nodes], axis=1)
        height = np.concatenate([n.height for n in nodes], axis=1)
        total += _rest_form(media_up.rest, medium.rest, across, height, pair, mode)
        total -= _rest_form(media_down.rest, medium.rest, across, height, pair, mode)
    if pair.air:
        return -total
    total += _interface_change(nodes, ups, downs, pair)
    bodies = up.parts.body_dk - down.parts.body_dk
    return np.asarray(-2.0 * np.pi * bodies * pair.adjoint[:, : pair.trace].sum(axis=1) - total)


def _interface_change(nodes: list[Nodes], ups: list[Nodes], downs: list[Nodes], pair: _Solved) -> FloatArray:
    """What the factors of the interface conditions add: rows (l - r) / (2 pi) M + (l + r) / (2 jacobian)."""
    total = np.zeros(pair.charges.shape[0])
    start = 0
    for here, a, b in zip(nodes, ups, downs, strict=True):
        stop = start + here.across.shape[1]
        if not here.edge.conducts:
            (left, right), (left_up, right_up), (left_down, right_down) = (_dks(n) for n in (here, a, b))
            charges, adjoint = pair.charges[:, start:stop], pair.adjoint[:, start:stop]
            own = (0.5 * (left + right))[:, None] / here.jacobian
            field = -own * charges / ((left - right) / (2.0 * np.pi))[:, None]
            steps = (left_up - right_up - left_down + right_down) / (2.0 * np.pi)
            diagonal = 0.5 * ((left_up + right_up)[:, None] / a.jacobian - (left_down + right_down)[:, None] / b.jacobian)
            total += (adjoint * (steps[:, None] * field + diagonal * charges)).sum(axis=1)
        start = stop
    return total


def _dks(nodes: Nodes) -> tuple[FloatArray, FloatArray]:
    left, right = nodes.edge.left_dk, nodes.edge.right_dk
    assert left is not None
    assert right is not None
    return left, right
