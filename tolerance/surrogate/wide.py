"""A polynomial of degree 4 for wide ranges, where a cubic leaves too much: tolerances doubled, means and widths moved.

Fitted as the cubic in `polynomial` is (same prior, same source), on points of which most lie where moved processes put
their draws. It is kept as powers, in a tree that shares the products of its terms: quick to evaluate anywhere.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, IntArray, read_only
from tolerance.errors import UnfinishedError
from tolerance.surrogate.polynomial import DECAYS, FLOORS, NOISES, Prior, full_exponents

DEGREE = 4
LEAST = 3e-7  # a term that can move the value less in the box is left out
FEWEST_SPARE_RUNS = 4  # above twice the number of coordinates


@dataclass(frozen=True, slots=True)
class PowerTree:
    """Sum of coefficients x products of up to four coordinates, each product the one before times one more.

    Level k holds products of k + 1 coordinates: `coordinate` (terms,) the last factor of each, `coefficient` (terms,),
    and `parent` (terms,) the number of the product of one factor less on the level before (0 on the first).
    Children of one parent stand together, in the order of their parents.
    """

    constant: float
    coordinate: tuple[IntArray, ...]
    coefficient: tuple[FloatArray, ...]
    parent: tuple[IntArray, ...]

    @property
    def terms(self) -> int:
        return 1 + sum(len(level) for level in self.coefficient)

    def evaluate(self, coordinates: FloatArray) -> FloatArray:
        """Values at `coordinates` (points, dimensions); result (points,)."""
        value = np.full(len(coordinates), self.constant)
        products = np.ones((len(coordinates), 1))
        for coordinate, coefficient, parent in zip(self.coordinate, self.coefficient, self.parent, strict=True):
            products = products[:, parent] * coordinates[:, coordinate]
            value += products @ coefficient
        return value


@dataclass(frozen=True, slots=True)
class WidePolynomial:
    """The tree, and the error at each training point as predicted from the others (points,)."""

    tree: PowerTree
    leave_one_out: FloatArray


def fit_wide(coordinates: FloatArray, values: FloatArray) -> WidePolynomial:
    """The likeliest polynomial of degree 4 through `values` (points,) at `coordinates` (points, dimensions).

    Raises UnfinishedError where a value is not finite or where there are too few points.
    """
    if not (np.all(np.isfinite(coordinates)) and np.all(np.isfinite(values))):
        raise UnfinishedError("a training run gave a value that is not finite")
    points, dimensions = coordinates.shape
    mean = float(np.mean(values))
    centred = values - mean
    if dimensions == 0 or not np.any(centred):
        return WidePolynomial(PowerTree(mean, (), (), ()), read_only(np.zeros(points)))
    if points < 2 * dimensions + FEWEST_SPARE_RUNS:
        raise UnfinishedError(f"{points} training runs are too few for {dimensions} coordinates")
    exponents = full_exponents(dimensions, DEGREE)
    basis = _basis(coordinates, exponents)
    prior = _likeliest(basis, exponents, centred)
    deviations = prior.deviations(exponents, _slopes(basis, exponents, centred))
    weighted = basis * deviations
    size, vectors = _spectrum(weighted, prior.noise)
    inverse = (vectors / size) @ vectors.T
    solved = inverse @ centred
    coefficients = deviations * (weighted.T @ solved)
    coefficients[0] += mean
    return WidePolynomial(_tree(_powers(exponents, coefficients), dimensions), read_only(solved / np.diag(inverse)))


def _basis(coordinates: FloatArray, exponents: IntArray) -> FloatArray:
    """Products of Legendre polynomials, (points, terms)."""
    single = np.polynomial.legendre.legvander(coordinates, DEGREE)  # (points, dimensions, degrees)
    basis = np.ones((len(coordinates), len(exponents)))
    for dimension in range(coordinates.shape[1]):
        present = np.flatnonzero(exponents[:, dimension])
        basis[:, present] *= single[:, dimension, exponents[present, dimension]]
    return basis


def _slopes(basis: FloatArray, exponents: IntArray, centred: FloatArray) -> FloatArray:
    """How much each coordinate moves the values by itself, (dimensions,): the larger of slope and bend."""
    plain = np.sum(exponents > 0, axis=1) <= 1
    straight, bent = (np.flatnonzero(plain & (np.sum(exponents, axis=1) == degree)) for degree in (1, 2))
    columns = np.concatenate([[0], straight, bent])
    effects = np.abs(np.linalg.lstsq(basis[:, columns], centred)[0][1:])
    return np.asarray(np.maximum(effects[: straight.size], effects[straight.size :]), dtype=np.float64)


def _likeliest(basis: FloatArray, exponents: IntArray, centred: FloatArray) -> Prior:
    """The prior of largest marginal likelihood; its overall scale is the likeliest one in each case."""
    slopes = _slopes(basis, exponents, centred)
    best, chosen = np.inf, Prior(DECAYS[0], FLOORS[0], NOISES[0])
    for decay, floor in itertools.product(DECAYS, FLOORS):
        size, vectors = _spectrum(basis * Prior(decay, floor, 0.0).deviations(exponents, slopes), 0.0)
        squares = (vectors.T @ centred) ** 2
        for noise in NOISES:
            noisy = size + noise * np.max(size)
            unlikely = len(centred) * np.log(np.mean(squares / noisy)) + np.sum(np.log(noisy))
            if unlikely < best:
                best, chosen = float(unlikely), Prior(decay, floor, noise)
    return chosen


def _spectrum(weighted: FloatArray, noise: float) -> tuple[FloatArray, FloatArray]:
    """Eigenvalues, noise included, and eigenvectors of the covariance of the values at the points."""
    size, vectors = np.linalg.eigh(weighted @ weighted.T)
    return np.maximum(size, 0.0) + noise * np.max(size), vectors


Product = tuple[int, ...]  # its factors, by number of the coordinate, falling


def _powers(exponents: IntArray, coefficients: FloatArray) -> dict[Product, float]:
    """The same polynomial as factors of plain products."""
    single = [np.polynomial.legendre.leg2poly([0.0] * degree + [1.0]) for degree in range(DEGREE + 1)]
    found: dict[Product, float] = {}
    for row, coefficient in zip(exponents, coefficients, strict=True):
        active = [int(dimension) for dimension in np.flatnonzero(row)[::-1]]
        for powers in itertools.product(*(np.flatnonzero(single[row[dimension]]) for dimension in active)):
            factor = float(coefficient)
            for dimension, power in zip(active, powers, strict=True):
                factor *= float(single[row[dimension]][power])
            product = tuple(dimension for dimension, power in zip(active, powers, strict=True) for _ in range(power))
            found[product] = found.get(product, 0.0) + factor
    return found


def _tree(powers: dict[Product, float], dimensions: int) -> PowerTree:
    """The products with their parents, which are there even where they have no factor of their own."""
    kept = {product for product, factor in powers.items() if product and abs(factor) >= LEAST}
    kept |= {product[:length] for product in kept for length in range(1, len(product))}
    levels: list[list[Product]] = [[()]]
    coordinate, coefficient, parent = [], [], []
    for length in range(1, DEGREE + 1):
        place = {product: number for number, product in enumerate(levels[-1])}
        level = sorted((product for product in kept if len(product) == length),
                       key=lambda product: (place[product[:-1]], product[-1]))
        if not level:
            break
        levels.append(level)
        coordinate.append(_whole([product[-1] for product in level]))
        coefficient.append(read_only([powers.get(product, 0.0) for product in level]))
        parent.append(_whole([place[product[:-1]] for product in level]))
    assert all(0 <= number < dimensions for level in coordinate for number in level)
    return PowerTree(powers.get((), 0.0), tuple(coordinate), tuple(coefficient), tuple(parent))


def _whole(values: list[int]) -> IntArray:
    array = np.array(values, dtype=np.int64)
    array.setflags(write=False)
    return array
