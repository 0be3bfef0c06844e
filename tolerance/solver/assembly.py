"""From edges and kernel to the charge on the traces: one dense system a section, batched.

Unknowns are the charges at the nodes. Copper nodes ask for potential 1; dielectric nodes ask that the normal
displacement passes through. In the units used here the potential is -M q / (2 pi body_dk), vacuum permittivity 1.
Collocation with product integration on each edge itself; see rules and kernels for the pieces.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, NumberArray
from tolerance.solver.edges import Edge, NodeCounts, Nodes, place_nodes
from tolerance.solver.kernels import FarImages, SpectralRest


@dataclass(frozen=True, slots=True)
class NearImage:
    """Charges mirrored at height `level` (sections,) [m]; None is the charge itself.

    touching : names of copper edges that lie on the level, so that their image is themselves.
    """

    level: FloatArray | None
    touching: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Medium:
    """What the dielectrics make of the images: a factor (sections,) for each near image, and the rest."""

    factors: tuple[NumberArray, ...]
    far: FarImages | None = None
    rest: SpectralRest | None = None


@dataclass(frozen=True, slots=True)
class System:
    """Near-image matrices of one batch, each (sections, unknowns, unknowns), shared by every medium and mode."""

    nodes: tuple[Nodes, ...]
    own: tuple[FloatArray, ...]
    mirrored: tuple[FloatArray, ...]
    across: FloatArray
    height: FloatArray
    normals: tuple[FloatArray, FloatArray]
    trace: int  # how many of the unknowns lie on the trace; they come first
    copper: int  # how many on any copper; they come before those on dielectric


def near_system(
    edges: Sequence[Edge], images: Sequence[NearImage], *, counts: Sequence[NodeCounts], mirror: bool = True,
) -> System:
    """Place the nodes (copper edges first) and set up the matrices of the near images.

    mirror : the edges are the right half of a section that is mirrored at x = 0.
    """
    nodes = tuple(place_nodes(edge, count) for edge, count in zip(edges, counts, strict=True))
    across = np.concatenate([n.across for n in nodes], axis=1)
    height = np.concatenate([n.height for n in nodes], axis=1)
    copper = sum(n.across.shape[1] for n in nodes if n.edge.conducts)
    trace = sum(n.across.shape[1] for n in nodes if n.edge.conducts and n.edge.role != "ground")
    normals = tuple(np.concatenate([np.broadcast_to(n.normal[axis][:, None], n.across.shape) for n in nodes], axis=1)
                    for axis in (0, 1))
    own, mirrored = [], []
    for image in images:
        pair = _image_matrices(nodes, across, height, image, normals, copper, mirror=mirror)
        own.append(pair[0])
        mirrored.append(pair[1])
    return System(nodes, tuple(own), tuple(mirrored), across, height, (normals[0], normals[1]), trace, copper)


def charge(
    system: System, medium: Medium, *, body_dk: NumberArray, sign: int, air: bool = False,
) -> NumberArray:
    """Charge on the right-hand trace (or right half) at potential 1, even or odd: (sections,), capacitance / eps0.

    air : copper alone, every Dk 1.
    """
    solved = node_charges(system, medium, body_dk=body_dk, sign=sign, air=air)
    return np.asarray(solved[:, : system.trace].sum(axis=1))


def node_charges(
    system: System, medium: Medium, *, body_dk: NumberArray, sign: int, air: bool = False,
) -> NumberArray:
    """Charge at every node, the traces at potential 1: (sections, unknowns); complex where a Dk is."""
    matrix = full_matrix(system, medium, sign=sign, air=air)
    wanted = np.zeros((*matrix.shape[:2], 1), dtype=matrix.dtype)
    wanted[:, : system.trace, 0] = (-2.0 * np.pi * body_dk)[:, None]
    return np.asarray(np.linalg.solve(matrix, wanted)[:, :, 0])


def full_matrix(
    system: System, medium: Medium, *, sign: int, air: bool, kept: list[FloatArray] | None = None,
) -> NumberArray:
    """The matrix of all conditions, even (`sign` 1) or odd (-1): (sections, unknowns, unknowns).

    kept : a list that takes the matrix of each far image, before its factor.
    """
    size = system.copper if air else system.across.shape[1]
    matrix = np.zeros((system.across.shape[0], size, size), dtype=np.result_type(*medium.factors))
    for factor, own, mirrored in zip(medium.factors, system.own, system.mirrored, strict=True):
        if np.any(factor):
            matrix += factor[:, None, None] * (own[:, :size, :size] + sign * mirrored[:, :size, :size])
    if medium.far is not None:
        _add_far_images(matrix, system, medium.far, sign, size, kept)
    if medium.rest is not None:
        sent = sent_from(system, size)
        nodes = system.across[:, :size], system.height[:, :size]
        rest = medium.rest.matrix(nodes, nodes if sent.spread is None else (sent.across, sent.height), sign)
        matrix += rest if sent.spread is None else rest @ sent.spread
    if not air:
        _turn_into_interface_conditions(matrix, system)
    return matrix


def _image_matrices(
    nodes: Sequence[Nodes], across: FloatArray, height: FloatArray, image: NearImage, normals: Sequence[FloatArray],
    copper: int, *, mirror: bool,
) -> tuple[FloatArray, FloatArray]:
    """Matrices of the image and of its mirror image in x = 0 (nought where there is no mirror)."""
    own_parts, mirrored_parts = [], []
    start = 0
    for source in nodes:
        stop = start + source.across.shape[1]
        level_height = source.fine_height if image.level is None else 2.0 * image.level[:, None] - source.fine_height
        rise = height[:, :, None] - level_height[:, None, :]
        parts = []
        for fine_across in (source.fine_across, -source.fine_across)[: 2 if mirror else 1]:
            kernel = _kernel(across[:, :, None] - fine_across[:, None, :], rise, normals, copper)
            parts.append(kernel @ source.refine)
        itself = image.level is None or source.edge.name in image.touching
        if itself and source.alone is not None:
            parts[0][:, start:stop] = source.alone
            if source.mirrored is not None:
                parts[1][:, start:stop] = source.mirrored
        elif itself:
            parts[0][:, start:stop] = 0.0  # a straight edge has no normal field on itself
        own_parts.append(parts[0])
        mirrored_parts.append(parts[1] if mirror else np.zeros_like(parts[0]))
        start = stop
    return np.concatenate(own_parts, axis=2), np.concatenate(mirrored_parts, axis=2)


def _kernel(run: FloatArray, rise: FloatArray, normals: Sequence[FloatArray], copper: int) -> FloatArray:
    """ln r in the rows of copper, its derivative along the normal in the rows of dielectric."""
    square = run * run
    square += rise * rise
    np.log(square[:, :copper], out=square[:, :copper])
    square[:, :copper] *= 0.5
    if copper < run.shape[1]:
        upper = slice(copper, None)
        slope = normals[0][:, upper, None] * run[:, upper] + normals[1][:, upper, None] * rise[:, upper]
        square[:, upper] = slope / square[:, upper]
    return square


def _add_far_images(
    matrix: NumberArray, system: System, far: FarImages, sign: int, size: int, kept: list[FloatArray] | None,
) -> None:
    across, height = system.across[:, :size], system.height[:, :size]
    normals = tuple(values[:, :size] for values in system.normals)
    if kept is not None:
        kept += [np.empty_like(matrix) for _ in range(far.shifts.shape[1])]
    start = 0
    for source in system.nodes:
        stop = start + source.across.shape[1]
        if start >= size:
            break
        source_across, source_height = source.places.far_across, source.places.far_height
        total = height[:, :, None] + source_height[:, None, :]
        runs = [across[:, :, None] - source_across[:, None, :], across[:, :, None] + source_across[:, None, :]]
        block = np.zeros(total.shape, dtype=matrix.dtype)
        for number in range(far.shifts.shape[1]):
            rise = total + far.shifts[:, number, None, None]
            kernel = _kernel(runs[0], rise, normals, system.copper)
            mirrored = _kernel(runs[1], rise, normals, system.copper)
            kernel += mirrored if sign > 0 else -mirrored
            if kept is not None:
                kept[number][:, :, start:stop] = kernel if source.spread is None else kernel @ source.spread
            block += kernel * far.factors[:, number, None, None]
        matrix[:, :, start:stop] += block if source.spread is None else block @ source.spread
        start = stop


@dataclass(frozen=True, slots=True)
class Sent:
    """Where far images and rests see charges from: (sections, sources).

    spread : (sources, unknowns) charges there from the unknown ones; None where they are the same.
    """

    across: FloatArray
    height: FloatArray
    spread: FloatArray | None


def sent_from(system: System, size: int) -> Sent:
    """The sources of the first `size` unknowns, which are whole edges."""
    kept, filled = [], 0
    for nodes in system.nodes:
        if filled < size:
            kept.append(nodes)
            filled += nodes.across.shape[1]
    if all(nodes.spread is None for nodes in kept):
        return Sent(system.across[:, :size], system.height[:, :size], None)
    blocks = [np.eye(nodes.across.shape[1]) if nodes.spread is None else nodes.spread for nodes in kept]
    spread = np.zeros((sum(len(block) for block in blocks), size))
    row = column = 0
    for block in blocks:
        spread[row : row + block.shape[0], column : column + block.shape[1]] = block
        row, column = row + block.shape[0], column + block.shape[1]
    return Sent(np.concatenate([nodes.places.far_across for nodes in kept], axis=1),
                np.concatenate([nodes.places.far_height for nodes in kept], axis=1), spread)


def _turn_into_interface_conditions(matrix: NumberArray, system: System) -> None:
    """Rows of dielectric: (left - right) / (2 pi) * field + (left + right) / 2 * density = 0."""
    start = 0
    for nodes in system.nodes:
        stop = start + nodes.across.shape[1]
        edge = nodes.edge
        if edge.left_dk is not None and edge.right_dk is not None:
            matrix[:, start:stop] *= ((edge.left_dk - edge.right_dk) / (2.0 * np.pi))[:, None, None]
            diagonal = np.arange(start, stop)
            matrix[:, diagonal, diagonal] += (0.5 * (edge.left_dk + edge.right_dk))[:, None] / nodes.jacobian
        start = stop
