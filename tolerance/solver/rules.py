"""Nodes on an edge, graded to its ends, and what an edge does to itself: numbers that no geometry enters.

An edge of half length `a` is written x = a * position(s), -1 <= s <= 1, where the derivative of `position`
is proportional to (1 - s^2)^(power - 1). Near a corner the charge grows like distance^(-1/3) (right angle);
in s with power 3 it becomes a smooth function, so that polynomials through Gauss-Legendre nodes converge fast.
Graded meshes of this kind: R. Kress, "A Nystroem method for boundary integral equations in domains with corners",
Numerische Mathematik 58 (1990), pages 145-161.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.polynomial import polynomial

from tolerance.arrays import FloatArray, read_only

#: Panels that halve towards a logarithmic singularity; the smallest is 2^-31 of the largest.
HALVINGS = 32
#: Nodes of a Gauss-Legendre rule from which on it is found by Newton's method.
LONG_RULE = 200


@dataclass(frozen=True, slots=True)
class Rule:
    """Nodes of one edge; every array has shape (nodes,).

    nodes, weights : Gauss-Legendre on -1..1.   position, slope : the graded map and its derivative.
    """

    nodes: FloatArray
    weights: FloatArray
    position: FloatArray
    slope: FloatArray


@lru_cache(maxsize=256)
def legendre(count: int) -> tuple[FloatArray, FloatArray]:
    """Nodes and weights of the Gauss-Legendre rule on -1..1: (count,).

    Long rules by Newton's method on the three-term recurrence: eigenvalues would cost the third power of the count.
    """
    if count <= LONG_RULE:
        nodes, weights = np.polynomial.legendre.leggauss(count)
        return read_only(nodes), read_only(weights)
    nodes = -np.cos(np.pi * (np.arange(count) + 0.75) / (count + 0.5))  # Tricomi's first guess
    for _ in range(4):
        value, before = nodes.copy(), np.ones(count)
        for degree in range(2, count + 1):
            value, before = ((2 * degree - 1) * nodes * value - (degree - 1) * before) / degree, value
        slope = count * (before - nodes * value) / (1.0 - nodes**2)
        nodes = nodes - value / slope
    return read_only(nodes), read_only(2.0 / ((1.0 - nodes**2) * slope**2))


@lru_cache(maxsize=256)
def graded_rule(count: int, power: int) -> Rule:
    """The rule with `count` nodes for an edge with a corner at both ends."""
    nodes, weights = legendre(count)
    position, slope = _graded_map(nodes, power)
    return Rule(*(read_only(values) for values in (nodes, weights, position, slope)))


@lru_cache(maxsize=256)
def tail_rule(count: int) -> Rule:
    """The rule for an edge that runs from a corner to infinity: x = scale * position, position = u^2 / (1 - u)."""
    nodes, weights = legendre(count)
    near, far = 0.5 * (1.0 + nodes), 0.5 * (1.0 - nodes)
    slope = near / far + 0.5 * near**2 / far**2
    return Rule(*(read_only(values) for values in (nodes, weights, near**2 / far, slope)))


@lru_cache(maxsize=256)
def ground_rule(count: int) -> Rule:
    """The rule for copper that reaches far out from a corner: x = scale * position, up to 50 scales."""
    nodes, weights = legendre(count)
    return Rule(*(read_only(values) for values in (nodes, weights, *_ground_map(nodes))))


@lru_cache(maxsize=256)
def refinement(count: int, fine_count: int) -> FloatArray:
    """Charges at `fine_count` nodes from charges at `count` nodes: shape (fine_count, count).

    The density in s is the polynomial through the coarse nodes; the charge of a node is weight times density.
    """
    nodes, weights = legendre(count)
    fine_nodes, fine_weights = legendre(fine_count)
    return read_only(fine_weights[:, None] * _interpolation(nodes, fine_nodes) / weights)


@lru_cache(maxsize=64)
def piece_charges(count: int, pieces: int) -> FloatArray:
    """Charges on pieces of equal length in s from charges at `count` nodes: shape (pieces, count)."""
    nodes, weights = legendre(count)
    places, shares = legendre(4 + count // 2)
    middle = (2.0 * np.arange(pieces) + 1.0) / pieces - 1.0
    values = _interpolation(nodes, (middle[:, None] + places / pieces).ravel())
    return read_only(shares @ values.reshape(pieces, places.size, count) / pieces / weights)


def graded_positions(pieces: int, power: int) -> FloatArray:
    """Where the pieces of an edge with a corner at both ends begin and end: (pieces + 1,), see graded_rule."""
    return _graded_map(np.linspace(-1.0, 1.0, pieces + 1), power)[0]


def ground_positions(pieces: int) -> FloatArray:
    """The same of copper that reaches far out, see ground_rule."""
    return _ground_map(np.linspace(-1.0, 1.0, pieces + 1))[0]


def tail_positions(pieces: int) -> FloatArray:
    """The same of an edge to infinity, see tail_rule; the last piece ends where nearly nothing is left."""
    near = np.linspace(0.0, 1.0, pieces + 1)
    near[-1] = 0.5 * (1.0 + near[-2])
    return np.asarray(near**2 / (1.0 - near))


@lru_cache(maxsize=64)
def self_potential(count: int, power: int) -> FloatArray:
    """Integral of ln |position(s_i) - position(s')| over the edge for unit charge at node j: shape (count, count).

    For an edge of half length `a` the logarithm of `a` is to be added to every entry. Integrated on panels that
    halve towards the singularity; good to about 1e-10.
    """
    return _self_potential(graded_rule(count, power), lambda places: _graded_map(places, power)[0], symmetric=True)


@lru_cache(maxsize=16)
def ground_self_potential(count: int) -> FloatArray:
    """The same for copper that reaches far out; the logarithm of its scale is to be added to every entry."""
    return _self_potential(ground_rule(count), lambda places: _ground_map(places)[0], symmetric=False)


def _self_potential(rule: Rule, position: Callable[[FloatArray], FloatArray], *, symmetric: bool) -> FloatArray:
    count = rule.nodes.size
    matrix = np.empty((count, count))
    for row in range((count + 1) // 2 if symmetric else count):
        distance, sign, weight = _halving_panels(float(rule.nodes[row]), count)
        place = rule.nodes[row] + sign * distance
        across = np.abs(position(place) - rule.position[row])
        across = np.where(distance < 1e-6, rule.slope[row] * distance, across)
        matrix[row] = (weight * np.log(across)) @ _interpolation(rule.nodes, place)
    if symmetric:
        matrix[count // 2 :] = matrix[: (count + 1) // 2][::-1, ::-1]
    return read_only(matrix / rule.weights)


def _halving_panels(node: float, count: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Distances from `node`, their sides (-1 or 1) and weights of a rule refined towards it from both sides.

    Exact on every panel for polynomials of `count` coefficients, and more: shorter panels see less of them.
    """
    distances, signs, panel_weights = [], [], []
    for side in (-1.0, 1.0):
        ends = np.append(abs(side - node) * 0.5 ** np.arange(HALVINGS), 0.0)
        for outer, inner in itertools.pairwise(ends):
            nodes, weights = legendre(14 + math.ceil(0.5 * count * min(1.0, 2.0 * (outer - inner))))
            distances.append(0.5 * (outer + inner) + 0.5 * (outer - inner) * nodes)
            panel_weights.append(0.5 * (outer - inner) * weights)
            signs.append(np.full(nodes.shape, side))
    return np.concatenate(distances), np.concatenate(signs), np.concatenate(panel_weights)


def _graded_map(nodes: FloatArray, power: int) -> tuple[FloatArray, FloatArray]:
    """Position and slope of the graded map at `nodes`: position runs from -1 to 1."""
    derivative = np.array([1.0])
    for _ in range(power - 1):
        derivative = polynomial.polymul(derivative, [1.0, 0.0, -1.0])
    integral = polynomial.polyint(derivative)
    reach = polynomial.polyval(1.0, integral)
    return polynomial.polyval(nodes, integral) / reach, polynomial.polyval(nodes, derivative) / reach


def _ground_map(nodes: FloatArray) -> tuple[FloatArray, FloatArray]:
    """u^3 / (1.02 - u) and its derivative in s, u = (1 + s) / 2: graded at the corner, 50 at the far end."""
    near = 0.5 * (1.0 + nodes)
    far = 1.02 - near
    return near**3 / far, 0.5 * (3.0 * near**2 / far + near**3 / far**2)


def _interpolation(nodes: FloatArray, places: FloatArray) -> FloatArray:
    """Values at `places` of the polynomials that are one at a node and nought at the others (barycentric form)."""
    difference = 2.0 * (nodes[:, None] - nodes)  # in units that keep long products in range
    np.fill_diagonal(difference, 1.0)
    scale = 1.0 / np.prod(difference, axis=1)
    offset = places[:, None] - nodes
    hit = offset == 0.0
    ratio = scale / np.where(hit, 1.0, offset)
    values = ratio / ratio.sum(axis=1, keepdims=True)
    return np.asarray(np.where(hit.any(axis=1, keepdims=True), hit, values))
