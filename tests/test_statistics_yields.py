"""Yield, mean, deviation and capability with their intervals, on samples whose answer is known exactly."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats
from scipy.special import ndtr

from tests.process_examples import process, variable
from tolerance.arrays import FloatArray
from tolerance.errors import UnfinishedError
from tolerance.process.draws import REPLICATES, draw_process, sobol_uniforms
from tolerance.statistics.estimates import Interval, interval_of
from tolerance.statistics.yields import Limits, binomial_interval, histogram, judge, judge_line, share_interval

# A product of lognormal inputs: Z = 50 ohm x (width/nominal)^-0.5 (thickness/nominal)^0.6 (dk/nominal)^-0.4. Its
# logarithm is normal, so that yield, mean and deviation are closed forms (exact).
POWERS = np.array([-0.5, 0.6, -0.4])
TOLERANCES = np.array([0.10, 0.12, 0.05])
LOG_DEVIATION = float(np.linalg.norm(POWERS * np.log1p(TOLERANCES) / 3.0))
MEAN = 50.0 * np.exp(0.5 * LOG_DEVIATION**2)
DEVIATION = MEAN * np.sqrt(np.expm1(LOG_DEVIATION**2))


def product_impedance(coupons: int, seed: int) -> FloatArray:
    names = ("L1.foil", "P1.thickness", "P1.dk")
    inputs = [variable(name, 4.0, shape="lognormal", tolerance=float(tolerance))
              for name, tolerance in zip(names, TOLERANCES, strict=True)]
    draws = draw_process(process(*inputs), coupons=coupons, chance=np.random.default_rng(seed))
    logarithm = np.sum([power * np.log(draws.value(name) / 4.0)
                        for name, power in zip(names, POWERS, strict=True)], axis=0)
    return np.asarray(50.0 * np.exp(logarithm), dtype=np.float64)


def everywhere(impedance: FloatArray) -> np.ndarray[tuple[int, ...], np.dtype[np.bool_]]:
    return np.ones(impedance.shape, dtype=np.bool_)


def holds(interval: Interval, exact: float) -> bool:
    return interval.low <= exact <= interval.high


def test_interval_from_replicates_is_students() -> None:
    """scipy's own (general library)."""
    estimates = np.array([4.0, 1.0, 7.0, 2.5, 3.0, 8.0, 6.0, 5.5])
    expected = stats.t.interval(0.95, 7, loc=estimates.mean(), scale=stats.sem(estimates))
    interval = interval_of(estimates)
    assert (interval.low, interval.high) == pytest.approx(expected, rel=1e-12)
    moved = interval_of(estimates, value=1.0)
    assert moved.value == 1.0
    assert moved.high - moved.low == pytest.approx(expected[1] - expected[0], rel=1e-12)


@pytest.mark.parametrize(("below", "above"), [(1.5, 1.8), (2.5, 3.0)])
def test_intervals_hold_the_exact_values_in_95_of_100_runs(below: float, above: float) -> None:
    limits = Limits(50.0 * np.exp(-below * LOG_DEVIATION), 50.0 * np.exp(above * LOG_DEVIATION))
    exact = {
        "inside": ndtr(above) - ndtr(-below), "below": ndtr(-below), "above": ndtr(-above),
        "mean": MEAN, "deviation": DEVIATION, "cp": (limits.high - limits.low) / (6.0 * DEVIATION),
        "cpk": min(limits.high - MEAN, MEAN - limits.low) / (3.0 * DEVIATION),
    }
    runs = 150
    held = dict.fromkeys(exact, 0)
    for seed in range(runs):
        impedance = product_impedance(2048, seed)
        result = judge_line(impedance, everywhere(impedance), limits, replicates=REPLICATES)
        for name, value in exact.items():
            held[name] += holds(getattr(result, name), value)
    # four standard errors of the count of a share of 0.95; shares of rare coupons may be held more often
    fewest = runs * 0.95 - 4.0 * np.sqrt(runs * 0.95 * 0.05)
    assert min(held.values()) >= fewest, held
    assert max(held[name] for name in ("mean", "deviation", "cp", "cpk")) < runs, held


def test_estimates_of_a_large_sample() -> None:
    limits = Limits(50.0 * np.exp(-2.0 * LOG_DEVIATION), 50.0 * np.exp(2.2 * LOG_DEVIATION))
    impedance = product_impedance(65536, 0)
    result = judge_line(impedance, everywhere(impedance), limits, replicates=REPLICATES)
    exact = ndtr(2.2) - ndtr(-2.0)
    assert result.inside.value == pytest.approx(exact, abs=4.0 * np.sqrt(exact * (1.0 - exact) / 65536))
    assert result.inside.high - result.inside.low < 0.0025
    assert result.mean.value == pytest.approx(MEAN, abs=4.0 * DEVIATION / 256.0)
    assert result.inside.value + result.below.value + result.above.value == pytest.approx(1.0, abs=1e-12)
    assert result.impossible == 0


def sample_of(mean: float, deviation: float, coupons: int = 4096) -> FloatArray:
    """A sample with exactly this mean and deviation."""
    values = stats.norm.ppf((np.random.default_rng(0).permutation(coupons) + 0.5) / coupons)
    return np.asarray(mean + deviation * (values - values.mean()) / values.std(ddof=1), dtype=np.float64)


def test_capability_example() -> None:
    """NIST/SEMATECH e-Handbook of Statistical Methods, section 6.1.6: limits 20 and 8, mean 16, deviation 2 give
    Cp 1.0 and Cpk 0.6667. Recalled from memory; the arithmetic confirms it."""
    impedance = sample_of(16.0, 2.0)
    result = judge_line(impedance, everywhere(impedance), Limits(8.0, 20.0), replicates=REPLICATES)
    assert result.cp is not None
    assert result.cpk is not None
    assert result.cp.value == pytest.approx(1.0, rel=1e-9)
    assert result.cpk.value == pytest.approx(0.6667, abs=5e-5)


@pytest.mark.parametrize(("count", "trials", "low", "high"), [(2, 50, 0.00488, 0.13714), (98, 100, 0.92962, 0.99757)])
def test_binomial_interval(count: int, trials: int, low: float, high: float) -> None:
    """The definition evaluated by hand with beta quantiles, and scipy's exact binomial test (general library)."""
    interval = binomial_interval(count, trials)
    assert (interval.low, interval.high) == pytest.approx((low, high), abs=5e-6)
    library = stats.binomtest(count, trials).proportion_ci(0.95, method="exact")
    assert (interval.low, interval.high) == pytest.approx((library.low, library.high), rel=1e-9)


@pytest.mark.parametrize("passes", [True, False])
def test_a_yield_of_all_or_none_has_an_interval(passes: bool) -> None:
    """Exact: with none of n seen, (1 - p)^n = 0.025 gives the far end."""
    interval = share_interval(np.full(4096, passes), replicates=REPLICATES)
    far_end = 1.0 - 0.025 ** (1.0 / 4096)
    expected = (1.0 - far_end, 1.0) if passes else (0.0, far_end)
    assert (interval.low, interval.high) == pytest.approx(expected, rel=1e-9)
    assert interval.value == float(passes)


def test_equal_replicates_do_not_make_a_zero_width() -> None:
    verdicts = np.tile(np.arange(512) != 7, REPLICATES)  # one failure in each replicate
    interval = share_interval(verdicts, replicates=REPLICATES)
    assert interval.low < interval.value < interval.high


def test_intervals_hold_plain_numbers() -> None:
    impedance = product_impedance(1024, 1)
    result = judge(impedance[None], everywhere(impedance[None]), (Limits(48.0, 52.0),), replicates=REPLICATES,
                   impedance_error=np.array([0.05]))
    line = result.lines[0]
    for interval in (result.inside, line.inside, line.below, line.above, line.mean, line.deviation, line.cp, line.cpk):
        assert interval is not None
        assert {type(end) for end in (interval.value, interval.low, interval.high)} == {float}


def test_limits_themselves_pass() -> None:
    impedance = np.tile([45.0, 55.0, np.nextafter(45.0, 0.0), np.nextafter(55.0, 99.0)], 64)
    result = judge_line(impedance, everywhere(impedance), Limits(45.0, 55.0), replicates=REPLICATES)
    assert (result.inside.value, result.below.value, result.above.value) == (0.5, 0.25, 0.25)


def test_impossible_coupons_fail_and_have_no_part_in_the_mean() -> None:
    impedance = sample_of(50.0, 1.0)
    possible = np.arange(4096) % 4 != 0
    shown = np.where(possible, impedance, np.nan)
    result = judge_line(shown, possible, Limits(0.0, 100.0), replicates=REPLICATES)
    assert result.impossible == 1024
    assert result.inside.value == 0.75
    assert result.below.value == result.above.value == 0.0
    assert result.mean.value == pytest.approx(np.mean(impedance[possible]), rel=1e-12)
    assert np.isfinite(result.deviation.high)


def test_a_line_that_can_hardly_exist_is_refused() -> None:
    impedance = sample_of(50.0, 1.0)
    with pytest.raises(UnfinishedError, match="1 of 4096 coupons"):
        judge_line(impedance, np.arange(4096) == 5, Limits(45.0, 55.0), replicates=REPLICATES)


def test_the_coupon_as_a_whole_keeps_the_correlation_of_its_lines() -> None:
    one, other = sample_of(50.0, 1.0), sample_of(50.0, 1.0)[::-1].copy()
    limits = (Limits(49.0, 51.0), Limits(49.0, 51.0))
    same = judge(np.stack([one, one]), everywhere(np.stack([one, one])), limits, replicates=REPLICATES)
    assert same.inside.value == same.lines[0].inside.value
    mixed = judge(np.stack([one, other]), everywhere(np.stack([one, other])), limits, replicates=REPLICATES)
    both = np.mean((np.abs(one - 50.0) <= 1.0) & (np.abs(other - 50.0) <= 1.0))
    assert mixed.inside.value == pytest.approx(both, abs=1e-12)
    possible = np.stack([np.arange(4096) != 0, np.arange(4096) != 9])
    broken = judge(np.stack([one, one]), possible, limits, replicates=REPLICATES)
    assert broken.impossible == 2
    passes = np.abs(one - 50.0) <= 1.0
    assert passes[[0, 9]].any()
    assert broken.inside.value == (np.count_nonzero(passes) - np.count_nonzero(passes[[0, 9]])) / 4096


def test_the_error_of_the_impedance_moves_the_ends_out() -> None:
    impedance = product_impedance(4096, 1)
    limits = Limits(48.0, 52.0)
    plain, wide = (judge_line(impedance, everywhere(impedance), limits, replicates=REPLICATES, impedance_error=error)
                   for error in (0.0, 0.05))
    near_inside = np.mean((np.abs(impedance - 50.0) <= 2.0) & (np.abs(impedance - 50.0) > 1.95))
    assert plain.inside.low - wide.inside.low == pytest.approx(near_inside, abs=1e-12)
    for name in ("inside", "below", "above", "mean", "deviation", "cp", "cpk"):
        before, after = getattr(plain, name), getattr(wide, name)
        assert after.value == before.value
        assert after.low < before.low < before.high < after.high
    assert wide.mean.high - plain.mean.high == pytest.approx(0.05)
    joint = judge(impedance[None], everywhere(impedance[None]), (limits,), replicates=REPLICATES,
                  impedance_error=np.array([0.05]))
    assert joint.inside == wide.inside


def test_a_line_that_nothing_moves_has_no_capability() -> None:
    impedance = np.full(1024, 50.1)
    result = judge_line(impedance, everywhere(impedance), Limits(45.0, 55.0), replicates=REPLICATES)
    assert result.cp is None
    assert result.cpk is None
    assert result.deviation == Interval(0.0, 0.0, 0.0)
    assert result.mean.value == pytest.approx(50.1, rel=1e-14)
    assert result.mean.low == result.mean.value == result.mean.high


def test_histogram_counts_every_coupon() -> None:
    impedance = sample_of(50.0, 1.0)
    edges, counts = histogram(impedance, bins=40)
    assert counts.sum() == 4096
    assert edges.shape == (41,)
    assert (edges[0], edges[-1]) == (impedance.min(), impedance.max())


@pytest.mark.parametrize("seed", range(12))
def test_one_variable_that_decides_alone_leaves_a_doubt_of_one_coupon_in_each_sample(seed: int) -> None:
    """Exact: the share of uniforms below 0.2444 is 0.2444; Sobol' points of one variable count it almost the same."""
    draws = [sobol_uniforms(1, 32, chance)[:, 0] for chance in np.random.default_rng(seed).spawn(8)]
    interval = share_interval(np.concatenate(draws) < 0.2444, replicates=8)
    assert interval.low < 0.2444 < interval.high
