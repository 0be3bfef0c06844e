"""Sobol' indices of a polynomial of independent variables, without sampling: the check on the sampled ones.

In each variable the powers are made orthonormal under its true law, so that the variance is a sum of squared
coefficients and every index a part of it. The indices are those of the polynomial itself: of ln Z, not of Z; for a
relative deviation s of Z they differ by the order of s squared.
Source: B. Sudret, "Global sensitivity analysis using polynomial chaos expansions", Reliability Engineering & System
Safety, volume 93, pages 964-979, 2008.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy.linalg import cholesky

from tolerance.arrays import FloatArray, IntArray
from tolerance.surrogate.polynomial import Polynomial, legendre

FARTHEST_GERM = 9.0  # the mass beyond is 2e-19
PANELS = 72  # of equal width; within each a Gauss-Legendre rule
NODES_PER_PANEL = 8


def analytic_indices(
    polynomial: Polynomial, coordinate: Callable[[int, FloatArray], FloatArray]
) -> tuple[FloatArray, FloatArray]:
    """First-order and total indices (dimensions,) each, for independent germs.

    coordinate : (position, germ (points,)) -> coordinate (points,) of that variable.
    A polynomial that nothing moves has all indices zero.
    """
    germ, weights = _normal_rule()
    coefficients = polynomial.coefficients.copy()
    dimensions = polynomial.exponents.shape[1]
    for position in range(dimensions):
        single = legendre(coordinate(position, germ))[: polynomial.degree + 1]
        moments = (single * weights) @ single.T
        coefficients = _made_orthonormal(polynomial.exponents, coefficients, position, cholesky(moments, lower=True))
    present = polynomial.exponents > 0
    parts = np.where(np.any(present, axis=1), coefficients**2, 0.0)
    variance = np.sum(parts)
    if variance <= 0.0:
        return np.zeros(dimensions), np.zeros(dimensions)
    alone = present & (np.sum(present, axis=1) == 1)[:, np.newaxis]
    return parts @ alone / variance, parts @ present / variance


def _normal_rule() -> tuple[FloatArray, FloatArray]:
    """Nodes and weights (nodes,) that integrate over a standard normal, also where a law has a kink."""
    nodes, weights = np.polynomial.legendre.leggauss(NODES_PER_PANEL)
    edges = np.linspace(-FARTHEST_GERM, FARTHEST_GERM, PANELS + 1)
    half = 0.5 * np.diff(edges)[:, np.newaxis]
    germ = (0.5 * (edges[1:] + edges[:-1])[:, np.newaxis] + half * nodes).ravel()
    density = np.exp(-0.5 * germ**2) / np.sqrt(2.0 * np.pi)
    return germ, (half * weights).ravel() * density


def _made_orthonormal(
    exponents: IntArray, coefficients: FloatArray, position: int, root: FloatArray
) -> FloatArray:
    """Coefficients after one variable's Legendre polynomials are written in its orthonormal ones.

    root : lower triangle L of the moments L L'; the Legendre polynomials are L times the orthonormal ones.
    """
    row_of = {tuple(row): number for number, row in enumerate(exponents.tolist())}
    result = np.zeros_like(coefficients)
    for number, row in enumerate(exponents.tolist()):
        degree = row[position]
        for lower in range(degree + 1):
            row[position] = lower
            result[row_of[tuple(row)]] += coefficients[number] * root[degree, lower]
    return result
