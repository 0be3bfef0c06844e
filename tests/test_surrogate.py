"""The polynomial and the prediction of ln Z: against exact responses, refits, and a closed form of a pair."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.polynomial import legendre as reference
from scipy.special import ellipk, ellipkm1

from tests.process_examples import predictor_of, process, variable
from tolerance.arrays import FloatArray
from tolerance.errors import UnfinishedError
from tolerance.process.draws import Process, ProcessDraws, Variable, draw_process
from tolerance.process.laws import Law, Shape
from tolerance.process.values import ProcessValues
from tolerance.scenario.amounts import Amount
from tolerance.scenario.properties import Property
from tolerance.surrogate.coordinates import BoxValues, box_ends, training_shares
from tolerance.surrogate.polynomial import BLOCK_ROWS, Slopes, fit, full_exponents, polynomial
from tolerance.surrogate.prediction import Predictor


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
    assert polynomial(exponents, coefficients).evaluate(where) == pytest.approx(expected, rel=1e-12, abs=1e-12)


@pytest.mark.parametrize(("dimensions", "degree", "terms"), [(8, 1, 9), (8, 2, 45), (8, 3, 165), (4, 4, 70)])
def test_count_of_terms_is_the_binomial_coefficient(dimensions: int, degree: int, terms: int) -> None:
    assert terms == len(full_exponents(dimensions, degree))


def test_a_cubic_is_found_again_from_more_points_than_terms() -> None:
    exponents = full_exponents(4, 3)
    known = polynomial(exponents, np.random.default_rng(2).normal(size=len(exponents)))
    where = points(70, 4)
    found = fit(where, known.evaluate(where))
    elsewhere = points(200, 4, seed=5)
    assert found.evaluate(elsewhere) == pytest.approx(known.evaluate(elsewhere), abs=2e-3)  # of values of size 5


def smooth(where: FloatArray) -> FloatArray:
    return np.exp(where @ [0.08, -0.06, 0.04, 0.02, 0.01, 0.005])


def test_fewer_points_than_terms_beat_the_least_squares_quadratic() -> None:
    """numpy.linalg.lstsq (general library) on the 28 terms of a quadratic; the cubic has 84, the points are 40."""
    where, elsewhere = points(40, 6), points(2000, 6, seed=3)
    quadratic = full_exponents(6, 2)

    def basis(at: FloatArray) -> FloatArray:
        return np.stack([np.prod([reference.legval(at[:, axis], np.eye(3)[power]) for axis, power in enumerate(row)],
                                 axis=0) for row in quadratic], axis=1)

    plain = basis(elsewhere) @ np.linalg.lstsq(basis(where), smooth(where))[0]
    assert np.std(fit(where, smooth(where)).evaluate(elsewhere) - smooth(elsewhere)) \
        < 0.7 * np.std(plain - smooth(elsewhere))


def test_leave_one_out_is_what_refits_give() -> None:
    """The sizes that a fit expects, taken from the points, move a little when one of 30 is left out."""
    where = points(30, 3)
    values = np.exp(where @ [0.4, -0.3, 0.2])
    whole = fit(where, values)
    errors = np.empty(30)
    for left in range(30):
        kept = np.delete(np.arange(30), left)
        refit = fit(where[kept], values[kept], prior=whole.prior)
        errors[left] = values[left] - refit.evaluate(where[[left]])[0]
    assert np.corrcoef(errors, whole.leave_one_out)[0, 1] > 0.9
    assert np.sqrt(np.mean(whole.leave_one_out**2)) == pytest.approx(np.sqrt(np.mean(errors**2)), rel=0.25)


def slopes_of_smooth(where: FloatArray) -> Slopes:
    return Slopes(np.arange(len(where)), smooth(where)[:, np.newaxis] * [0.08, -0.06, 0.04, 0.02, 0.01, 0.005])


def test_points_with_their_derivatives_say_more_than_many_times_as_many_without() -> None:
    few, many, elsewhere = points(16, 6), points(60, 6), points(2000, 6, seed=3)
    known = fit(few, smooth(few), slopes=slopes_of_smooth(few))
    plain = fit(many, smooth(many))
    assert np.std(known.evaluate(elsewhere) - smooth(elsewhere)) < 0.5 * np.std(
        plain.evaluate(elsewhere) - smooth(elsewhere))
    assert np.std(known.evaluate(elsewhere) - smooth(elsewhere)) < 2e-5


def test_a_point_is_left_out_with_all_that_is_known_there() -> None:
    where = points(20, 3)
    values = np.exp(where @ [0.4, -0.3, 0.2])
    steep = values[:, np.newaxis] * [0.4, -0.3, 0.2]
    some = np.arange(0, 20, 2)
    whole = fit(where, values, slopes=Slopes(some, steep[some]))
    errors = np.empty(20)
    for left in range(20):
        kept = np.delete(np.arange(20), left)
        sloped = np.flatnonzero(np.isin(kept, some))
        refit = fit(where[kept], values[kept], slopes=Slopes(sloped, steep[kept][sloped]), prior=whole.prior)
        errors[left] = values[left] - refit.evaluate(where[[left]])[0]
    assert np.corrcoef(errors, whole.leave_one_out)[0, 1] > 0.9
    assert np.sqrt(np.mean(whole.leave_one_out**2)) == pytest.approx(np.sqrt(np.mean(errors**2)), rel=0.3)


def test_the_doubt_is_of_the_size_of_the_error() -> None:
    """Errors in units of their standard errors have a root mean square near 1, inside the box and outside it."""
    where = points(40, 6)
    found = fit(where, smooth(where))
    for reach in (1.0, 1.5):
        elsewhere = reach * points(2000, 6, seed=3)
        ratio = (found.evaluate(elsewhere) - smooth(elsewhere)) / found.doubt(elsewhere)
        assert 0.3 < np.sqrt(np.mean(ratio**2)) < 2.0
        assert np.max(np.abs(ratio)) < 6.0
    assert np.mean(found.doubt(1.5 * where)) > 2.0 * np.mean(found.doubt(where))


@pytest.mark.parametrize(("where", "values"), [
    (points(30, 3), np.full(30, np.nan)),
    (points(30, 3), np.where(np.arange(30) == 4, np.inf, 1.0)),
    (points(9, 3), np.arange(9.0)),
])
def test_what_does_not_determine_the_polynomial_is_refused(where: FloatArray, values: FloatArray) -> None:
    with pytest.raises(UnfinishedError):
        fit(where, values)


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


def dimensions(values: ProcessValues) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Width, gap and spacing [m] and Dk of the pair, width and gap 150 um drawn, pitch held."""
    etch = values.etch("L1", width=150e-6)
    spacing = values.value("P1.thickness") + values.value("C1.thickness")
    return 150e-6 + etch, 150e-6 - etch, spacing, values.value("P1.dk")


def pair_impedance(values: ProcessValues) -> FloatArray:
    """Differential impedance [ohm] of the pair."""
    width, gap, spacing, dk = dimensions(values)
    return 2.0 * odd_impedance(width=width, gap=gap, spacing=spacing, dk=dk)


def pair_logarithms(values: ProcessValues) -> FloatArray:
    """Ratios of lengths, and Dk."""
    width, gap, spacing, dk = dimensions(values)
    return np.log([width / spacing, gap / spacing, dk])


def pair_predictor(known: Process, *, runs: int = 60, seed: int = 0) -> Predictor:
    return predictor_of(known, (0, 1, 2, 3), pair_impedance, pair_logarithms, runs=runs, seed=seed, width=150e-6)


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
    error = pair_predictor(known).impedance(draws.germ) - pair_impedance(draws)
    assert np.sqrt(np.mean(error**2)) < 0.001
    assert np.max(np.abs(error)) < 0.05


def test_plies_that_act_through_their_sum_are_one_coordinate() -> None:
    """Four variables reach the pair; the two plies make one spacing, so that three coordinates are left."""
    assert pair_predictor(stripline_pair()).seen.coordinates.count == 3


def test_the_scale_of_all_lengths_is_no_coordinate() -> None:
    """Width, gap (held by the pitch) and spacing are three lengths; two ratios of them and Dk are what matters."""
    seen = pair_predictor(stripline_pair()).seen
    at = seen.logarithms(ProcessDraws(seen.process, np.zeros((1, 5))))
    assert np.linalg.matrix_rank(seen.coordinates.matrix) == 3
    assert seen.coordinates.of(at) == pytest.approx(np.zeros((1, 3)), abs=0.1)


def test_leave_one_out_tells_the_error_over_the_box_and_bounds_that_over_draws() -> None:
    known = stripline_pair(spread=0.15)
    draws = draw_process(known, coupons=4096, chance=np.random.default_rng(8))
    box = BoxValues(known, (0, 1, 2, 3), 150e-6, training_shares(4, runs=2048, chance=np.random.default_rng(99)))
    for seed in range(5):
        predictor = pair_predictor(known, runs=30, seed=seed)
        told = np.sqrt(np.mean(predictor.leave_one_out**2))
        over_box = np.std(predictor.impedance_of(box) - pair_impedance(box))
        over_draws = np.std(predictor.impedance(draws.germ) - pair_impedance(draws))
        assert 0.3 * over_box < told < 4.0 * over_box
        assert over_draws < told


def test_other_tolerances_and_shifts_within_the_box_need_no_new_fit() -> None:
    """A prediction fitted for one process, asked about another, against the exact pair."""
    predictor = pair_predictor(stripline_pair())
    others: tuple[tuple[Shape, float], ...] = (("normal", 0.05), ("uniform", 0.10), ("triangular", 0.12))
    for shape, spread in others:
        other = stripline_pair(shape, spread)
        draws = draw_process(other, coupons=4096, chance=np.random.default_rng(8))
        moved = replace(predictor, seen=replace(predictor.seen, process=other))
        error = moved.impedance(draws.germ) - pair_impedance(draws)
        assert np.sqrt(np.mean(error**2)) < 0.002
        assert np.max(np.abs(error)) < 0.05


def test_powers_of_lengths_and_permittivities_are_predicted_exactly() -> None:
    """ln Z is then linear in the logarithms, whatever the shape of the law."""
    names, powers = ("P1.thickness", "C1.thickness", "P1.dk"), np.array([0.7, -0.2, -0.5])
    for shape in SHAPES:
        known = stripline_pair(shape)

        def logarithms(values: ProcessValues) -> FloatArray:
            return np.log([values.value(name) for name in names])

        def power_law(values: ProcessValues) -> FloatArray:
            return np.asarray(80.0 * np.exp(powers @ (logarithms(values) - np.log([[200e-6], [200e-6], [1.0]]))))

        predictor = predictor_of(known, (1, 2, 3), power_law, logarithms, runs=40)
        draws = draw_process(known, coupons=1024, chance=np.random.default_rng(1))
        assert predictor.impedance(draws.germ) == pytest.approx(power_law(draws), rel=1e-6)


def test_a_smaller_design_is_the_beginning_of_a_larger_one() -> None:
    small, large = (training_shares(2, runs=runs, chance=np.random.default_rng(4)) for runs in (15, 16))
    assert np.array_equal(small, large[:15])


def test_the_box_is_wider_than_the_tolerances_and_keeps_lengths_above_nought() -> None:
    for shape in SHAPES:
        known = stripline_pair(shape)
        coupons = draw_process(known, coupons=4096, chance=np.random.default_rng(4))
        box = BoxValues(known, (0, 1, 2, 3), 150e-6, np.repeat([[-1.0], [1.0]], 4, axis=1))
        for name in ("P1.thickness", "C1.thickness", "P1.dk"):
            low, high = box.value(name)
            values = np.quantile(coupons.value(name), [0.00135, 0.99865])  # three deviations of a normal
            assert low < values[0]
            assert high > values[1]
        assert box.etch("L1", width=150e-6)[0] < -0.1 * 150e-6 * 0.99
    low, high = box_ends(Law("normal", 12e-6, tolerance=Amount(11e-6, relative=False)), reference=12e-6)
    assert low == pytest.approx(0.5e-6)  # half of the low end of the tolerance
    assert high > 23e-6


def test_what_is_drawn_together_hangs_together_in_the_box_as_in_draws() -> None:
    """The smaller one would be below nought at the end of the box: the larger one ends there with it."""
    pair = [(Property(f"M1.{key}", "M1", key, nominal), Law("normal", nominal, tolerance=Amount(9e-6, relative=False)))
            for key, nominal in (("thickness", 25e-6), ("over_copper", 12e-6))]
    known = replace(process(), variables=(Variable("mask", tuple(pair)),), correlation=np.eye(1),
                    nominals={"M1.thickness": 25e-6, "M1.over_copper": 12e-6})
    for values in (BoxValues(known, (0,), 1e-4, np.linspace(-1.0, 1.0, 9)[:, np.newaxis]),
                   ProcessDraws(known, np.linspace(-3.0, 3.0, 9)[:, np.newaxis])):
        assert values.value("M1.thickness") - values.value("M1.over_copper") == pytest.approx(np.full(9, 13e-6))
        assert np.min(values.value("M1.over_copper")) > 1e-6


def test_predictions_of_draws_are_finite_however_wide_the_law() -> None:
    known = process(
        variable("C1.thickness", 1e-4, tolerance=1.2),  # three deviations lie below zero
        variable("L1.etch", 0.0, tolerance=Amount(20e-6, relative=False)),
        variable("P1.thickness", 1e-4, tolerance=0.5, shape="lognormal"),
    )

    def logarithms(values: ProcessValues) -> FloatArray:
        lengths = [values.value("C1.thickness"), 1e-4 + values.etch("L1", width=1e-4), values.value("P1.thickness")]
        return np.log(np.maximum(lengths, 1e-12))

    predictor = predictor_of(known, (0, 1, 2), lambda values: 50.0 + 0.0 * values.value("P1.thickness")
                             + 1e4 * values.value("C1.thickness"), logarithms)
    germ = np.array([[-6.3] * 3, [0.0] * 3, [6.3] * 3])
    assert np.all(np.isfinite(predictor.impedance(germ)))


def test_a_line_that_nothing_moves_needs_one_run() -> None:
    known = stripline_pair()
    predictor = predictor_of(known, (), lambda values: np.full(len(values.value("P1.dk")), 50.0), pair_logarithms,
                             runs=1)
    assert predictor.impedance(np.zeros((300, 5))) == pytest.approx(np.full(300, 50.0), rel=1e-14)
    assert np.all(predictor.leave_one_out == 0.0)


@pytest.mark.parametrize("bad", [np.nan, np.inf, 0.0, -3.0])
def test_an_impedance_that_is_none_is_refused(bad: float) -> None:
    with pytest.raises(UnfinishedError):
        predictor_of(stripline_pair(), (0, 1, 2, 3),
                     lambda values: np.where(np.arange(len(values.value("P1.dk"))) == 3, bad, 50.0), pair_logarithms)
