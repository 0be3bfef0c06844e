"""A cubic polynomial in several coordinates, fitted to smooth values: here ln Z of one line.

The basis is products of Legendre polynomials, orthogonal on the box [-1, 1] that the training points fill, of total
degree up to 3: more terms than points. What the points leave open is decided by a prior of independent normal
coefficients, smaller the higher the degree and the less the coordinate moves the values at all; its sizes are those
under which the values are likeliest. Leave-one-out errors and the standard error of a prediction follow without
refits. Measured on twenty lines over a box of 1.3 tolerances with 60 points, root mean square over draws: 0.4 of the
error of the least-squares quadratic; a fourth degree gains nothing.
Source: C. E. Rasmussen and C. K. I. Williams, "Gaussian Processes for Machine Learning", MIT Press, 2006: equations
2.11 and 2.12 (the fit in weight space), 5.8 (marginal likelihood), 5.10 to 5.12 (leave-one-out).
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, IntArray, read_only
from tolerance.errors import UnfinishedError

DEGREE = 3
BLOCK_ROWS = 4096  # points evaluated at a time: what they need stays in the cache
DECAYS = (0.05, 0.1, 0.2, 0.4, 0.8)  # size of a coefficient over that of one degree less
FLOORS = (0.03, 0.1, 0.3, 1.0)  # least size of a coordinate's coefficients over that of the strongest one's
NOISES = (1e-11, 1e-10, 1e-9, 1e-8, 1e-7)  # variance of what a cubic cannot follow, over that of the values
FEWEST_SPARE_RUNS = 4  # above twice the number of coordinates


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
class Prior:
    """What is expected of the coefficients beforehand: each normal about nought.

    decay, floor : see DECAYS and FLOORS.  noise : see NOISES.
    """

    decay: float
    floor: float
    noise: float

    def deviations(self, exponents: IntArray, slopes: FloatArray) -> FloatArray:
        """Relative standard deviation of each coefficient (terms,); slopes (dimensions,): how
        much each coordinate moves the values."""
        strongest = float(np.max(slopes, initial=0.0))
        if strongest <= 0.0:
            return np.asarray(self.decay ** np.sum(exponents, axis=1), dtype=np.float64)
        sizes = self.decay * np.maximum(slopes / strongest, self.floor)
        return np.asarray(np.prod(sizes**exponents, axis=1), dtype=np.float64)


@dataclass(frozen=True, slots=True)
class Polynomial:
    """sum of coefficients x products of Legendre polynomials.

    exponents : (terms, dimensions) degree of each term in each coordinate.  coefficients : (terms,).
    leave_one_out, leave_one_out_doubt : (points,) error at each training point, predicted from the others, and its
        standard error.
    covariance : (terms, terms) of the coefficients, after the fit.  noise : variance of what they cannot follow.
    """

    exponents: IntArray
    coefficients: FloatArray
    leave_one_out: FloatArray
    leave_one_out_doubt: FloatArray
    covariance: FloatArray
    noise: float
    prior: Prior | None
    powers: PowerForm

    @property
    def terms(self) -> int:
        return len(self.coefficients)

    def evaluate(self, coordinates: FloatArray) -> FloatArray:
        """Values at `coordinates` (points, dimensions); result (points,)."""
        return self.powers.evaluate(coordinates)

    def doubt(self, coordinates: FloatArray) -> FloatArray:
        """Standard error of the values at `coordinates` (points, dimensions); result (points,)."""
        basis = _basis(coordinates, self.exponents)
        variance = np.einsum("ij,ij->i", basis @ self.covariance, basis)
        return np.asarray(np.sqrt(np.maximum(variance, 0.0) + self.noise), dtype=np.float64)


def fit(coordinates: FloatArray, values: FloatArray, *, prior: Prior | None = None) -> Polynomial:
    """The likeliest cubic polynomial through `values` (points,) at `coordinates` (points, dimensions).

    prior : absent, the one of DECAYS, FLOORS and NOISES under which the values are likeliest.
    Raises UnfinishedError where a value is not finite or where there are too few points.
    """
    if not (np.all(np.isfinite(coordinates)) and np.all(np.isfinite(values))):
        raise UnfinishedError("a training run gave a value that is not finite")
    points, dimensions = coordinates.shape
    mean = float(np.mean(values))
    centred = values - mean
    if dimensions == 0 or not np.any(centred):
        return polynomial(full_exponents(dimensions, 0), read_only([mean]), leave_one_out=read_only(np.zeros(points)),
                          leave_one_out_doubt=read_only(np.ones(points)))
    if points < 2 * dimensions + FEWEST_SPARE_RUNS:
        raise UnfinishedError(f"{points} training runs are too few for {dimensions} coordinates")
    exponents = full_exponents(dimensions, DEGREE)
    basis = _basis(coordinates, exponents)
    slopes = _slopes(basis, exponents, centred)
    chosen = _likeliest(basis, exponents, slopes, centred) if prior is None else prior
    return _posterior(basis, exponents, slopes, centred, mean, chosen)


def _posterior(
    basis: FloatArray, exponents: IntArray, slopes: FloatArray, centred: FloatArray, mean: float, prior: Prior,
) -> Polynomial:
    deviations = prior.deviations(exponents, slopes)
    weighted = basis * deviations
    size, vectors = _spectrum(weighted, prior.noise)
    scale = float(np.mean((vectors.T @ centred) ** 2 / size))
    inverse = (vectors / size) @ vectors.T
    solved, own = inverse @ centred, np.diag(inverse)
    coefficients = deviations * (weighted.T @ solved)
    coefficients[0] += mean
    half = (vectors / np.sqrt(size)).T @ weighted
    covariance = scale * (np.diag(deviations**2) - deviations[:, np.newaxis] * (half.T @ half) * deviations)
    return polynomial(
        exponents, read_only(coefficients), leave_one_out=read_only(solved / own),
        leave_one_out_doubt=read_only(np.sqrt(scale / own)), covariance=read_only(covariance),
        noise=scale * float(prior.noise * np.max(size)), prior=prior,
    )


def _slopes(basis: FloatArray, exponents: IntArray, centred: FloatArray) -> FloatArray:
    """How much each coordinate moves the values by itself, (dimensions,): the larger of slope and bend."""
    plain = np.sum(exponents > 0, axis=1) <= 1
    straight, bent = (np.flatnonzero(plain & (np.sum(exponents, axis=1) == degree)) for degree in (1, 2))
    columns = np.concatenate([[0], straight, bent])
    effects = np.abs(np.linalg.lstsq(basis[:, columns], centred)[0][1:])
    return np.asarray(np.maximum(effects[: straight.size], effects[straight.size :]), dtype=np.float64)


def _likeliest(basis: FloatArray, exponents: IntArray, slopes: FloatArray, centred: FloatArray) -> Prior:
    """The prior of largest marginal likelihood; its overall scale is the likeliest one in each case."""
    best, chosen = np.inf, Prior(DECAYS[0], FLOORS[0], NOISES[0])
    for decay, floor in itertools.product(DECAYS, FLOORS):
        weighted = basis * Prior(decay, floor, 0.0).deviations(exponents, slopes)
        size, vectors = _spectrum(weighted, 0.0)
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


def polynomial(
    exponents: IntArray, coefficients: FloatArray, *, leave_one_out: FloatArray | None = None,
    leave_one_out_doubt: FloatArray | None = None, covariance: FloatArray | None = None, noise: float = 0.0,
    prior: Prior | None = None,
) -> Polynomial:
    """The polynomial of these terms, ready to be evaluated; without more, as if known exactly."""
    terms = len(coefficients)
    return Polynomial(
        exponents, coefficients, read_only([0.0]) if leave_one_out is None else leave_one_out,
        read_only([1.0]) if leave_one_out_doubt is None else leave_one_out_doubt,
        read_only(np.zeros((terms, terms))) if covariance is None else covariance, noise, prior,
        _power_form(exponents, coefficients))


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


def _power_form(exponents: IntArray, coefficients: FloatArray) -> PowerForm:
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
    return PowerForm(float(constant), linear, quadratic, cubic if np.any(cubic) else None)
