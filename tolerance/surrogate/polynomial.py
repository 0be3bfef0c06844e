"""A polynomial in several coordinates, fitted by least squares to smooth values: here ln Z of one line.

The basis is products of Legendre polynomials, orthogonal on the box [-1, 1] that the training points fill, of total
degree up to 3. Leave-one-out errors come from the hat matrix, without refits.
Source: B. Sudret, "Global sensitivity analysis using polynomial chaos expansions", Reliability Engineering & System
Safety, volume 93, pages 964-979, 2008.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np
from scipy.linalg import solve_triangular

from tolerance.arrays import FloatArray, IntArray, read_only
from tolerance.errors import UnfinishedError

HIGHEST_DEGREE = 3
RUNS_PER_TERM = 1.5
FEWEST_SPARE_RUNS = 10  # above the number of terms, where there are few
BLOCK_ROWS = 4096  # points evaluated at a time: what they need stays in the cache
WORST_CONDITION = 1e8


def count_terms(dimensions: int, degree: int) -> int:
    """Number of terms of a full polynomial of total `degree` in `dimensions` coordinates."""
    return math.comb(dimensions + degree, degree)


def count_runs(dimensions: int, degree: int) -> int:
    """Number of training runs for a polynomial of this degree: 1.5 a term, at least 10 more than terms.

    Without any coordinate a single run says all.
    """
    if dimensions == 0:
        return 1
    terms = count_terms(dimensions, degree)
    return max(math.ceil(RUNS_PER_TERM * terms), terms + FEWEST_SPARE_RUNS)


@dataclass(frozen=True, slots=True)
class PowerForm:
    """A polynomial of degree up to 3 as constant + x . (linear + quadratic x + cubic (products of pairs)).

    linear (d,), quadratic (d, d) lower triangle, cubic (d, d (d + 1) / 2): for coordinate i the factors of x_j x_k,
    k <= j <= i, in the order of numpy's lower triangle; None where the degree is below 3.
    """

    constant: float
    linear: FloatArray
    quadratic: FloatArray
    cubic: FloatArray | None

    def evaluate(self, coordinates: FloatArray) -> FloatArray:
        """Values at `coordinates` (points, dimensions), in blocks; result (points,)."""
        values = np.empty(len(coordinates))
        first, second = np.tril_indices(coordinates.shape[1])
        for start in range(0, len(coordinates), BLOCK_ROWS):
            x = np.ascontiguousarray(coordinates[start : start + BLOCK_ROWS].T)
            slope = self.quadratic @ x
            slope += self.linear[:, np.newaxis]
            if self.cubic is not None:
                slope += self.cubic @ (x[first] * x[second])
            values[start : start + BLOCK_ROWS] = np.einsum("ij,ij->j", slope, x)
        values += self.constant
        return values


@dataclass(frozen=True, slots=True)
class Polynomial:
    """sum of coefficients x products of Legendre polynomials.

    exponents : (terms, dimensions) degree of each term in each coordinate.
    coefficients : (terms,).
    leave_one_out : root mean square error [unit of the values] at the training points, each predicted from the
        others; the training points fill the box evenly, so that over draws the error is smaller.
    """

    degree: int
    exponents: IntArray
    coefficients: FloatArray
    leave_one_out: float
    runs: int
    powers: PowerForm

    @property
    def terms(self) -> int:
        return len(self.coefficients)

    def evaluate(self, coordinates: FloatArray) -> FloatArray:
        """Values at `coordinates` (points, dimensions); result (points,)."""
        return self.powers.evaluate(coordinates)


def fit(coordinates: FloatArray, values: FloatArray, *, degree: int) -> Polynomial:
    """Least-squares polynomial through `values` (points,) at `coordinates` (points, dimensions).

    Raises UnfinishedError where a value is not finite, where there are fewer points than terms, or where the points
    do not determine the polynomial. Range of degree: 1 to 3.
    Source of the leave-one-out error from the hat matrix: D. M. Allen, "The relationship between variable selection
    and data augmentation and a method for prediction", Technometrics, volume 16, pages 125-127, 1974.
    """
    if not (np.all(np.isfinite(coordinates)) and np.all(np.isfinite(values))):
        raise UnfinishedError("a training run gave a value that is not finite")
    exponents = full_exponents(coordinates.shape[1], degree)
    points, terms = len(values), len(exponents)
    if coordinates.shape[1] == 0:
        return polynomial(degree, exponents, read_only([np.mean(values)]), runs=points)
    if points <= terms:
        raise UnfinishedError(f"{points} training runs are too few for a polynomial of {terms} terms")
    orthogonal, triangular = np.linalg.qr(_basis(coordinates, exponents))
    if np.linalg.cond(triangular) > WORST_CONDITION:
        raise UnfinishedError("the training runs do not determine the polynomial")
    coefficients = solve_triangular(triangular, orthogonal.T @ values)
    leverage = np.einsum("ij,ij->i", orthogonal, orthogonal)
    residual = values - orthogonal @ (orthogonal.T @ values)
    leave_one_out = float(np.sqrt(np.mean((residual / (1.0 - leverage)) ** 2)))
    return polynomial(degree, exponents, read_only(coefficients), leave_one_out=leave_one_out, runs=points)


def polynomial(
    degree: int, exponents: IntArray, coefficients: FloatArray, *, leave_one_out: float = 0.0, runs: int = 0
) -> Polynomial:
    """The polynomial of these terms, ready to be evaluated."""
    powers = _power_form(degree, exponents, coefficients)
    return Polynomial(degree, exponents, coefficients, leave_one_out, runs, powers)


def full_exponents(dimensions: int, degree: int) -> IntArray:
    """Every combination of degrees with a sum up to `degree`, shape (terms, dimensions), lower sums first."""
    rows = []
    for total in range(degree + 1):
        for chosen in itertools.combinations_with_replacement(range(dimensions), total):
            rows.append(np.bincount(np.array(chosen, dtype=np.int64), minlength=dimensions))
    exponents = np.array(rows, dtype=np.int64).reshape(len(rows), dimensions)
    exponents.setflags(write=False)
    return exponents


def legendre(coordinates: FloatArray) -> FloatArray:
    """Legendre polynomials of degree 0 to 3 at `coordinates` (...); result (4, ...)."""
    x = coordinates
    return np.stack([np.ones_like(x), x, 1.5 * x**2 - 0.5, 2.5 * x**3 - 1.5 * x])


def _basis(coordinates: FloatArray, exponents: IntArray) -> FloatArray:
    """Value of each term at each point, shape (points, terms)."""
    single = legendre(coordinates)
    basis = np.ones((len(coordinates), len(exponents)))
    for dimension in range(coordinates.shape[1]):
        present = np.flatnonzero(exponents[:, dimension])
        basis[:, present] *= single[exponents[present, dimension], :, dimension].T
    return basis


_POWERS = (  # Legendre polynomials in powers of x: degree -> ((power, factor), ...)
    ((0, 1.0),),
    ((1, 1.0),),
    ((0, -0.5), (2, 1.5)),
    ((1, -1.5), (3, 2.5)),
)


def _power_form(degree: int, exponents: IntArray, coefficients: FloatArray) -> PowerForm:
    dimensions = exponents.shape[1]
    constant, linear = 0.0, np.zeros(dimensions)
    quadratic = np.zeros((dimensions, dimensions))
    cubic = np.zeros((dimensions, dimensions * (dimensions + 1) // 2))
    for row, coefficient in zip(exponents, coefficients, strict=True):
        active = np.flatnonzero(row)
        for powers in itertools.product(*(_POWERS[row[dimension]] for dimension in active)):
            factor = coefficient * math.prod(factor for _, factor in powers)
            chosen = [int(dimension) for dimension, (power, _) in zip(active, powers, strict=True)
                      for _ in range(power)]
            chosen.reverse()  # largest first
            match chosen:
                case []:
                    constant += factor
                case [one]:
                    linear[one] += factor
                case [one, two]:
                    quadratic[one, two] += factor
                case [one, two, three]:
                    cubic[one, two * (two + 1) // 2 + three] += factor
    return PowerForm(float(constant), linear, quadratic, cubic if degree > 2 else None)
