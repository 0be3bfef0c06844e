"""What tolerances are worth, on products of lognormals, whose yields are exact at every tolerance.

ln Z is normal with deviation sqrt(sum (power ln(1 + f t) / 3)^2), f being what the half-width is multiplied by.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import ndtr
from scipy.stats import multivariate_normal

from tests.decision_examples import COUPONS, board_of, lognormals, product_line
from tolerance.arrays import BoolArray, FloatArray
from tolerance.decisions.board import Board
from tolerance.decisions.interpolation import lagrange_weights
from tolerance.decisions.tightening import Tightening, alone, base_sides, tightening
from tolerance.process.draws import Process, ProcessDraws

POWERS = {"P1": 0.9, "P2": -0.6}
TOLERANCES = {"P1": 0.12, "P2": 0.10}
OFF = 1.02


def exact_yield(factor: float, *, off: float = OFF, limit: float = 0.1) -> float:
    """Share inside, with the tolerance of P1 times `factor`."""
    deviation = math.hypot(POWERS["P1"] * math.log1p(factor * TOLERANCES["P1"]) / 3.0,
                           POWERS["P2"] * math.log1p(TOLERANCES["P2"]) / 3.0)
    high, low = ((math.log(1.0 + side * limit) - math.log(off)) / deviation for side in (1.0, -1.0))
    return float(ndtr(high) - ndtr(low))


def standard_error(share: float) -> float:
    return math.sqrt(share * (1.0 - share) / COUPONS)


def board(*, off: float = OFF) -> Board:
    known = lognormals(**TOLERANCES)
    return board_of(known, product_line(known, POWERS, off=off))


def tightened(board: Board, target_yield: float) -> Tightening:
    return tightening(alone(board, base_sides(board), frozenset({"P1.dk"})), "P1.dk", aim="each line",
                      target_yield=target_yield)


def test_halved_doubled_and_perfect_tolerances_have_the_yields_of_the_closed_form() -> None:
    one = tightened(board(), 0.999)
    for judged, factor in ((one.halved, 0.5), (one.doubled, 2.0), (one.perfect, 0.0)):
        exact = exact_yield(factor)
        assert abs(judged.together.value - exact) < 3.0 * standard_error(exact)
    gain = exact_yield(0.5) - exact_yield(1.0)
    assert one.gain.low < gain < one.gain.high
    assert one.loss.low < exact_yield(2.0) - exact_yield(1.0) < one.loss.high


def test_the_curve_is_that_of_the_closed_form_between_the_places_too() -> None:
    one = tightened(board(), 0.99)
    exact = np.array([exact_yield(factor) for factor in one.factors])
    assert np.max(np.abs(one.together - exact) / np.sqrt(exact * (1.0 - exact) / COUPONS + 1e-12)) < 4.0
    assert np.array_equal(one.together, one.lines[0])


@pytest.mark.parametrize("target_yield", [0.985, 0.99, 0.995])
def test_the_factor_that_is_needed_alone_is_that_of_the_closed_form(target_yield: float) -> None:
    one = tightened(board(), target_yield)
    exact = brentq(lambda factor: exact_yield(factor) - target_yield, 0.01, 1.0)
    slope = abs(exact_yield(exact + 0.01) - exact_yield(exact - 0.01)) / 0.02
    assert one.needed == pytest.approx(exact, abs=4.0 * standard_error(target_yield) / slope)
    assert one.relaxed is None


def test_what_it_ends_at_where_it_cannot_alone() -> None:
    one = tightened(board(off=1.08), 0.99)
    assert one.needed is None
    exact = exact_yield(0.0, off=1.08)
    assert abs(one.perfect.lines[0].value - exact) < 3.0 * standard_error(exact)


def test_how_far_a_tolerance_may_grow() -> None:
    one = tightened(board(off=1.0), 0.97)
    exact = brentq(lambda factor: exact_yield(factor, off=1.0) - 0.97, 1.0, 2.0)
    assert one.needed == 1.0
    slope = abs(exact_yield(exact + 0.01, off=1.0) - exact_yield(exact - 0.01, off=1.0)) / 0.02
    assert one.relaxed == pytest.approx(exact, abs=4.0 * standard_error(0.97) / slope)


def test_all_lines_together_are_judged_by_their_common_normal() -> None:
    known = lognormals(P1=0.2, P2=0.2, P3=0.2)
    lines = (product_line(known, {"P1": 0.8, "P2": 0.5}, name="one"),
             product_line(known, {"P2": 0.5, "P3": 0.8}, name="other"))
    both = board_of(known, *lines)
    one = tightening(alone(both, base_sides(both), frozenset({"P2.dk"})), "P2.dk", aim="together", target_yield=0.99)
    own, shared = 0.8 * math.log(1.2) / 3.0, 0.5 * math.log1p(0.5 * 0.2) / 3.0
    covariance = [[own**2 + shared**2, shared**2], [shared**2, own**2 + shared**2]]
    exact = float(multivariate_normal.cdf(np.full(2, math.log(1.1)), cov=covariance,
                                          lower_limit=np.full(2, math.log(0.9))))
    assert abs(one.halved.together.value - exact) < 3.0 * standard_error(exact)


def test_a_tolerance_that_reaches_no_line_changes_nothing() -> None:
    known = lognormals(**TOLERANCES, P9=0.5)
    other = board_of(known, product_line(known, POWERS))
    one = tightening(alone(other, base_sides(other), frozenset({"P9.dk"})), "P9.dk", aim="each line",
                     target_yield=0.5)
    assert one.gain.value == one.loss.value == 0.0
    assert len(set(one.together.tolist())) == 1


def test_weights_of_a_polynomial_through_its_places_are_exact() -> None:
    places = np.array([0.0, 0.5, 1.0, 1.5, 2.0])
    for at in (0.0, 0.37, 1.0, 1.9):
        assert lagrange_weights(places, at) @ (places**4 - 2.0 * places) == pytest.approx(at**4 - 2.0 * at, abs=1e-12)


def test_coupons_that_cannot_exist_fail_where_that_is_and_nowhere_else() -> None:
    """Above a Dk of 4.4 there is no section: the share below is exact at every factor, also between the places."""
    known = lognormals(P1=0.12)
    line = product_line(known, {"P1": 0.5}, limit=0.5)

    def answers(changed: Process, germ: FloatArray) -> tuple[FloatArray, BoolArray]:
        return line.answers(changed, germ)[0], ProcessDraws(changed, germ).value("P1.dk") < 4.4

    bounded = board_of(known, replace(line, answers=answers))
    one = tightened(bounded, 0.99)
    exact = [ndtr(math.log(1.1) / (math.log1p(factor * 0.12) / 3.0)) if factor else 1.0 for factor in one.factors]
    assert one.together == pytest.approx(np.array(exact), abs=4.0 / COUPONS)
