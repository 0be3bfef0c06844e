"""The polynomial and the prediction of ln Z: against exact responses, refits, and a closed form of a pair."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.polynomial import legendre as reference
from scipy.special import ellipk, ellipkm1

from tests.process_examples import process, variable
from tolerance.arrays import FloatArray
from tolerance.errors import UnfinishedError
from tolerance.process.draws import Process, ProcessDraws, draw_process
from tolerance.process.laws import Shape
from tolerance.scenario.amounts import Amount
from tolerance.surrogate.coordinates import Coordinates
from tolerance.surrogate.polynomial import (
    BLOCK_ROWS,
    count_runs,
    count_terms,
    fit,
    full_exponents,
    polynomial,
)
from tolerance.surrogate.prediction import Predictor, fit_predictor, largest_error_wanted


def points(count: int, dimensions: int, seed: int = 0) -> FloatArray:
    return np.random.default_rng(seed).uniform(-1.0, 1.0, (count, dimensions))


@pytest.mark.parametrize("degree", [1, 2, 3])
@pytest.mark.parametrize("dimensions", [1, 4])
def test_evaluation_agrees_with_numpy_legendre_series(degree: int, dimensions: int) -> None:
    exponents = full_exponents(dimensions, degree)
    coefficients = np.random.default_rng(1).normal(size=len(exponents))
    where = 1.7 * points(BLOCK_ROWS + 3, dimensions)  # more than a block, and beyond the box
    expected = np.zeros(len(where))
    for row, coefficient in zip(exponents, coefficients, strict=True):
        factors = [reference.legval(where[:, axis], np.eye(degree + 1)[power]) for axis, power in enumerate(row)]
        expected += coefficient * np.prod(factors, axis=0)
    assert polynomial(degree, exponents, coefficients).evaluate(where) == pytest.approx(expected, rel=1e-12, abs=1e-12)


@pytest.mark.parametrize(("dimensions", "degree", "terms"), [(8, 1, 9), (8, 2, 45), (8, 3, 165), (4, 4, 70)])
def test_count_of_terms_is_the_binomial_coefficient(dimensions: int, degree: int, terms: int) -> None:
    assert count_terms(dimensions, degree) == terms == len(full_exponents(dimensions, degree))


@pytest.mark.parametrize("degree", [1, 2, 3])
def test_a_polynomial_is_found_again(degree: int) -> None:
    exponents = full_exponents(5, degree)
    known = polynomial(degree, exponents, np.random.default_rng(2).normal(size=len(exponents)))
    where = points(count_runs(5, degree), 5)
    found = fit(where, known.evaluate(where), degree=degree)
    assert found.coefficients == pytest.approx(known.coefficients, abs=1e-12)
    assert found.leave_one_out < 1e-12


def test_leave_one_out_is_what_refits_give() -> None:
    where = points(30, 3)
    values = np.exp(where @ [0.4, -0.3, 0.2])
    squares = []
    for left in range(30):
        kept = np.delete(np.arange(30), left)
        refit = fit(where[kept], values[kept], degree=2)
        squares.append((refit.evaluate(where[[left]])[0] - values[left]) ** 2)
    assert fit(where, values, degree=2).leave_one_out == pytest.approx(np.sqrt(np.mean(squares)), rel=1e-9)


@pytest.mark.parametrize(("where", "values"), [
    (points(30, 3), np.full(30, np.nan)),
    (points(30, 3), np.where(np.arange(30) == 4, np.inf, 1.0)),
    (points(10, 3), np.ones(10)),
    (np.repeat(points(6, 3), 5, axis=0), np.ones(30)),
])
def test_what_does_not_determine_the_polynomial_is_refused(where: FloatArray, values: FloatArray) -> None:
    with pytest.raises(UnfinishedError):
        fit(where, values, degree=2)


# --- the prediction of a line ---------------------------------------------------------------------------------------

FREE_SPACE = 376.730313668  # [ohm] impedance of free space, CODATA
SHAPES: tuple[Shape, ...] = ("normal", "truncated_normal", "uniform", "triangular", "lognormal")


def stripline_pair(shape: Shape = "normal", spread: float = 0.10) -> Process:
    """A zero-thickness pair between planes: what varies is etch, the two plies and their common Dk."""
    return process(
        variable("L1.etch", 0.0, shape="uniform" if shape == "lognormal" else shape, tolerance=spread),
        variable("P1.thickness", 200e-6, shape=shape, tolerance=spread),
        variable("C1.thickness", 200e-6, shape=shape, tolerance=spread, shift=-0.02),
        variable("P1.dk", 4.0, shape=shape, tolerance=0.5 * spread),
        variable("C9.dk", 4.0, shape=shape, tolerance=0.5 * spread),  # of another layer: does not reach the line
    )


def odd_impedance(*, width: FloatArray, gap: FloatArray, spacing: FloatArray, dk: FloatArray) -> FloatArray:
    """Odd-mode impedance [ohm] of a zero-thickness pair between planes; lengths in one unit. Exact.

    Source: S. B. Cohn, "Shielded coupled-strip transmission line", IRE Transactions on Microwave Theory and
    Techniques, volume 3, pages 29-38, October 1955.
    """
    modulus = np.tanh(0.5 * np.pi * width / spacing) / np.tanh(0.5 * np.pi * (width + gap) / spacing)
    return np.asarray(0.25 * FREE_SPACE / np.sqrt(dk) * ellipkm1(modulus**2) / ellipk(modulus**2), dtype=np.float64)


def pair_impedance(draws: ProcessDraws) -> FloatArray:
    """Differential impedance [ohm] of the pair, width and gap 150 um drawn, pitch held."""
    etch = draws.etch("L1", width=150e-6)
    spacing = draws.value("P1.thickness") + draws.value("C1.thickness")
    return 2.0 * odd_impedance(width=150e-6 + etch, gap=150e-6 - etch, spacing=spacing, dk=draws.value("P1.dk"))


def predictor_of(known: Process, *, degree: int, seed: int = 0) -> Predictor:
    coordinates = Coordinates(known, (0, 1, 2, 3), 150e-6)
    runs = count_runs(coordinates.dimensions, degree)
    germ = coordinates.training_germs(runs=runs, chance=np.random.default_rng(seed))
    return fit_predictor(coordinates, germ, pair_impedance(ProcessDraws(known, germ)), degree=degree)


@pytest.mark.parametrize(("width", "gap", "expected"), [
    (0.2, 0.1, 95.9401), (0.35, 0.1, 79.7570), (0.5, 0.2, 80.1034), (1.0, 0.05, 45.8393), (1.0, 0.5, 62.1571)])
def test_the_pair_used_here(width: float, gap: float, expected: float) -> None:
    """Values of Cohn's formula worked out independently and confirmed by finite elements to 0.02 %."""
    odd = odd_impedance(width=np.array([width]), gap=np.array([gap]), spacing=np.array([1.0]), dk=np.array([1.0]))
    assert odd[0] == pytest.approx(expected, abs=1e-4)


@pytest.mark.parametrize("shape", SHAPES)
def test_prediction_of_every_coupon_for_every_shape(shape: Shape) -> None:
    known = stripline_pair(shape)
    draws = draw_process(known, coupons=16384, chance=np.random.default_rng(8))
    error = predictor_of(known, degree=3).impedance(draws.germ) - pair_impedance(draws)
    assert np.sqrt(np.mean(error**2)) < 0.002
    assert np.max(np.abs(error)) < 0.05


def test_error_falls_with_the_degree() -> None:
    known = stripline_pair(spread=0.15)
    draws = draw_process(known, coupons=4096, chance=np.random.default_rng(8))
    errors = [np.std(predictor_of(known, degree=degree).impedance(draws.germ) - pair_impedance(draws))
              for degree in (1, 2, 3)]
    assert errors[1] < 0.2 * errors[0]
    assert errors[2] < 0.2 * errors[1]


def test_leave_one_out_tells_the_error_over_the_box_and_bounds_that_over_draws() -> None:
    known = stripline_pair(spread=0.15)
    draws = draw_process(known, coupons=4096, chance=np.random.default_rng(8))
    for seed in range(5):
        predictor = predictor_of(known, degree=2, seed=seed)
        box = ProcessDraws(known, predictor.coordinates.training_germs(runs=2048, chance=np.random.default_rng(99)))
        over_box, _ = predictor.held_out_errors(box.germ, pair_impedance(box))
        over_draws, largest = predictor.held_out_errors(draws.germ, pair_impedance(draws))
        assert 0.5 * over_box < predictor.leave_one_out_error < 3.0 * over_box
        assert over_draws < predictor.leave_one_out_error
        assert over_draws < largest


def test_powers_of_lengths_and_permittivities_are_predicted_exactly() -> None:
    """ln Z is then linear in the logarithms, whatever the shape of the law."""
    for shape in SHAPES:
        known = stripline_pair(shape)
        coordinates = Coordinates(known, (1, 2, 3), 150e-6)

        def power_law(draws: ProcessDraws) -> FloatArray:
            return np.asarray(80.0 * (draws.value("P1.thickness") / 200e-6) ** 0.7
                              * (draws.value("C1.thickness") / 200e-6) ** -0.2 * draws.value("P1.dk") ** -0.5)

        germ = coordinates.training_germs(runs=count_runs(3, 1), chance=np.random.default_rng(0))
        predictor = fit_predictor(coordinates, germ, power_law(ProcessDraws(known, germ)), degree=1)
        draws = draw_process(known, coupons=1024, chance=np.random.default_rng(1))
        assert predictor.impedance(draws.germ) == pytest.approx(power_law(draws), rel=1e-12)


def test_a_smaller_design_is_the_beginning_of_a_larger_one() -> None:
    coordinates = Coordinates(stripline_pair(), (0, 2), 150e-6)
    small, large = (coordinates.training_germs(runs=runs, chance=np.random.default_rng(4)) for runs in (15, 70))
    assert np.array_equal(small, large[:15])


def test_training_runs_fill_the_box_and_leave_alone_what_does_not_reach_the_line() -> None:
    for shape in SHAPES:
        coordinates = Coordinates(stripline_pair(shape), (0, 1, 2, 3), 150e-6)
        germ = coordinates.training_germs(runs=1024, chance=np.random.default_rng(4))
        assert np.all(germ[:, 4] == 0.0)
        seen = coordinates.of_draws(germ)
        assert np.all(np.abs(seen) <= 1.0 + 1e-12)
        assert np.all(np.max(seen, axis=0) > 0.98)
        assert np.all(np.min(seen, axis=0) < -0.98)


def test_coordinates_of_draws_are_finite_however_wide_the_law() -> None:
    known = process(
        variable("C1.thickness", 1e-4, tolerance=1.2),  # three deviations lie below zero
        variable("L1.etch", 0.0, tolerance=Amount(20e-6, relative=False)),
        variable("P1.thickness", 1e-4, tolerance=0.5, shape="lognormal"),
    )
    germ = np.array([[-6.3] * 3, [0.0] * 3, [6.3] * 3])
    seen = Coordinates(known, (0, 1, 2), 1e-4).of_draws(germ)
    assert np.all(np.isfinite(seen))
    assert np.all(np.diff(seen, axis=0) > 0.0)


def test_a_line_that_nothing_moves_needs_one_run() -> None:
    known = stripline_pair()
    coordinates = Coordinates(known, (), 150e-6)
    germ = coordinates.training_germs(runs=count_runs(0, 2), chance=np.random.default_rng(0))
    predictor = fit_predictor(coordinates, germ, np.array([50.0]), degree=2)
    assert predictor.impedance(np.zeros((300, 5))) == pytest.approx(np.full(300, 50.0), rel=1e-14)
    assert predictor.leave_one_out_error == 0.0


@pytest.mark.parametrize("bad", [np.nan, np.inf, 0.0, -3.0])
def test_an_impedance_that_is_none_is_refused(bad: float) -> None:
    coordinates = Coordinates(stripline_pair(), (0,), 150e-6)
    germ = coordinates.training_germs(runs=20, chance=np.random.default_rng(0))
    impedance = np.where(np.arange(20) == 3, bad, 50.0)
    with pytest.raises(UnfinishedError):
        fit_predictor(coordinates, germ, impedance, degree=2)


def test_tight_limits_ask_for_a_smaller_error() -> None:
    assert largest_error_wanted(target=50.0, limit=0.10) == pytest.approx(0.01)
    assert largest_error_wanted(target=50.0, limit=0.02) == pytest.approx(0.002)
