"""Yield against the limit: beside the normal distribution, and what must hold of any sample."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import norm

from tolerance.statistics.against_limit import LimitSample, limit_grid, yields_by_limit
from tolerance.statistics.yields import Limits, judge

REPLICATES, BLOCK = 8, 4096


def normal_sample(*deviations: float, error: float = 0.0) -> LimitSample:
    """Lines of 50 ohm with so large deviations, all independent; random points, so standard errors are binomial."""
    shape = (len(deviations), REPLICATES * BLOCK)
    germ = np.random.default_rng(3).normal(size=shape)
    impedance = 50.0 + np.array(deviations)[:, None] * germ
    return LimitSample(impedance, np.ones(shape, dtype=np.bool_), np.full(len(deviations), 50.0),
                       np.full(len(deviations), error), REPLICATES)


def test_a_normal_impedance_follows_the_normal_distribution() -> None:
    sample, limits = normal_sample(2.0, 3.0), limit_grid(0.10)
    lines, together = yields_by_limit(sample, limits, target_yield=0.99)
    exact = [2.0 * norm.cdf(limits * 50.0 / deviation) - 1.0 for deviation in (2.0, 3.0)]  # P(|Z| < limit), exact
    for curve, share in ((lines[0], exact[0]), (lines[1], exact[1]), (together, exact[0] * exact[1])):
        standard_error = np.sqrt(share * (1.0 - share) / (REPLICATES * BLOCK))
        assert np.all(np.abs(curve.value - share) < 4.0 * standard_error + 1e-12)
        inside = (curve.low <= share) & (share <= curve.high)
        assert inside.mean() > 0.8  # 95 % each, the points of a curve being correlated


def test_at_a_lines_own_limit_it_is_the_yield_that_is_judged() -> None:
    sample = normal_sample(2.0, error=0.01)
    judged = judge(sample.impedance, sample.possible, (Limits(45.0, 55.0),), replicates=REPLICATES,
                   impedance_error=sample.error)
    lines, _ = yields_by_limit(sample, np.array([0.0, 0.10]), target_yield=0.99)
    for name in ("value", "low", "high"):
        assert getattr(lines[0], name)[1] == pytest.approx(getattr(judged.lines[0].inside, name), abs=1e-9)


def test_in_lots_too_it_is_the_yield_that_is_judged() -> None:
    """Rare failures that come by the lot: as many trials as in the judgement."""
    impedance = np.full((1, REPLICATES * BLOCK), 50.0)
    impedance[0, :64], impedance[0, 6400:6464] = 56.0, 44.0  # two of 512 lots of 64
    possible = np.ones(impedance.shape, dtype=np.bool_)
    sample = LimitSample(impedance, possible, np.array([50.0]), np.zeros(1), REPLICATES, cluster=64)
    judged = judge(impedance, possible, (Limits(45.0, 55.0),), replicates=REPLICATES, cluster=64)
    lines, _ = yields_by_limit(sample, np.array([0.0, 0.10]), target_yield=0.99)
    for name in ("value", "low", "high"):
        assert getattr(lines[0], name)[1] == pytest.approx(getattr(judged.lines[0].inside, name), abs=1e-12)


def test_a_wider_limit_never_passes_fewer_and_impossible_coupons_never_pass() -> None:
    sample = normal_sample(2.0)
    sample.possible[0, : BLOCK // 2] = False  # an eighth of an eighth over two: 1/16 of the coupons
    lines, together = yields_by_limit(sample, limit_grid(0.5), target_yield=0.99)
    assert np.all(np.diff(lines[0].value) >= 0.0)
    assert lines[0].value[-1] == 1.0 - 1.0 / 16.0
    assert np.array_equal(lines[0].value, together.value)
    assert np.all((lines[0].low <= lines[0].value) & (lines[0].value <= lines[0].high))
    assert np.all(lines[0].high > lines[0].low)  # never of zero width, not even where nothing passes


def test_the_limit_that_the_target_yield_needs_is_the_quantile_of_the_distribution() -> None:
    lines, _ = yields_by_limit(normal_sample(2.0), limit_grid(0.10), target_yield=0.99)
    exact = float(norm.ppf(0.995)) * 2.0 / 50.0  # two-sided normal quantile, exact
    density = 2.0 * norm.pdf(norm.ppf(0.995)) * 50.0 / 2.0  # of how far a coupon lies off
    standard_error = np.sqrt(0.99 * 0.01 / (REPLICATES * BLOCK)) / density  # of a sample quantile, asymptotic
    assert lines[0].needed is not None
    assert abs(lines[0].needed.value - exact) < 4.0 * standard_error
    assert lines[0].needed.low < exact < lines[0].needed.high


def test_where_too_many_coupons_are_impossible_no_limit_is_wide_enough() -> None:
    sample = normal_sample(2.0)
    sample.possible[0, ::50] = False  # two in a hundred
    assert yields_by_limit(sample, limit_grid(0.10), target_yield=0.99)[1].needed is None


@pytest.mark.parametrize(("widest", "step", "last"), [(0.10, 0.005, 0.20), (0.12, 0.005, 0.24), (0.07, 0.002, 0.14),
                                                      (0.05, 0.002, 0.10), (0.5, 0.02, 1.0)])
def test_limits_go_in_round_steps_to_twice_the_widest(widest: float, step: float, last: float) -> None:
    grid = limit_grid(widest)
    assert grid[0] == 0.0
    assert np.diff(grid) == pytest.approx(step)
    assert grid[-1] == pytest.approx(last)
