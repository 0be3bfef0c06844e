"""Sobol' indices of independent variables: standard test functions, closed forms, and SALib itself."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from SALib.analyze import sobol as salib_analyze
from SALib.sample import sobol as salib_sample
from scipy.special import erf

from tests.process_examples import predictor_of, process, variable
from tolerance.arrays import FloatArray
from tolerance.process.draws import Process
from tolerance.process.values import ProcessValues
from tolerance.statistics.drivers import Model, saltelli_values, sobol_indices
from tolerance.statistics.estimates import interval_of
from tolerance.statistics.ranking import model_of, rank_drivers
from tolerance.surrogate.prediction import Predictor


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


# --- a predicted line -----------------------------------------------------------------------------------------------

NAMES = ("L1.foil", "P1.thickness", "P1.dk")
EXPONENTS = np.array([-0.3, 0.6, -0.5])


def power_law(values: ProcessValues) -> FloatArray:
    """An impedance [ohm] that goes with powers of what varies."""
    logarithm = sum(power * np.log(values.value(name) / 4.0) for name, power in zip(NAMES, EXPONENTS, strict=True))
    return np.asarray(50.0 * np.exp(logarithm), dtype=np.float64)


def power_law_predictor(known: Process) -> Predictor:
    return predictor_of(known, (0, 1, 2), power_law, lambda values: np.log([values.value(name) for name in NAMES]))


def test_drivers_of_a_predicted_line_are_the_closed_form_ones() -> None:
    """A product of lognormals: exact indices, ranking and names."""
    tolerances = np.array([0.10, 0.12, 0.05])
    known = process(*(variable(name, 4.0, shape="lognormal", tolerance=float(tolerance))
                      for name, tolerance in zip(NAMES, tolerances, strict=True)),
                    variable("P9.dk", 4.0, tolerance=0.5))
    squares = (EXPONENTS * np.log1p(tolerances) / 3.0) ** 2
    exact = np.expm1(squares) / np.expm1(squares.sum())
    drivers = rank_drivers(model_of(power_law_predictor(known)), chance=np.random.default_rng(2), with_shapley=False)
    assert [driver.variable for driver in drivers] == [NAMES[place] for place in np.argsort(-exact)]
    for driver in drivers:
        assert driver.first.value == pytest.approx(exact[NAMES.index(driver.variable)], abs=0.003)
        assert driver.total.value == pytest.approx(exact[NAMES.index(driver.variable)], abs=0.003)
        assert driver.total.low < driver.total.value < driver.total.high
        assert driver.shapley is None


def test_the_shorter_way_to_swapped_columns_gives_the_same_values() -> None:
    known = process(*(variable(name, 4.0, shape="uniform", tolerance=0.1) for name in NAMES),
                    variable("P9.dk", 4.0, tolerance=0.5))
    model = model_of(power_law_predictor(known))
    assert model.swapped is not None
    short, long = (saltelli_values(one, points=16384, chance=np.random.default_rng(4))
                   for one in (model, replace(model, swapped=None)))
    for one, other in zip(short, long, strict=True):
        assert np.array_equal(one, other)


def test_indices_keep_the_order_that_holds_exactly() -> None:
    """Of a sum first order and total are the same, 1 and 0 here: estimates lie to either side, those told do not."""
    model = Model(("one", "other"), germ_itself, lambda x: 50.0 + x[:, 0] + 1e-4 * x[:, 1], np.eye(2))
    for seed in range(8):
        for driver in rank_drivers(model, chance=np.random.default_rng(seed), with_shapley=False):
            assert 0.0 <= driver.first.value <= driver.total.value <= 1.0
            for interval in (driver.first, driver.total):
                assert interval.low <= interval.value <= interval.high


def test_a_variable_that_moves_the_rounding_alone_has_nought() -> None:
    model = Model(("one", "nothing"), germ_itself, lambda x: 50.0 + x[:, 0] + 1e-14 * x[:, 1], np.eye(2))
    found = {driver.variable: driver for driver in rank_drivers(
        model, chance=np.random.default_rng(1), with_shapley=False)}
    assert found["nothing"].first.value == found["nothing"].total.value == found["nothing"].total.high == 0.0


def test_a_line_that_nothing_moves_has_no_drivers() -> None:
    still = Model((), germ_itself, lambda x: np.full(len(x), 50.0), np.zeros((0, 0)))
    assert rank_drivers(still, chance=np.random.default_rng(0), with_shapley=True) == ()
