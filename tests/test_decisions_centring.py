"""Where to centre, on lines whose best place and yield are exact; and lots that a fabricator brings to the target."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import ndtr

from tests.decision_examples import COUPONS, board_of, lognormals, normal_etch, product_line, sum_line
from tolerance.decisions.centring import centre_of, chance_when_centred, log_failing_at, on_grid, path_of_moves
from tolerance.decisions.comparing import is_real, on_common_columns

SLOPE = -0.4e6  # ohm per metre: a micrometre wider is 0.4 ohm less
DEVIATION = 0.4 * 4.0  # ohm


@pytest.mark.parametrize("start", [47.0, 50.0, 52.5])
def test_a_normal_line_is_best_with_its_mean_on_the_target(start: float) -> None:
    known = normal_etch()
    board = board_of(known, sum_line(known, slope=SLOPE, start=start))
    path = path_of_moves(board.lines[0], board.germ, ["L1.etch"], low=-15e-6, high=15e-6, nominal=False)
    centre = centre_of([path])
    exact = (50.0 - start) / SLOPE
    assert centre.on_target == pytest.approx(exact, abs=0.02e-6)
    assert centre.best == pytest.approx(exact, abs=0.6e-6)  # the yield is flat there: 0.3 ohm off loses 1.4e-4
    share = board.share(path.sides(centre.best)).value
    exact_share = 1.0 - 2.0 * ndtr(-5.0 / DEVIATION)
    assert abs(share - exact_share) < 4.0 * math.sqrt(exact_share * (1.0 - exact_share) / COUPONS)
    assert not centre.at_end


def test_a_lognormal_line_is_best_with_its_median_midway_between_the_logarithms_of_the_limits() -> None:
    """Not where its mean is on the target: that is half its variance and half the curvature of the limits away."""
    known = lognormals(P1=0.24)
    line = product_line(known, {"P1": 1.0}, off=1.05, limit=0.2)
    board = board_of(known, line)
    path = path_of_moves(line, board.germ, ["P1.dk"], low=-0.6, high=0.6, nominal=True)
    centre = centre_of([path])
    deviation = math.log1p(0.24) / 3.0
    best = 4.0 * math.exp(0.5 * math.log(0.8 * 1.2)) / 1.05
    on_target = 4.0 * math.exp(-0.5 * deviation**2) / 1.05
    assert 4.0 + centre.best == pytest.approx(best, rel=3e-3)
    assert centre.on_target is not None
    assert 4.0 + centre.on_target == pytest.approx(on_target, rel=3e-4)
    half = 0.5 * math.log(1.2 / 0.8)
    exact = 1.0 - 2.0 * ndtr(-half / deviation)
    share = board.share(path.sides(centre.best)).value
    assert abs(share - exact) < 4.0 * math.sqrt(exact * (1.0 - exact) / COUPONS)


def test_the_end_of_what_is_looked_at_is_told() -> None:
    known = normal_etch()
    board = board_of(known, sum_line(known, slope=SLOPE, start=45.0), coupons=4096)
    path = path_of_moves(board.lines[0], board.germ, ["L1.etch"], low=-5e-6, high=5e-6, nominal=False)
    centre = centre_of([path])
    assert centre.at_end
    assert centre.best == pytest.approx(-5e-6, abs=1e-7)
    assert centre.on_target is None


def test_a_place_is_rounded_to_the_better_neighbour_on_the_grid() -> None:
    known = normal_etch()
    board = board_of(known, sum_line(known, slope=SLOPE, start=51.0))
    path = path_of_moves(board.lines[0], board.germ, ["L1.etch"], low=-15e-6, high=15e-6, nominal=False)
    failing = log_failing_at([path])
    assert on_grid(2.5e-6, 100e-6, None, failing) == 2.5e-6
    assert on_grid(2.5e-6, 100e-6, 5e-6, failing) in (0.0, pytest.approx(5e-6))
    assert on_grid(2.9e-6, 101.4e-6, 1e-6, failing) == pytest.approx(2.6e-6, abs=1e-12)  # drawn: 104 um
    assert on_grid(-3e-6, 101.0e-6, 2e-6, failing) == pytest.approx(-1e-6, abs=1e-12)  # 98 would be better than 100


def test_a_lot_that_is_brought_to_the_target_keeps_its_spread_and_what_is_left_over() -> None:
    """ln Z is normal, what is left over is normal: so is their sum."""
    known = lognormals(P1=0.15)
    line = product_line(known, {"P1": 0.8}, off=1.2)  # 20 % off: nothing passes as it is
    board = board_of(known, line)
    impedance = line.answers(line.process, board.germ)[0]
    possible = np.ones(board.coupons, dtype=np.bool_)
    for error in (0.0, 0.01, 0.03):
        chance = chance_when_centred(impedance, possible, line, error=error, lot_coupons=None)
        deviation = math.hypot(0.8 * math.log(1.15) / 3.0, error)
        exact = float(ndtr(math.log(1.1) / deviation) - ndtr(math.log(0.9) / deviation))
        assert np.mean(chance) == pytest.approx(exact, abs=4.0 * math.sqrt(exact * (1.0 - exact) / COUPONS))
    assert np.mean(chance_when_centred(impedance, ~possible, line, error=0.01, lot_coupons=None)) == 0.0


def test_what_a_lot_has_in_common_goes_when_each_lot_is_centred() -> None:
    lots, size, lot_part, own_part = 4096, 16, 0.05, 0.03
    chance = np.random.default_rng(0)
    logarithm = lot_part * chance.standard_normal((lots, 1)) + own_part * chance.standard_normal((lots, size))
    line = product_line(lognormals(P1=0.1), {"P1": 1.0})
    passing = chance_when_centred(50.0 * np.exp(logarithm).ravel(), np.ones(lots * size, dtype=np.bool_), line,
                                  error=0.0, lot_coupons=size)
    deviation = own_part * math.sqrt(1.0 - 1.0 / size)  # of what is left after the mean of the lot's own coupons
    exact = float(ndtr(math.log(1.1) / deviation) - ndtr(math.log(0.9) / deviation))
    assert np.mean(passing) == pytest.approx(exact, abs=5.0 * math.sqrt(exact * (1.0 - exact) / (lots * size)))


def test_a_difference_on_the_same_draws_holds_the_exact_one_and_tells_what_is_real() -> None:
    known, other = lognormals(P1=0.15, P2=0.1), lognormals(P1=0.14, P2=0.1)
    board = board_of(known, product_line(known, {"P1": 1.0, "P2": 1.0}, off=1.03))
    line = board.lines[0]
    before, after = board.sides(line, line.process), board.sides(line, other)
    difference = board.difference(after, before)

    def exact(tolerance: float) -> float:
        deviation = math.hypot(math.log1p(tolerance), math.log1p(0.1)) / 3.0
        return float(ndtr(math.log(1.1 / 1.03) / deviation) - ndtr(math.log(0.9 / 1.03) / deviation))

    assert difference.low < exact(0.14) - exact(0.15) < difference.high
    assert is_real(difference)
    assert not is_real(board.difference(before, before))
    none = board.difference(before, before)
    bound = 1.0 - 0.025 ** (1.0 / COUPONS)  # Clopper and Pearson 1934 for none of so many
    assert (none.value, none.low, none.high) == pytest.approx((0.0, -bound, bound), rel=1e-6)


def test_one_seed_gives_two_processes_the_same_draws_by_name() -> None:
    one, other = lognormals(P1=0.1, P2=0.2), lognormals(P2=0.1, P3=0.3)
    first, second = on_common_columns([one, other])
    assert [variable.name for variable in first.variables] == ["P1.dk", "P2.dk", "P3.dk"]
    assert [variable.name for variable in second.variables] == ["P1.dk", "P2.dk", "P3.dk"]
    assert [len(variable.members) for variable in first.variables] == [1, 1, 0]
    assert second.variables[1] == other.variables[0]
