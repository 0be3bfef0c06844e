"""How a number that hangs on the charges of a solution answers to the places of the edges and to what images do.

With charges q from A q = b and the adjoint A' s = g, where g is the derivative of the number by the charges, any
change of A adds s . (db - dA q). The entries of A depend on places of nodes, on levels and factors of images and on
the smooth rest. A node lies at a fixed share of the way along its edge, so that all that places do is summed up into
the gradient with respect to the ends of the edges.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields

import numpy as np

from tolerance.arrays import FloatArray, IntArray, NumberArray
from tolerance.solver.assembly import Medium, NearImage, System, sent_from
from tolerance.solver.edges import Nodes
from tolerance.solver.kernels import FarImages, SpectralRest

#: Entries of a matrix that are worked on at a time, so that they stay in cache.
ENTRIES_AT_A_TIME = 20_000


@dataclass(frozen=True, slots=True)
class Excited:
    """One medium of a batch with its solution: charges, and minus the adjoint, both (sections, unknowns).

    matrices : of far images, as full_matrix keeps them.
    """

    medium: Medium
    charges: NumberArray
    adjoint: NumberArray
    kept: Sequence[FloatArray]


@dataclass(frozen=True, slots=True)
class MediumGradient:
    """With respect to what one medium makes of images: all (sections, ...).

    near : factors of near images.  factors, shifts : of far ones, shifts in metres.  rest : see RestGradient.
    """

    near: NumberArray
    factors: NumberArray
    shifts: FloatArray
    rest: RestGradient | None


@dataclass(frozen=True, slots=True)
class RestGradient:
    """With respect to the factors of a spectral rest (sections, k), to the thickness of the body and the factor of the
    compensating logarithm (sections,)."""

    lower: NumberArray
    upper: NumberArray
    cross: NumberArray
    level: NumberArray
    body_thickness: FloatArray
    compensation: NumberArray


@dataclass(frozen=True, slots=True)
class Gradient:
    """All of it: `ends` (sections, 4, edges) with respect to x, y of starts and x, y of stops; `levels` (sections,
    images) of near images; `left`, `right` (sections, edges) of the Dk beside dielectric edges; and of each medium."""

    ends: FloatArray
    levels: FloatArray
    left: NumberArray
    right: NumberArray
    media: tuple[MediumGradient, ...]


@dataclass(frozen=True, slots=True)
class _Sheet:
    """Sources of one image: where they are seen (sections, sources), and their charges with the factor of the image,
    for each medium; None where they do not reach.

    side, up : -1 where x, y run against those of the edges.  shares : see shares_of_ends.
    blank : blocks of the kernel to leave out.
    """

    across: FloatArray
    height: FloatArray
    charges: tuple[NumberArray | None, ...]
    side: int
    up: int
    shares: FloatArray
    blank: Sequence[tuple[slice, slice]] = ()


class _Places:
    """Sums of the gradient with respect to the ends of edges and to levels."""

    def __init__(self, system: System, images: int) -> None:
        count, edges = system.across.shape[0], len(system.nodes)
        self.system = system
        self.across, self.height = (np.zeros((count, 2 * edges)) for _ in range(2))
        self.levels = np.zeros((count, images))
        self.at_nodes = shares_of_ends([nodes.share for nodes in system.nodes])
        self.at_fine = shares_of_ends([nodes.fine_share for nodes in system.nodes])
        self.at_far = shares_of_ends([nodes.far_share for nodes in system.nodes])

    def add(self, across: FloatArray, height: FloatArray, shares: FloatArray) -> None:
        """Gradients with respect to places (sections, places) that lie at `shares` of the edges."""
        part = shares[: across.shape[1]]
        self.across += across @ part
        self.height += height @ part

    def add_length(self, edge: int, gradient: FloatArray) -> None:
        """Gradient with respect to the logarithm of the length of an edge: (sections,)."""
        one = self.system.nodes[edge].edge
        square = one.length**2
        for axis, sums in enumerate((self.across, self.height)):
            way = gradient * (one.stop[axis] - one.start[axis]) / square
            sums[:, edge] -= way
            sums[:, len(self.system.nodes) + edge] += way

    @property
    def ends(self) -> FloatArray:
        """See Gradient."""
        edges = len(self.system.nodes)
        return np.stack([self.across[:, :edges], self.height[:, :edges],
                         self.across[:, edges:], self.height[:, edges:]], axis=1)


def gradient(system: System, images: Sequence[NearImage], solved: Sequence[Excited], *, sign: int) -> Gradient:
    """The gradient of a batch; `solved`: the medium as built, then that of the copper in air.

    sign : even (1), odd (-1), or 0 for a section that is not mirrored.
    """
    sums = _Places(system, len(images))
    weighted = [_weighted(system, one.adjoint) for one in solved]
    _add_near(sums, images, solved, weighted, sign)
    media = []
    all_shifts = _add_far(sums, solved, weighted, sign)
    for one, rows, shifts in zip(solved, weighted, all_shifts, strict=True):
        rest = None
        if one.medium.rest is not None and sign:
            rest = _add_rest(sums, one.medium.rest, rows, one.charges, sign)
        elif one.medium.rest is not None:  # a section that is not mirrored: half the sum of even and odd
            even, odd = (_add_rest(sums, one.medium.rest, 0.5 * rows, one.charges, way) for way in (1, -1))
            rest = RestGradient(*(getattr(even, part.name) + getattr(odd, part.name) for part in fields(RestGradient)))
        media.append(MediumGradient(_near_factors(system, rows, one, sign), _far_factors(rows, one), shifts, rest))
    left, right = _add_interfaces(sums, solved[0])
    return Gradient(sums.ends, sums.levels, left, right, tuple(media))


def _weighted(system: System, adjoint: NumberArray) -> NumberArray:
    """The adjoint, rows of dielectric weighted as their M is in the conditions."""
    result = adjoint.copy()
    for nodes, part in _parts(system):
        edge = nodes.edge
        if part.start < adjoint.shape[1] and edge.left_dk is not None and edge.right_dk is not None:
            result[:, part] *= ((edge.left_dk - edge.right_dk) / (2.0 * np.pi))[:, None]
    return result


def _parts(system: System) -> list[tuple[Nodes, slice]]:
    """Each edge's nodes with their place among the unknowns."""
    ends = np.cumsum([0] + [nodes.across.shape[1] for nodes in system.nodes])
    return [(nodes, slice(start, stop)) for nodes, start, stop in zip(system.nodes, ends[:-1], ends[1:], strict=True)]


def shares_of_ends(shares: Sequence[FloatArray]) -> FloatArray:
    """Where places lie between the ends of their edges: (places, 2 edges), shares of starts, then of stops."""
    sizes = [share.size for share in shares]
    result = np.zeros((sum(sizes), 2 * len(shares)))
    start = 0
    for edge, share in enumerate(shares):
        result[start : start + share.size, edge] = 1.0 - share
        result[start : start + share.size, len(shares) + edge] = share
        start += share.size
    return result


def _terms(
    rows: Sequence[NumberArray], charges: Sequence[NumberArray | None],
) -> list[tuple[FloatArray, FloatArray]]:
    """The real part of the sum of rows * charges over the media, as products of real arrays."""
    result = []
    for one, sent in zip(rows, charges, strict=True):
        if sent is None:
            continue
        result.append((one.real, sent.real))
        if np.iscomplexobj(one) or np.iscomplexobj(sent):
            result.append((-one.imag, sent.imag))
    return result


def _add_near(sums: _Places, images: Sequence[NearImage], solved: Sequence[Excited], rows: list[NumberArray],
              sign: int) -> None:
    """The near images and, where there is a mirror (`sign` is not 0), their mirror images in x = 0."""
    system = sums.system
    fine = [_fine_charges(system, one.charges) for one in solved]
    across = np.concatenate([nodes.fine_across for nodes in system.nodes], axis=1)
    height = np.concatenate([nodes.fine_height for nodes in system.nodes], axis=1)
    sheets, levels = [], []
    for number, image in enumerate(images):
        factors = [one.medium.factors[number] for one in solved]
        for side in (1, -1) if sign else (1,):
            way = 1 if side > 0 else sign
            charges = tuple((way * factor)[:, None] * sent if np.any(factor) else None
                            for factor, sent in zip(factors, fine, strict=True))
            sheets.append(_Sheet(
                side * across, height if image.level is None else 2.0 * image.level[:, None] - height, charges, side,
                1 if image.level is None else -1, sums.at_fine, _themselves(system, image, side)))
            levels.append(number)
            _add_lengths(sums, image, side, [(way * factor, one, on.charges) for factor, one, on in zip(
                factors, rows, solved, strict=True)])
    for number, raised in zip(levels, _add_sheets(sums, sheets, rows), strict=True):
        sums.levels[:, number] += 2.0 * raised if images[number].level is not None else 0.0


def _add_lengths(
    sums: _Places, image: NearImage, side: int, solved: Sequence[tuple[NumberArray, NumberArray, NumberArray]],
) -> None:
    """What edges do to themselves, which goes with the logarithm of their length; factor, rows and charges."""
    for edge, (nodes, part) in enumerate(_parts(sums.system)):
        if nodes.edge.conducts and _itself(nodes, image, side):
            sums.add_length(edge, np.asarray(sum(
                np.real(factor * rows[:, part].sum(axis=1) * charges[:, part].sum(axis=1))
                for factor, rows, charges in solved)))


def _itself(nodes: Nodes, image: NearImage, side: int) -> bool:
    """Whether the image of an edge is the edge itself."""
    return (image.level is None or nodes.edge.name in image.touching) and (side > 0 or nodes.edge.folded)


def _themselves(system: System, image: NearImage, side: int) -> list[tuple[slice, slice]]:
    """Blocks (nodes, fine places) of edges on themselves: they have no say but by the length."""
    result, start = [], 0
    for nodes, part in _parts(system):
        stop = start + nodes.fine_across.shape[1]
        if _itself(nodes, image, side):
            result.append((part, slice(start, stop)))
        start = stop
    return result


def _fine_charges(system: System, charges: NumberArray) -> NumberArray:
    return np.concatenate([charges[:, part] @ nodes.refine.T for nodes, part in _parts(system)
                           if part.start < charges.shape[1]], axis=1)


def _add_far(
    sums: _Places, solved: Sequence[Excited], rows: Sequence[NumberArray], sign: int,
) -> list[FloatArray]:
    """Far images of every medium; returns the gradient with respect to their shifts, for each.

    Over one ply the bare plane's image stands where the first image of the filled section does: then one sheet, and
    one shift, serves both.
    """
    fars = [one.medium.far for one in solved]
    sources = [_far_sources(sums.system, one.charges) for one in solved]
    result = [np.zeros((len(rows[0]), 0 if far is None else far.shifts.shape[1])) for far in fars]
    sheets, owners = [], []
    for medium, far in enumerate(fars):
        if far is None or (medium and _at_first(far, fars[0])):
            continue
        for number in range(far.shifts.shape[1]):
            with_air = not medium and not number and _at_first(fars[-1], far)
            for side in (1, -1):
                charges = tuple(
                    (side if side > 0 else sign) * one.factors[:, number, None] * sources[place][2]
                    if one is not None and (place == medium or with_air) else None for place, one in enumerate(fars))
                sheets.append(_Sheet(side * sources[medium][0], -sources[medium][1] - far.shifts[:, number, None],
                                     charges, side, -1, sums.at_far))
                owners.append((medium, number))
    for (medium, number), raised in zip(owners, _add_sheets(sums, sheets, rows), strict=True):
        result[medium][:, number] -= raised
    return result


def _far_sources(system: System, charges: NumberArray) -> tuple[FloatArray, FloatArray, NumberArray]:
    """Where far images see charges from, and the charges there."""
    sent = sent_from(system, charges.shape[1])
    return sent.across, sent.height, charges if sent.spread is None else charges @ sent.spread.T


def _at_first(air: FarImages | None, filled: FarImages | None) -> bool:
    """Whether the one image of a bare plane stands where the first image of the filled section does."""
    return air is not None and filled is not None and air is not filled and air.shifts.shape[1] == 1 and np.array_equal(
        air.shifts[:, 0], filled.shifts[:, 0])


def _add_sheets(sums: _Places, sheets: Sequence[_Sheet], rows: Sequence[NumberArray]) -> list[FloatArray]:
    """Adds the gradient with respect to places of nodes and sources; returns for each sheet that with respect to a
    shift of it upwards: (sections,)."""
    result: list[FloatArray] = []
    size = max(one.shape[1] for one in rows)
    group: list[_Sheet] = []
    for sheet in sheets:
        if group and size * (sum(one.across.shape[1] for one in group) + sheet.across.shape[1]) > ENTRIES_AT_A_TIME:
            result += _add_group(sums, group, rows)
            group = []
        group.append(sheet)
    return result + (_add_group(sums, group, rows) if group else [])


def _add_group(sums: _Places, sheets: Sequence[_Sheet], rows: Sequence[NumberArray]) -> list[FloatArray]:
    """Several sheets side by side."""
    reach = [max((len(sent[0]) for sent in sheet.charges if sent is not None), default=0) for sheet in sheets]
    starts = np.cumsum([0, *reach])
    if not starts[-1]:
        return [np.zeros(len(sums.levels)) for _ in sheets]
    across, height = (np.concatenate([getattr(sheet, name)[:, :width] for sheet, width in zip(
        sheets, reach, strict=True)], axis=1) for name in ("across", "height"))
    charges = [_side_by_side([sheet.charges[medium] for sheet in sheets], starts, len(across))
               for medium in range(len(rows))]
    blank = [(part, slice(fine.start + start, fine.stop + start)) for sheet, start, width in zip(
        sheets, starts, reach, strict=False) for part, fine in sheet.blank if fine.start < width]
    found = _between(sums.system, (across, height), _terms(rows, charges), blank)
    sums.add(found[0], found[1], sums.at_nodes)
    raised = []
    for sheet, start, stop in zip(sheets, starts[:-1], starts[1:], strict=True):
        sums.add(sheet.side * found[2][:, start:stop], sheet.up * found[3][:, start:stop], sheet.shares)
        raised.append(found[3][:, start:stop].sum(axis=1))
    return raised


def _side_by_side(charges: Sequence[NumberArray | None], starts: IntArray, count: int) -> NumberArray | None:
    """Charges in their columns, noughts where a sheet has none; None where no sheet has any."""
    given = [sent for sent in charges if sent is not None]
    if not given:
        return None
    result = np.zeros((count, starts[-1]), dtype=np.result_type(*given))
    for sent, start in zip(charges, starts, strict=False):
        if sent is not None:
            result[:, start : start + sent.shape[1]] = sent
    return result


def _between(
    system: System, sources: tuple[FloatArray, FloatArray], terms: Sequence[tuple[FloatArray, FloatArray]],
    blank: Sequence[tuple[slice, slice]],
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Gradient of the sum of rows * kernel * charges with respect to x, y of the nodes and to x, y of the sources.

    blank : blocks of the kernel to leave out.
    Of ln r the derivative is run / r^2 and rise / r^2; of (n . d) / r^2, d = (run, rise), it is
    n / r^2 - 2 (n . d) d / r^4. Sums over run are taken as differences of sums over x.
    """
    size, columns = max(one.shape[1] for one, _ in terms), sources[0].shape[1]
    count, copper = system.across.shape[0], min(system.copper, size)
    places = tuple(values[:, :size] for values in (system.across, system.height))
    rows, charges = (_stacked([term[which] for term in terms], count, width)
                     for which, width in ((0, size), (1, columns)))
    normals = [values[:, None, copper:size] for values in system.normals]
    left = np.concatenate([rows, rows * places[0][:, None], rows * places[1][:, None]], axis=1)
    right = np.concatenate([charges, charges * sources[0][:, None], charges * sources[1][:, None]], axis=1)
    upright = np.concatenate([rows[:, :, copper:] * normals[0], rows[:, :, copper:] * normals[1]], axis=1)
    sums = _summed(places, sources, normals, left, right, upright, charges, blank, copper)
    many, here, there = rows.shape[1], [], []
    taken, sent, level, raised = sums
    for axis in (0, 1):
        part = slice((axis + 1) * many, (axis + 2) * many)
        at_nodes = (rows * (places[axis][:, None] * taken[:, :many] - taken[:, part])).sum(axis=1)
        at_nodes[:, copper:] += (rows[:, :, copper:] * normals[axis] * level).sum(axis=1)
        here.append(at_nodes)
        there.append((charges * (sources[axis][:, None] * sent[:, :many] - sent[:, part]
                                 - raised[:, axis * many : (axis + 1) * many])).sum(axis=1))
    return here[0], here[1], there[0], there[1]


def _stacked(values: Sequence[FloatArray], count: int, size: int) -> FloatArray:
    """Side by side (sections, values, size), filled up with noughts."""
    result = np.zeros((count, len(values), size))
    for number, one in enumerate(values):
        result[:, number, : one.shape[1]] = one
    return result


def _summed(
    places: Sequence[FloatArray], sources: Sequence[FloatArray], normals: Sequence[FloatArray], left: FloatArray,
    right: FloatArray, upright: FloatArray, charges: FloatArray, blank: Sequence[tuple[slice, slice]], copper: int,
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Products of the derivative of the kernel with `right` and with `left`; of its part along the normal, in rows of
    dielectric, with `charges` and with `upright`."""
    count, size, columns = len(left), left.shape[2], right.shape[2]
    taken, sent = np.empty((*right.shape[:2], size)), np.empty((*left.shape[:2], columns))
    level, raised = np.empty((*charges.shape[:2], size - copper)), np.zeros((*upright.shape[:2], columns))
    step = max(1, ENTRIES_AT_A_TIME // max(1, size * columns))
    for start in range(0, count, step):
        some = slice(start, start + step)
        run = places[0][some, :, None] - sources[0][some, None, :]
        rise = places[1][some, :, None] - sources[1][some, None, :]
        inverse = run * run
        inverse += rise * rise
        np.reciprocal(inverse, out=inverse)
        for part, fine in blank:
            inverse[:, part, fine] = 0.0
        if size > copper:
            slopes = inverse[:, copper:].copy()
            run, rise = run[:, copper:], rise[:, copper:]
            run *= normals[0][some].transpose(0, 2, 1)
            rise *= normals[1][some].transpose(0, 2, 1)
            run += rise
            run *= -2.0
            run *= slopes
            inverse[:, copper:] *= run
            np.matmul(charges[some], slopes.transpose(0, 2, 1), out=level[some])
            np.matmul(upright[some], slopes, out=raised[some])
        np.matmul(right[some], inverse.transpose(0, 2, 1), out=taken[some])
        np.matmul(left[some], inverse, out=sent[some])
    return taken, sent, level, raised


def _near_factors(system: System, rows: NumberArray, one: Excited, sign: int) -> NumberArray:
    size = rows.shape[1]
    return np.stack([_form(rows, own[:, :size, :size], one.charges) + sign * _form(
        rows, mirrored[:, :size, :size], one.charges) for own, mirrored in zip(
        system.own, system.mirrored, strict=True)], axis=1)


def _far_factors(rows: NumberArray, one: Excited) -> NumberArray:
    if not one.kept:
        return np.zeros((len(rows), 0))
    return np.stack([_form(rows, kernel, one.charges) for kernel in one.kept], axis=1)


def _form(left: NumberArray, matrix: FloatArray, right: NumberArray) -> NumberArray:
    return np.asarray((left * (matrix @ right[:, :, None])[:, :, 0]).sum(axis=1))


def _add_interfaces(sums: _Places, one: Excited) -> tuple[NumberArray, NumberArray]:
    """What the factors of the interface conditions add: rows (l - r) / (2 pi) M + (l + r) / (2 jacobian), of which M
    on the charges follows from the condition itself. Returns the gradient with respect to l and r of every edge."""
    count, edges = len(one.charges), len(sums.system.nodes)
    left, right = (np.zeros((count, edges), dtype=one.charges.dtype) for _ in range(2))
    for number, (nodes, part) in enumerate(_parts(sums.system)):
        edge = nodes.edge
        if edge.left_dk is None or edge.right_dk is None:
            continue
        form = (one.adjoint[:, part] * one.charges[:, part] / nodes.jacobian).sum(axis=1)
        mean, difference = 0.5 * (edge.left_dk + edge.right_dk), edge.left_dk - edge.right_dk
        left[:, number] = (0.5 - mean / difference) * form
        right[:, number] = (0.5 + mean / difference) * form
        sums.add_length(number, -np.real(mean * form))
    return left, right


def _add_rest(
    sums: _Places, rest: SpectralRest, rows: NumberArray, charges: NumberArray, sign: int,
) -> RestGradient:
    """Adds the gradient with respect to places, and returns that with respect to what the rest is made of."""
    system, size = sums.system, charges.shape[1]
    across, height = system.across[:, :size], system.height[:, :size]
    from_across, from_height, sent_charges = _far_sources(system, charges)
    at_nodes = _Carried(rest, across, height, sign)
    at_sources = at_nodes if sent_charges is charges else _Carried(rest, from_across, from_height, sign)
    taken, sent = at_nodes.sums(rows), at_sources.sums(sent_charges)
    for carried, weights, other, shares in ((at_nodes, rows, sent, sums.at_nodes),
                                            (at_sources, sent_charges, taken, sums.at_far)):
        sums.add(*carried.slopes(rest, weights, other), shares)
    thickness = 2.0 * np.real((rest.wavenumber * (2.0 * rest.upper * taken[:, 1] * sent[:, 1] + rest.cross * (
        taken[:, 0] * sent[:, 1] + taken[:, 1] * sent[:, 0]))).sum(axis=1))
    compensation = np.zeros(len(across), dtype=rows.dtype)
    for side in (1.0, -1.0) if np.any(rest.compensation) else ():
        way = 1.0 if side > 0 else float(sign)
        apart = across[:, :, None] - side * from_across[:, None, :]
        square = apart * apart + (rest.distance**2)[:, None, None]
        compensation -= 0.5 * way * _form(rows, np.log(square), sent_charges)
        apart /= square
        weighted = -(way * rest.compensation)[:, None] * rows
        sums.add(np.real(weighted * (apart @ sent_charges[:, :, None])[:, :, 0]), np.zeros(across.shape), sums.at_nodes)
        sums.add(-side * np.real((weighted[:, None, :] @ apart)[:, 0] * sent_charges), np.zeros(from_across.shape),
                 sums.at_far)
    return RestGradient(
        -2.0 * taken[:, 0] * sent[:, 0], -2.0 * taken[:, 1] * sent[:, 1],
        -2.0 * (taken[:, 0] * sent[:, 1] + taken[:, 1] * sent[:, 0]), -2.0 * taken[:, 2] * sent[:, 2], thickness,
        compensation)


class _Carried:
    """The waves of a spectral rest at places (sections, places): going down, going up, level."""

    def __init__(self, rest: SpectralRest, across: FloatArray, height: FloatArray, sign: int) -> None:
        self.k = rest.wavenumber
        k = self.k[:, None, :]
        phase = k * across[:, :, None]
        wave, self.slope = (np.cos(phase), -k * np.sin(phase)) if sign > 0 else (np.sin(phase), k * np.cos(phase))
        self.down = np.exp(-k * height[:, :, None])
        self.up = np.exp(-k * (rest.body_thickness[:, None] - height)[:, :, None])
        self.carriers = (wave * self.down, wave * self.up, wave)

    def sums(self, weights: NumberArray) -> NumberArray:
        """What `weights` (sections, places) make of each wave: (sections, 3, k)."""
        return np.stack([(weights[:, None, :] @ carrier)[:, 0] for carrier in self.carriers], axis=1)

    def slopes(self, rest: SpectralRest, weights: NumberArray, other: NumberArray) -> tuple[FloatArray, FloatArray]:
        """Gradient with respect to x and y of the places; `other`: the sums at the other end."""
        of_down = (rest.lower * other[:, 0] + rest.cross * other[:, 1])[:, :, None]
        of_up = (rest.upper * other[:, 1] + rest.cross * other[:, 0])[:, :, None]
        of_level = (rest.level * other[:, 2])[:, :, None]
        slope = self.slope
        run = (slope * self.down) @ of_down + (slope * self.up) @ of_up + slope @ of_level
        k = self.k[:, :, None]
        rise = self.carriers[1] @ (k * of_up) - self.carriers[0] @ (k * of_down)
        return -2.0 * np.real(weights * run[:, :, 0]), -2.0 * np.real(weights * rise[:, :, 0])
