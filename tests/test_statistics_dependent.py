"""Indices and Shapley effects of correlated variables against exact Gaussian results, and of independent ones."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable

import numpy as np
import pytest
from scipy.special import erf

from tests.process_examples import predictor_of, process, variable
from tests.test_statistics_drivers import from_minus_one_to_one, germ_itself, ishigami
from tolerance.arrays import FloatArray
from tolerance.process.values import ProcessValues
from tolerance.statistics import dependent
from tolerance.statistics.dependent import conditional_normals, dependent_indices
from tolerance.statistics.drivers import Model
from tolerance.statistics.estimates import interval_of
from tolerance.statistics.ranking import model_of, rank_drivers


def model(
    response: Callable[[FloatArray], FloatArray], correlation: FloatArray,
    coordinate: Callable[[int, FloatArray], FloatArray] = germ_itself,
) -> Model:
    return Model(tuple(f"variable {number}" for number in range(len(correlation))), coordinate, response, correlation)


def correlation_of(dimensions: int, pairs: dict[tuple[int, int], float]) -> FloatArray:
    matrix = np.eye(dimensions)
    for (one, other), coefficient in pairs.items():
        matrix[one, other] = matrix[other, one] = coefficient
    return matrix


def linear_model(slopes: FloatArray, correlation: FloatArray) -> Model:
    return model(lambda x: np.asarray(50.0 + x @ slopes, dtype=np.float64), correlation)


def exact_share(slopes: FloatArray, correlation: FloatArray, known: tuple[int, ...]) -> float:
    """Var(E[Y | X_u]) / Var(Y) of Y = slopes . X, X jointly normal: exact, by the conditional mean."""
    if not known:
        return 0.0
    shared = (correlation @ slopes)[list(known)]
    block = correlation[np.ix_(known, known)]
    return float(shared @ np.linalg.inv(block) @ shared / (slopes @ correlation @ slopes))


def exact_shapley(slopes: FloatArray, correlation: FloatArray) -> FloatArray:
    """Shapley effects of Y = slopes . X by their definition, over every set of the others: exact."""
    dimensions = len(slopes)
    effects = np.zeros(dimensions)
    for position in range(dimensions):
        others = [other for other in range(dimensions) if other != position]
        for size in range(dimensions):
            for known in itertools.combinations(others, size):
                gain = (exact_share(slopes, correlation, tuple(sorted((*known, position))))
                        - exact_share(slopes, correlation, known))
                effects[position] += gain / (dimensions * math.comb(dimensions - 1, size))
    return effects


def within(estimates: FloatArray, exact: FloatArray, allowed: float) -> None:
    error = np.abs(np.mean(estimates, axis=0) - exact)
    standard_error = np.std(estimates, axis=0, ddof=1) / np.sqrt(len(estimates))
    assert np.all(error <= 5.0 * standard_error + 1e-9), (error, standard_error)  # Student's t, 7 degrees of freedom
    assert np.max(error) <= allowed


@pytest.mark.parametrize("coefficient", [-0.6, 0.0, 0.7])
def test_two_correlated_normals(coefficient: float) -> None:
    """Y = b1 X1 + b2 X2 of a bivariate normal, exact: E. Song, B. L. Nelson and J. Staum 2016 (and A. B. Owen and
    C. Prieur 2017): effect of the first [b1^2 (1 - r^2/2) + r b1 b2 + b2^2 r^2/2] / V, unit deviations."""
    b1, b2, r = 1.2, 0.8, coefficient
    variance = b1**2 + b2**2 + 2.0 * r * b1 * b2
    one = (b1**2 * (1.0 - 0.5 * r**2) + r * b1 * b2 + 0.5 * b2**2 * r**2) / variance
    indices = dependent_indices(
        linear_model(np.array([b1, b2]), correlation_of(2, {(0, 1): r})), chance=np.random.default_rng(0))
    within(indices.shapley, np.array([one, 1.0 - one]), 0.003)
    within(indices.first, np.array([(b1 + r * b2) ** 2, (b2 + r * b1) ** 2]) / variance, 0.002)
    within(indices.total, np.array([b1**2, b2**2]) * (1.0 - r**2) / variance, 0.002)


SLOPES = np.array([0.6, 0.5, -0.4, 0.3, 0.2, 0.1])
PAIRS = {(0, 1): 0.7, (0, 2): 0.4, (1, 2): 0.5, (3, 4): -0.5}


@pytest.mark.parametrize("most_for_all_sets", [8, 0])
def test_six_variables_in_two_groups(most_for_all_sets: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Exact for a linear response; by every set, and along random orders."""
    monkeypatch.setattr(dependent, "MOST_FOR_ALL_SETS", most_for_all_sets)
    correlation = correlation_of(6, PAIRS)
    indices = dependent_indices(linear_model(SLOPES, correlation), chance=np.random.default_rng(1))
    every = tuple(range(6))
    within(indices.shapley, exact_shapley(SLOPES, correlation), 0.005)
    within(indices.first, np.array([exact_share(SLOPES, correlation, (one,)) for one in every]), 0.003)
    others = [tuple(other for other in every if other != one) for one in every]
    within(indices.total, np.array([1.0 - exact_share(SLOPES, correlation, rest) for rest in others]), 0.003)


@pytest.mark.parametrize("most_for_all_sets", [8, 0])
def test_shapley_effects_of_independent_variables(most_for_all_sets: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Ishigami function, a = 7, b = 0.1: each interaction is shared evenly (A. B. Owen 2014), exact."""
    monkeypatch.setattr(dependent, "MOST_FOR_ALL_SETS", most_for_all_sets)
    indices = dependent_indices(
        model(ishigami, np.eye(3), from_minus_one_to_one), chance=np.random.default_rng(2), subset_points=2048)
    within(indices.shapley, np.array([0.435747, 0.442411, 0.121842]), 0.02)


def test_effects_add_up_to_one_and_lie_between_first_and_total_without_correlation() -> None:
    def response(x: FloatArray) -> FloatArray:
        return np.asarray(np.exp(0.3 * x[:, 0] + 0.2 * x[:, 1] - 0.2 * x[:, 2]), dtype=np.float64)

    indices = dependent_indices(model(response, np.eye(3)), chance=np.random.default_rng(0))
    assert np.sum(indices.shapley, axis=1) == pytest.approx(np.ones(8), abs=1e-12)
    first, total, shapley = (np.mean(each, axis=0) for each in (indices.first, indices.total, indices.shapley))
    assert np.all(first < shapley + 0.003)
    assert np.all(shapley < total + 0.003)


def test_bounded_laws_keep_their_correlation_through_the_copula() -> None:
    """Two uniform variables with germs correlated by r have a correlation of (6 / pi) arcsin(r / 2), exact (Spearman's,
    of a Gaussian copula: K. Pearson 1907); for Y = X1 the other one explains at most a little more than its square."""
    r = 0.8
    squared = (6.0 / np.pi * np.arcsin(0.5 * r)) ** 2
    case = model(lambda x: np.asarray(x[:, 0], dtype=np.float64), correlation_of(2, {(0, 1): r}), from_minus_one_to_one)
    indices = dependent_indices(case, chance=np.random.default_rng(0))
    # exact regression of one on the other: E[X1 | z2] = erf(r z2 / sqrt(2 (2 - r^2)))
    nodes, weights = np.polynomial.hermite_e.hermegauss(80)
    mean_given = erf(r * nodes / np.sqrt(2.0 * (2.0 - r**2)))
    exact = float(np.sum(weights * mean_given**2) / np.sqrt(2.0 * np.pi) * 3.0)  # the variance of X1 is 1/3
    assert squared <= exact + 1e-12
    within(indices.first, np.array([1.0, exact]), 0.003)
    within(indices.total, np.array([1.0 - exact, 0.0]), 0.003)
    within(indices.shapley, np.array([1.0 - 0.5 * exact, 0.5 * exact]), 0.005)


def test_intervals_hold_the_exact_effects_in_95_of_100_runs() -> None:
    correlation = correlation_of(3, {(0, 1): 0.6})
    slopes = np.array([0.5, 0.4, 0.3])
    exact = exact_shapley(slopes, correlation)
    runs, held = 60, np.zeros(3)
    for seed in range(runs):
        indices = dependent_indices(
            linear_model(slopes, correlation), chance=np.random.default_rng(seed), points=64, subset_points=64)
        for position in range(3):
            interval = interval_of(indices.shapley[:, position])
            held[position] += interval.low <= exact[position] <= interval.high
    assert np.all(np.abs(held / runs - 0.95) <= 4.0 * np.sqrt(0.95 * 0.05 / runs)), held


def test_conditional_draws_have_the_conditional_law() -> None:
    """Exact: mean r z and deviation sqrt(1 - r^2) given z."""
    correlation = correlation_of(3, {(0, 1): 0.8})
    spare = np.random.default_rng(0).normal(size=(40_000, 3))
    drawn = conditional_normals(correlation, np.full((40_000, 3), 2.0), spare, given=[0, 2], unknown=[1])
    assert np.mean(drawn) == pytest.approx(1.6, abs=4.0 * 0.6 / 200.0)
    assert np.std(drawn) == pytest.approx(0.6, rel=4.0 / np.sqrt(2 * 40_000))


def test_a_response_that_nothing_moves_has_nought() -> None:
    still = model(lambda x: np.full(len(x), 50.0), correlation_of(2, {(0, 1): 0.5}))
    indices = dependent_indices(still, chance=np.random.default_rng(0), points=64, subset_points=64)
    assert np.all(np.isfinite(indices.shapley))
    assert not np.any(indices.first)


def test_drivers_of_a_line_with_correlated_variables_rank_by_their_effects() -> None:
    """A product of powers of correlated lognormals: ln Z is linear, so that the exact Gaussian effects hold to the
    order of its variance (2e-4 here)."""
    names, powers = ("L1.foil", "P1.thickness", "P1.dk"), np.array([-0.3, 0.6, -0.5])
    tolerances = np.array([0.10, 0.12, 0.10])
    correlation = correlation_of(3, {(1, 2): -0.5})
    known = process(*(variable(name, 4.0, shape="lognormal", tolerance=float(tolerance))
                      for name, tolerance in zip(names, tolerances, strict=True)), correlation=correlation)

    def logarithms(values: ProcessValues) -> FloatArray:
        return np.log([values.value(name) / 4.0 for name in names])

    predictor = predictor_of(known, (0, 1, 2), lambda values: 50.0 * np.exp(powers @ logarithms(values)), logarithms)
    drivers = rank_drivers(model_of(predictor), chance=np.random.default_rng(2), with_shapley=True)
    exact = exact_shapley(powers * np.log1p(tolerances) / 3.0, correlation)
    assert [driver.variable for driver in drivers] == [names[place] for place in np.argsort(-exact)]
    for driver in drivers:
        assert driver.shapley is not None
        place = names.index(driver.variable)
        alone = exact_share(powers * np.log1p(tolerances) / 3.0, correlation, (place,))
        assert driver.shapley.value == pytest.approx(exact[place], abs=0.004)
        assert driver.first.value == pytest.approx(alone, abs=0.004)
