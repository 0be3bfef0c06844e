"""Acceptance of lots by sample: tables and integrals of independent and of alike coupons."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from tests.nested_examples import NODE_WEIGHTS, NODES
from tests.process_examples import variable
from tolerance.arrays import read_only
from tolerance.process.draws import REPLICATES, LotSize, Process, Variable
from tolerance.process.lots import draw_lots
from tolerance.scenario.amounts import LevelShares
from tolerance.statistics.acceptance import (
    LotAcceptance,
    SamplingPlan,
    chance_of_few_failures,
    judge_lot_acceptance,
)
from tolerance.statistics.reading import Reading, acceptance
from tolerance.statistics.yields import Limits

SIZE = LotSize(10, 2)
LIMIT = Limits(46.0, 54.0)


@pytest.mark.parametrize(("sample_size", "nearly_all", "hardly_any"), [
    (5, 0.0102, 0.369), (8, 0.0064, 0.250), (13, 0.0039, 0.162), (20, 0.0026, 0.109), (32, 0.0016, 0.069),
    (50, 0.0010, 0.045), (125, 0.0004, 0.018),
])
def test_accept_on_zero(sample_size: int, nearly_all: float, hardly_any: float) -> None:
    """Shares of failing coupons at which 95 % and 10 % are accepted: (1 - p)^n, arithmetic; p has the digits shown."""
    for failing, digits, expected in ((nearly_all, 5e-5, 0.95), (hardly_any, 5e-4, 0.10)):
        low, high = (chance_of_few_failures(np.full((1, sample_size), 1.0 - failing - side * digits), 0)[0]
                     for side in (1.0, -1.0))
        assert low <= expected <= high


@pytest.mark.parametrize("most", [0, 1, 3, 7])
def test_failures_among_equal_trials_are_binomial(most: int) -> None:
    """scipy's binomial law (general library)."""
    found = chance_of_few_failures(np.full((2, 8), 0.93), most)
    assert found == pytest.approx(np.full(2, stats.binom.cdf(most, 8, 0.07)), rel=1e-12)


def test_failures_among_unequal_trials() -> None:
    """By hand: trials that pass with 0.9, 0.8 and 0.5: none fails 0.36; one fails 0.04 + 0.09 + 0.36 = 0.49."""
    trials = np.array([[0.9, 0.8, 0.5]])
    assert chance_of_few_failures(trials, 0)[0] == pytest.approx(0.36, rel=1e-12)
    assert chance_of_few_failures(trials, 1)[0] == pytest.approx(0.36 + 0.49, rel=1e-12)


def alike(lot_share: float, *, coupons: int, seed: int, reading: Reading, plan: SamplingPlan) -> LotAcceptance:
    """Z = 50 + 2 x germ; the lot has `lot_share` of its variance, the coupon the rest."""
    one = variable("P1.thickness", 1.0, tolerance=0.3)
    levels = LevelShares(lot=lot_share, coupon=1.0 - lot_share)
    process = Process((Variable(one.name, one.members, levels),), {one.name: 1.0}, read_only(np.eye(1)))
    germ = draw_lots(process, SIZE, coupons=coupons, chance=np.random.default_rng(seed)).germ[:, 0]
    impedance = (50.0 + 2.0 * germ).reshape(-1, SIZE.coupons)
    return judge_lot_acceptance(
        (impedance >= LIMIT.low) & (impedance <= LIMIT.high), acceptance(impedance, LIMIT, reading), plan, SIZE,
        replicates=REPLICATES, chance=np.random.default_rng(seed + 1000))


def exact_acceptance(lot_share: float, error: float, plan: SamplingPlan) -> tuple[float, float]:
    """Chance that a lot is accepted and quality of accepted lots, by Gauss-Hermite (numpy) over the lot's normal.

    Given the lot, coupons are independent; a reading is normal about the lot's mean with both variances. For accept on
    zero: of a lot's m coupons, n were read and accepted, the others pass as any of that lot.
    """
    mean, coupon = 50.0 + 2.0 * np.sqrt(lot_share) * NODES, 2.0 * np.sqrt(1.0 - lot_share)
    passes = stats.norm.cdf((LIMIT.high - mean) / coupon) - stats.norm.cdf((LIMIT.low - mean) / coupon)
    read = np.hypot(coupon, error)
    reads = stats.norm.cdf((LIMIT.high - mean) / read) - stats.norm.cdf((LIMIT.low - mean) / read)
    accepted = stats.binom.cdf(plan.accept_number, plan.sample_size, 1.0 - reads)
    if error:
        return float(NODE_WEIGHTS @ accepted), np.nan
    others = SIZE.coupons - plan.sample_size
    good = reads**plan.sample_size * (plan.sample_size + others * passes) / SIZE.coupons
    return float(NODE_WEIGHTS @ accepted), float(NODE_WEIGHTS @ good / (NODE_WEIGHTS @ accepted))


@pytest.mark.parametrize("lot_share", [0.0, 0.3, 0.8])
@pytest.mark.parametrize("plan", [SamplingPlan(8, 0), SamplingPlan(8, 1)])
@pytest.mark.parametrize("error", [0.0, 0.5])
def test_lots_of_alike_coupons(lot_share: float, plan: SamplingPlan, error: float) -> None:
    share = max(lot_share, 1e-12)  # the smallest keeps the coupons together as lots
    result = alike(share, coupons=40_000, seed=3, reading=Reading(error), plan=plan)
    accepted, quality = exact_acceptance(share, error, plan)
    half = 0.5 * (result.accepted.high - result.accepted.low)
    assert half < 0.025
    assert result.accepted.value == pytest.approx(accepted, abs=2.0 * half)
    coupons_accepted = stats.norm.cdf(4.0 / np.hypot(2.0, error)) * 2.0 - 1.0
    independent = stats.binom.cdf(plan.accept_number, plan.sample_size, 1.0 - coupons_accepted)
    assert result.if_independent == pytest.approx(independent, abs=0.02)
    if lot_share == 0.8 and plan.accept_number == 0:
        assert result.accepted.low > result.if_independent + 0.05, "alike coupons fail together"
    if plan.accept_number == 0 and not error:
        assert result.quality is not None
        assert result.quality.value == pytest.approx(quality, abs=2.0 * (result.quality.high - result.quality.low))
        assert result.quality.high - result.quality.low < 0.01


def test_intervals_hold_the_exact_acceptance_and_quality() -> None:
    """95 of 100 intervals, within four standard errors."""
    plan, runs = SamplingPlan(8, 0), 60
    exact = exact_acceptance(0.5, 0.0, plan)
    held = np.zeros(2)
    for seed in range(runs):
        result = alike(0.5, coupons=4000, seed=seed, reading=Reading(), plan=plan)
        assert result.quality is not None
        held += [each.low <= value <= each.high
                 for each, value in zip((result.accepted, result.quality), exact, strict=True)]
    assert np.all(held >= runs * 0.95 - 4.0 * np.sqrt(runs * 0.95 * 0.05)), held


def test_the_operating_characteristic_of_true_readings_is_hypergeometric() -> None:
    """Exact whatever coupons share, the sample being any of the lot's: scipy's law (general library)."""
    plan = SamplingPlan(8, 1)
    result = alike(0.5, coupons=80_000, seed=5, reading=Reading(), plan=plan)
    assert sum(point.share_of_lots for point in result.curve) == pytest.approx(1.0, abs=1e-12)
    assert [point.failing for point in result.curve] == sorted(point.failing for point in result.curve)
    for point in result.curve:
        assert (point.above < point.failing <= point.up_to) or point.failing == point.up_to == 0.0
        half = 0.5 * (point.accepted.high - point.accepted.low)
        assert point.accepted.value == pytest.approx(point.as_known, abs=2.0 * half)
    single = next(point for point in result.curve if point.up_to == 0.05)  # one of 20 coupons fails
    assert single.as_known == pytest.approx(1.0, abs=1e-12)
    # two of 20 fail: both in the sample of 8 with 8 x 7 / (20 x 19)
    double = next(point for point in result.curve if point.up_to == 0.10)
    assert double.as_known == pytest.approx(1.0 - 56.0 / 380.0, rel=1e-12)


def test_lots_that_are_all_good_or_all_bad() -> None:
    """Exact: what is accepted is good, and as often as lots are; the binomial formula is far off."""
    good = (np.arange(800) % 10 != 0)[:, None]
    passing = np.repeat(good, SIZE.coupons, axis=1)
    result = judge_lot_acceptance(passing, passing.astype(np.float64), SamplingPlan(8, 0), SIZE,
                                  replicates=REPLICATES, chance=np.random.default_rng(1))
    assert result.accepted.value == pytest.approx(0.9, rel=1e-12)
    assert result.quality is not None
    assert result.quality.value == 1.0
    assert result.if_independent == pytest.approx(0.9**8, rel=1e-12)


@pytest.mark.parametrize("passes", [True, False])
def test_all_or_no_lots_accepted_have_an_interval(passes: bool) -> None:
    """Exact: with none of n lots seen, (1 - p)^n = 0.025 gives the far end."""
    passing = np.full((800, SIZE.coupons), passes)
    result = judge_lot_acceptance(passing, passing.astype(np.float64), SamplingPlan(8, 0), SIZE,
                                  replicates=REPLICATES, chance=np.random.default_rng(1))
    far_end = 0.025 ** (1.0 / 800)
    expected = (far_end, 1.0) if passes else (0.0, 1.0 - far_end)
    assert (result.accepted.low, result.accepted.high) == pytest.approx(expected, rel=1e-9)
    if passes:
        assert result.quality is not None
        assert result.quality.low < 1.0
    else:
        assert result.quality is None
