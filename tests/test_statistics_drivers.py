"""Sobol' indices of independent variables: standard test functions, closed forms, SALib itself and chaospy."""

from __future__ import annotations

import math
from collections.abc import Callable

import chaospy
import numpy as np
import pytest
from SALib.analyze import sobol as salib_analyze
from SALib.sample import sobol as salib_sample
from scipy.special import erf

from tests.process_examples import process, variable
from tolerance.arrays import FloatArray
from tolerance.process.draws import Process, ProcessDraws
from tolerance.process.laws import Shape
from tolerance.statistics.analytic import analytic_indices
from tolerance.statistics.drivers import Model, saltelli_values, sobol_indices
from tolerance.statistics.estimates import interval_of
from tolerance.statistics.ranking import model_of, rank_drivers
from tolerance.surrogate.coordinates import Coordinates
from tolerance.surrogate.polynomial import count_runs, full_exponents, polynomial
from tolerance.surrogate.prediction import Predictor, fit_predictor


def from_minus_one_to_one(_: int, germ: FloatArray) -> FloatArray:
    return np.asarray(erf(germ * np.sqrt(0.5)), dtype=np.float64)


def germ_itself(_: int, germ: FloatArray) -> FloatArray:
    return germ


def model(dimensions: int, response: Callable[[FloatArray], FloatArray], coordinate: object = germ_itself) -> Model:
    names = tuple(f"variable {number}" for number in range(dimensions))
    assert callable(coordinate)
    return Model(names, coordinate, response, np.eye(dimensions))


def ishigami(x: FloatArray) -> FloatArray:
    one, two, three = np.pi * x.T
    return np.asarray(np.sin(one) + 7.0 * np.sin(two) ** 2 + 0.1 * three**4 * np.sin(one), dtype=np.float64)


WEIGHTS = np.array([0.0, 1.0, 4.5, 9.0, 99.0, 99.0, 99.0, 99.0])


def g_function(x: FloatArray) -> FloatArray:
    return np.asarray(np.prod((np.abs(2.0 * x) + WEIGHTS) / (1.0 + WEIGHTS), axis=1), dtype=np.float64)


LOG_DEVIATIONS = np.array([0.033, 0.025, 0.016, 0.0, 0.006])


def product(x: FloatArray) -> FloatArray:
    return np.asarray(50.0 * np.exp(x @ LOG_DEVIATIONS), dtype=np.float64)


PARTS = np.expm1(LOG_DEVIATIONS**2) / np.expm1(np.sum(LOG_DEVIATIONS**2))
TOTALS = 1.0 - np.expm1(np.sum(LOG_DEVIATIONS**2) - LOG_DEVIATIONS**2) / np.expm1(np.sum(LOG_DEVIATIONS**2))

CASES = [
    (model(3, ishigami, from_minus_one_to_one), [0.313905, 0.442411, 0.0], [0.557589, 0.442411, 0.243684], 0.02,
     "T. Ishigami and T. Homma, ISUMA 1990, with a = 7, b = 0.1: exact variances"),
    (model(8, g_function, from_minus_one_to_one),
     [0.716192, 0.179048, 0.023676, 0.007162] + 4 * [0.000072],
     [0.787144, 0.242198, 0.034317, 0.010460] + 4 * [0.000105], 0.01,
     "I. M. Sobol', g function, a = (0, 1, 4.5, 9, 99, 99, 99, 99): exact variances"),
    (model(5, product), PARTS.tolist(), TOTALS.tolist(), 0.003, "product of lognormals: exact"),
]


@pytest.mark.parametrize(("case", "first", "total", "allowed", "source"), CASES)
def test_indices_of_known_functions(
    case: Model, first: list[float], total: list[float], allowed: float, source: str,
) -> None:
    indices = sobol_indices(case, chance=np.random.default_rng(0))
    for estimates, exact in ((indices.first, first), (indices.total, total)):
        error = np.abs(np.mean(estimates, axis=0) - exact)
        standard_error = np.std(estimates, axis=0, ddof=1) / np.sqrt(len(estimates))
        assert np.all(error <= 5.0 * standard_error + 1e-12), source  # 5: of Student's t with 7 degrees of freedom
        assert np.max(error) <= allowed, source


def test_intervals_hold_the_exact_indices_in_95_of_100_runs() -> None:
    case, first, total, _, _ = CASES[2]
    moving = np.flatnonzero(LOG_DEVIATIONS)
    held = count = 0
    for seed in range(60):
        indices = sobol_indices(case, chance=np.random.default_rng(seed), points=256)
        for position in moving:
            for estimates, exact in ((indices.first, first), (indices.total, total)):
                interval = interval_of(estimates[:, position])
                held += interval.low <= exact[position] <= interval.high
                count += 1
    # indices of one run hang together, so that 60 runs count, not 480 intervals
    assert abs(held / count - 0.95) < 4.0 * np.sqrt(0.95 * 0.05 / 60), held / count


def test_a_variable_that_does_not_reach_the_response_has_nought_exactly() -> None:
    indices = sobol_indices(CASES[2][0], chance=np.random.default_rng(1))
    assert np.all(indices.first[:, 3] == 0.0)
    assert np.all(indices.total[:, 3] == 0.0)


def test_a_response_that_nothing_moves_has_nought() -> None:
    indices = sobol_indices(model(2, lambda x: np.full(len(x), 50.0)), chance=np.random.default_rng(1), points=64)
    assert not np.any(indices.first)
    assert not np.any(indices.total)


def test_design_and_estimates_are_those_of_salib() -> None:
    """SALib's own sampling and analysis (general library), on the points moved to the middle of their cells."""
    case = CASES[0][0]
    problem = {"num_vars": 3, "names": list(case.names), "bounds": [[0.0, 1.0]] * 3}
    sample = salib_sample.sample(problem, 512, calc_second_order=False, seed=np.random.default_rng(7))
    values = ishigami(2.0 * (sample + 2.0**-31) - 1.0)
    base, other, mixed = saltelli_values(case, points=512, chance=np.random.default_rng(7))
    expected = salib_analyze.separate_output_values(values, 3, 512, False)
    assert base == pytest.approx(expected[0], abs=1e-9)
    assert other == pytest.approx(expected[1], abs=1e-9)
    assert mixed == pytest.approx(expected[2], abs=1e-9)
    library = salib_analyze.analyze(problem, values, calc_second_order=False, num_resamples=2, seed=1)
    generator = np.random.default_rng(7)
    ours = sobol_indices(case, chance=_Always(generator), points=512, replicates=1)  # type: ignore[arg-type]
    # SALib centres on the mean of all its values, we on that of A and B: a difference of the order of 1 / points^2
    assert ours.first[0] == pytest.approx(library["S1"], abs=1e-5)
    assert ours.total[0] == pytest.approx(library["ST"], abs=1e-5)


class _Always:
    """A source of chance whose only stream is the one given."""

    def __init__(self, generator: np.random.Generator) -> None:
        self.generator = generator

    def spawn(self, count: int) -> list[np.random.Generator]:
        return [self.generator] * count


def test_seed_nought_is_a_seed() -> None:
    first, again, other = (sobol_indices(CASES[0][0], chance=np.random.default_rng(seed), points=64).total
                           for seed in (0, 0, 1))
    assert np.array_equal(first, again)
    assert not np.array_equal(first, other)


# --- the polynomial's own indices -----------------------------------------------------------------------------------

@pytest.mark.parametrize("degree", [2, 3])
def test_analytic_indices_agree_with_chaospy(degree: int) -> None:
    """chaospy (general library): the same polynomial of a uniform, a normal and a triangular variable."""
    exponents = full_exponents(3, degree)
    coefficients = np.random.default_rng(degree).normal(size=len(exponents))
    ours = polynomial(degree, exponents, coefficients)

    def triangle(germ: FloatArray) -> FloatArray:  # inverse of the triangular distribution on [-1, 1], peak at 0
        share = 0.5 * (1.0 + erf(germ * np.sqrt(0.5)))
        lower, upper = np.sqrt(2.0 * share) - 1.0, 1.0 - np.sqrt(2.0 * (1.0 - share))
        return np.asarray(np.where(share < 0.5, lower, upper), dtype=np.float64)

    laws = (lambda germ: from_minus_one_to_one(0, germ), lambda germ: germ / 3.0, triangle)
    first, total = analytic_indices(ours, lambda position, germ: np.asarray(laws[position](germ)))

    joint = chaospy.J(chaospy.Uniform(-1, 1), chaospy.Normal(0, 1 / 3), chaospy.Triangle(-1, 0, 1))
    q = chaospy.variable(3)
    legendre = [lambda x: x**0, lambda x: x, lambda x: 1.5 * x**2 - 0.5, lambda x: 2.5 * x**3 - 1.5 * x]
    expression = sum(
        math.prod((legendre[power](q[axis]) for axis, power in enumerate(row)), start=coefficient)
        for row, coefficient in zip(exponents.tolist(), coefficients.tolist(), strict=True))
    nodes, weights = chaospy.generate_quadrature(8, joint, rule="gaussian")
    expansion = chaospy.generate_expansion(degree, joint)
    fitted, fourier = chaospy.fit_quadrature(expansion, nodes, weights, expression(*nodes), retall=True)
    assert fitted is not None
    present = np.array([term.exponents.max(axis=0) > 0 for term in expansion])
    scaled = np.asarray(fourier) ** 2 * np.array([float(chaospy.E(term**2, joint)) for term in expansion])
    alone = present.sum(axis=1) == 1
    variance = scaled[present.any(axis=1)].sum()
    assert first == pytest.approx([scaled[alone & present[:, axis]].sum() / variance for axis in range(3)], abs=1e-6)
    assert total == pytest.approx([scaled[present[:, axis]].sum() / variance for axis in range(3)], abs=1e-6)


# --- a predicted line -----------------------------------------------------------------------------------------------

NAMES = ("L1.foil", "P1.thickness", "P1.dk")
EXPONENTS = np.array([-0.3, 0.6, -0.5])


def power_law(draws: ProcessDraws) -> FloatArray:
    """An impedance [ohm] that goes with powers of what varies."""
    logarithm = sum(power * np.log(draws.value(name) / 4.0) for name, power in zip(NAMES, EXPONENTS, strict=True))
    return np.asarray(50.0 * np.exp(logarithm), dtype=np.float64)


def predictor_of(known: Process) -> Predictor:
    coordinates = Coordinates(known, (0, 1, 2), 1e-4)
    germ = coordinates.training_germs(runs=count_runs(3, 2), chance=np.random.default_rng(0))
    return fit_predictor(coordinates, germ, power_law(ProcessDraws(known, germ)), degree=2)


def test_drivers_of_a_predicted_line_are_the_closed_form_ones() -> None:
    """A product of lognormals: exact indices, ranking and names."""
    tolerances = np.array([0.10, 0.12, 0.05])
    known = process(*(variable(name, 4.0, shape="lognormal", tolerance=float(tolerance))
                      for name, tolerance in zip(NAMES, tolerances, strict=True)),
                    variable("P9.dk", 4.0, tolerance=0.5))
    squares = (EXPONENTS * np.log1p(tolerances) / 3.0) ** 2
    exact = np.expm1(squares) / np.expm1(squares.sum())
    drivers = rank_drivers(model_of(predictor_of(known)), chance=np.random.default_rng(2), with_shapley=False)
    assert [driver.variable for driver in drivers] == [NAMES[place] for place in np.argsort(-exact)]
    for driver in drivers:
        assert driver.first.value == pytest.approx(exact[NAMES.index(driver.variable)], abs=0.003)
        assert driver.total.value == pytest.approx(exact[NAMES.index(driver.variable)], abs=0.003)
        assert driver.total.low < driver.total.value < driver.total.high
        assert driver.shapley is None


@pytest.mark.parametrize("shape", ["normal", "truncated_normal", "uniform", "triangular"])
def test_sampled_indices_agree_with_the_polynomials_own(shape: Shape) -> None:
    known = process(*(variable(name, 4.0, shape=shape, tolerance=tolerance)
                      for name, tolerance in zip(NAMES, (0.10, 0.12, 0.05), strict=True)))
    predictor = predictor_of(known)
    sampled = sobol_indices(model_of(predictor), chance=np.random.default_rng(3))
    first, total = analytic_indices(predictor.polynomial, predictor.coordinates.of_one)
    assert np.mean(sampled.first, axis=0) == pytest.approx(first, abs=0.003)
    assert np.mean(sampled.total, axis=0) == pytest.approx(total, abs=0.003)


def test_a_line_that_nothing_moves_has_no_drivers() -> None:
    still = Model((), germ_itself, lambda x: np.full(len(x), 50.0), np.zeros((0, 0)))
    assert rank_drivers(still, chance=np.random.default_rng(0), with_shapley=True) == ()
