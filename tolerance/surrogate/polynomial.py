"""A cubic polynomial in several coordinates, fitted to smooth values: here ln Z of one line.

The basis is products of Legendre polynomials, orthogonal on the box [-1, 1] that the training points fill, of total
degree up to 3: more terms than points. What the points leave open is decided by a prior of independent normal
coefficients, smaller the higher the degree and the less the coordinate moves the values at all; its sizes are those
under which the values are likeliest. Leave-one-out errors and the standard error of a prediction follow without
refits. Where partial derivatives are known at a point, each is one equation more, and the point is left out with all
of its equations. Measured on 32 lines, root mean square over draws: 24 points with derivatives have a fifth of the
error of 60 without; a fourth degree gains nothing.
Sources: C. E. Rasmussen and C. K. I. Williams, "Gaussian Processes for Machine Learning", MIT Press, 2006: equations
2.11 and 2.12 (the fit in weight space), 5.8 (marginal likelihood), 5.10 to 5.12 (leave-one-out), section 9.4
(derivatives as observations).
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_solve, cholesky, solve_triangular

from tolerance.arrays import FloatArray, IntArray, read_only
from tolerance.errors import UnfinishedError

DEGREE = 3
BLOCK_ROWS = 4096  # points evaluated at a time: what they need stays in the cache
DECAYS = (0.05, 0.1, 0.2, 0.4, 0.8)  # size of a coefficient over that of one degree less
FLOORS = (0.03, 0.1, 0.3, 1.0)  # least size of a coordinate's coefficients over that of the strongest one's
NOISES = (1e-11, 1e-10, 1e-9, 1e-8, 1e-7)  # variance of what a cubic cannot follow, over all of the values
FIRST_TRIED = (2, 2, 1)  # of decays, floors and noises
FEWEST_SPARE_RUNS = 4  # equations above twice the number of coordinates
SLOPE_WEIGHT = 0.1  # of a derivative against a value: what a cubic cannot follow is steeper than it is large


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


@dataclass(frozen=True, slots=True)
class Slopes:
    """Partial derivatives of the values by the coordinates, at some of the training points.

    points : (known,) which ones.  values : (known, dimensions).
    """

    points: IntArray
    values: FloatArray


def fit(
    coordinates: FloatArray, values: FloatArray, *, slopes: Slopes | None = None, prior: Prior | None = None,
) -> Polynomial:
    """The likeliest cubic polynomial through `values` (points,) at `coordinates` (points, dimensions).

    slopes : what is known of its derivatives.  prior : absent, a likely one of DECAYS, FLOORS and NOISES.
    Raises UnfinishedError where a value is not finite or where there are too few points.
    """
    known = () if slopes is None else (slopes.values,)
    if not all(np.all(np.isfinite(given)) for given in (coordinates, values, *known)):
        raise UnfinishedError("a training run gave a value that is not finite")
    points, dimensions = coordinates.shape
    mean = float(np.mean(values))
    centred = values - mean
    if dimensions == 0 or not np.any(centred):
        return polynomial(full_exponents(dimensions, 0), read_only([mean]), leave_one_out=read_only(np.zeros(points)),
                          leave_one_out_doubt=read_only(np.ones(points)))
    exponents = full_exponents(dimensions, DEGREE)
    equations = _equations(coordinates, centred, slopes, exponents)
    if len(equations.wanted) < 2 * dimensions + FEWEST_SPARE_RUNS:
        raise UnfinishedError(f"{points} training runs are too few for {dimensions} coordinates")
    effects = _effects(equations, exponents, slopes)
    chosen = _likeliest(equations, exponents, effects) if prior is None else prior
    return _posterior(equations, exponents, effects, mean, chosen)


@dataclass(frozen=True, slots=True)
class _Equations:
    """Equations of the fit: matrix (equations, terms) @ coefficients = wanted; those of values come first.

    sloped : points whose derivatives are known.  of_sloped : their equations, (sloped, 1 + dimensions).
    """

    matrix: FloatArray
    wanted: FloatArray
    points: int
    sloped: IntArray
    of_sloped: IntArray


def _equations(
    coordinates: FloatArray, centred: FloatArray, slopes: Slopes | None, exponents: IntArray,
) -> _Equations:
    basis = _basis(coordinates, exponents)
    points, dimensions = coordinates.shape
    if slopes is None:
        nothing = np.empty(0, dtype=np.int64)
        return _Equations(basis, centred, points, nothing, nothing.reshape(0, 1 + dimensions))
    steep = _basis_slopes(coordinates[slopes.points], exponents).reshape(-1, len(exponents))
    own = points + np.arange(len(steep)).reshape(-1, dimensions)
    return _Equations(
        np.concatenate([basis, SLOPE_WEIGHT * steep]), np.concatenate([centred, SLOPE_WEIGHT * slopes.values.ravel()]),
        points, slopes.points, np.concatenate([slopes.points[:, np.newaxis], own], axis=1),
    )


def _posterior(
    equations: _Equations, exponents: IntArray, effects: FloatArray, mean: float, prior: Prior,
) -> Polynomial:
    deviations = prior.deviations(exponents, effects)
    weighted = equations.matrix * deviations
    expected = weighted @ weighted.T
    noise = prior.noise * np.trace(expected)
    root = cholesky(expected + noise * np.eye(len(expected)), lower=True)
    solved, inverse = (cho_solve((root, True), wanted) for wanted in (equations.wanted, np.eye(len(expected))))
    half = solve_triangular(root, weighted, lower=True)
    scale = float(np.mean(equations.wanted * solved))
    coefficients = deviations * (weighted.T @ solved)
    coefficients[0] += mean
    covariance = scale * (np.diag(deviations**2) - deviations[:, np.newaxis] * (half.T @ half) * deviations)
    left_out, doubt = _left_out(equations, inverse, solved)
    return polynomial(
        exponents, read_only(coefficients), leave_one_out=read_only(left_out),
        leave_one_out_doubt=read_only(np.sqrt(scale) * doubt), covariance=read_only(covariance),
        noise=scale * float(noise), prior=prior,
    )


def _left_out(equations: _Equations, inverse: FloatArray, solved: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Error at each point, predicted from the others, and its standard error before scaling, both (points,)."""
    own = np.diag(inverse)[: equations.points]
    errors, doubt = solved[: equations.points] / own, np.sqrt(1.0 / own)
    if equations.sloped.size:
        rows = equations.of_sloped
        blocks = np.linalg.inv(inverse[rows[:, :, np.newaxis], rows[:, np.newaxis, :]])
        errors[equations.sloped] = np.einsum("ij,ij->i", blocks[:, 0], solved[rows])
        doubt[equations.sloped] = np.sqrt(blocks[:, 0, 0])
    return errors, doubt


def _effects(equations: _Equations, exponents: IntArray, slopes: Slopes | None) -> FloatArray:
    """How much each coordinate moves the values by itself, (dimensions,): its slope, or the larger of slope and bend
    where slopes are not known."""
    if slopes is not None and slopes.points.size:
        return np.asarray(np.sqrt(np.mean(slopes.values**2, axis=0)), dtype=np.float64)
    plain = np.sum(exponents > 0, axis=1) <= 1
    straight, bent = (np.flatnonzero(plain & (np.sum(exponents, axis=1) == degree)) for degree in (1, 2))
    columns = np.concatenate([[0], straight, bent])
    effects = np.abs(np.linalg.lstsq(equations.matrix[:, columns], equations.wanted)[0][1:])
    return np.asarray(np.maximum(effects[: straight.size], effects[straight.size :]), dtype=np.float64)


def _likeliest(equations: _Equations, exponents: IntArray, effects: FloatArray) -> Prior:
    """A prior of large marginal likelihood, found by steps from one to its neighbours; its overall scale is the
    likeliest one in each case."""
    seen: dict[tuple[int, int, int], float] = {}
    expected: dict[tuple[int, int], FloatArray] = {}

    def unlikely(at: tuple[int, int, int]) -> float:
        if at not in seen:
            decay, floor, noise = at
            if (decay, floor) not in expected:
                weighted = equations.matrix * Prior(DECAYS[decay], FLOORS[floor], 0.0).deviations(exponents, effects)
                expected[decay, floor] = weighted @ weighted.T
            own = expected[decay, floor]
            root = cholesky(own + NOISES[noise] * np.trace(own) * np.eye(len(own)), lower=True)
            squares = solve_triangular(root, equations.wanted, lower=True) ** 2
            seen[at] = float(len(own) * np.log(np.mean(squares)) + 2.0 * np.sum(np.log(np.diag(root))))
        return seen[at]

    best, better = FIRST_TRIED, True
    while better:
        around = [tried for axis in range(3) for step in (-1, 1) if (tried := _moved(best, axis, step)) is not None]
        nearest = min(around, key=unlikely)
        better = unlikely(nearest) < unlikely(best)
        best = nearest if better else best
    return Prior(DECAYS[best[0]], FLOORS[best[1]], NOISES[best[2]])


def _moved(at: tuple[int, int, int], axis: int, step: int) -> tuple[int, int, int] | None:
    """A neighbour in the grid of priors; None beyond its ends."""
    decay, floor, noise = (place + step * (number == axis) for number, place in enumerate(at))
    inside = 0 <= decay < len(DECAYS) and 0 <= floor < len(FLOORS) and 0 <= noise < len(NOISES)
    return (decay, floor, noise) if inside else None


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


def _basis_slopes(coordinates: FloatArray, exponents: IntArray) -> FloatArray:
    """Partial derivatives of each term at each point, shape (points, dimensions, terms)."""
    x = coordinates
    single, steep = legendre(x), np.stack([np.zeros_like(x), np.ones_like(x), 3.0 * x, 7.5 * x**2 - 1.5])
    factors = np.stack([single[exponents[:, axis], :, axis].T for axis in range(x.shape[1])], axis=1)
    slopes = np.empty_like(factors)
    for axis in range(x.shape[1]):
        others = np.prod(np.delete(factors, axis, axis=1), axis=1)
        slopes[:, axis] = steep[exponents[:, axis], :, axis].T * others
    return slopes


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
