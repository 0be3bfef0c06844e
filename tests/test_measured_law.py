"""Laws taken from readings: against scipy, exact distributions, and the rate at which their intervals cover."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from scipy.stats.mstats import hdquantiles

from tolerance.arrays import FloatArray
from tolerance.process.laws import Law, quantile
from tolerance.process.measured import GRID, measured_law
from tolerance.scenario.amounts import Amount

#: weights in pounds of eleven men, the example of Shapiro and Wilk 1965 (W = 0.79); from memory
MEN = np.array([148.0, 154, 158, 160, 161, 162, 166, 170, 182, 195, 236])


def test_the_test_of_fit() -> None:
    """Source: Shapiro and Wilk 1965, the eleven weights: W = 0.79, refused at 1 % (from memory); p 0.0067 by R."""
    law = measured_law(MEN)
    assert law.p_normal == pytest.approx(0.0067, abs=3e-4)
    assert law.method == "smoothed", "a lognormal is refused as well"


@pytest.mark.parametrize(("draw", "count", "method"), [
    (lambda chance, n: chance.normal(100e-6, 3e-6, n), 30, "normal"),
    (lambda chance, n: np.exp(chance.normal(0.0, 0.6, n)), 40, "lognormal"),
    (lambda chance, n: np.concatenate([chance.normal(0, 0.1, n // 2), chance.normal(3, 0.1, n - n // 2)]), 40,
     "smoothed"),
    (lambda chance, n: chance.normal(100e-6, 3e-6, n), 50, "smoothed"),
])
def test_which_law_is_taken(draw: Callable[[np.random.Generator, int], FloatArray], count: int, method: str) -> None:
    readings = draw(np.random.default_rng(4), count)
    law = measured_law(readings)
    assert law.method == method
    germ = np.random.default_rng(5).standard_normal(200_000)
    value = law.value(germ)
    if method != "lognormal":
        assert np.mean(value) == pytest.approx(np.mean(readings), abs=0.01 * float(np.std(readings)))
        assert np.std(value) == pytest.approx(np.std(readings, ddof=1), rel=0.01)


def test_smoothed_quantiles_are_those_of_harrell_and_davis_stretched() -> None:
    """scipy.stats.mstats.hdquantiles, a general library; the stretch keeps mean and deviation and is linear."""
    readings = np.random.default_rng(2).gamma(3.0, size=80)
    law = measured_law(readings)
    germ = law.germs[1 + GRID // 10 : -1 - GRID // 10 : 20]
    exact = np.asarray(hdquantiles(readings, prob=stats.norm.cdf(germ)))
    slope, offset = np.polyfit(exact, law.value(germ), 1)
    assert law.value(germ) == pytest.approx(offset + slope * exact, abs=1e-6)
    assert 0.95 < slope < 1.1


def test_many_readings_give_their_distribution_back() -> None:
    gamma = stats.gamma(4.0)
    law = measured_law(np.asarray(gamma.rvs(20_000, random_state=np.random.default_rng(6))))
    germ = np.linspace(-2.5, 2.5, 21)
    share = stats.norm.cdf(germ)
    error = np.sqrt(share * (1.0 - share) / 20_000)
    assert np.all(np.abs(gamma.cdf(law.value(germ)) - share) < 4.0 * error)


READINGS = st.lists(st.floats(0.5, 2.0), min_size=5, max_size=90)


@given(readings=READINGS, germs=st.lists(st.floats(-6.5, 6.5), min_size=2, max_size=12))
def test_values_rise_and_are_finite(readings: list[float], germs: list[float]) -> None:
    law = measured_law(np.array(readings))
    value = law.value(np.sort(germs))
    assert np.all(np.isfinite(value))
    assert np.all(np.diff(value) >= -1e-12)
    again = law.value(law.resampled(np.sort(germs), np.random.default_rng(0)))
    assert np.all(np.isfinite(again))


@pytest.mark.parametrize("readings", [
    np.random.default_rng(1).normal(5.0, 1.0, 20), np.random.default_rng(1).gamma(3.0, size=70),
    np.exp(np.random.default_rng(4).normal(0.0, 0.6, 40)),
])
def test_germ_is_the_inverse_of_value(readings: FloatArray) -> None:
    law, germ = measured_law(readings), np.linspace(-4.0, 4.0, 33)
    assert law.germ(law.value(germ)) == pytest.approx(germ, abs=1e-6)


def test_equal_readings_do_not_vary() -> None:
    law = measured_law(np.full(8, 4.1))
    assert law.value(np.array([-5.0, 0.0, 5.0])) == pytest.approx(np.full(3, 4.1))
    assert law.resampled(np.array([1.0]), np.random.default_rng(0)) == pytest.approx([1.0])


def test_a_shift_moves_it() -> None:
    measured = measured_law(np.random.default_rng(1).normal(100e-6, 1e-6, 20))
    plain, shifted = (Law("measured", 98e-6, shift=shift, measured=measured)
                      for shift in (None, Amount(2e-6, relative=False)))
    germ = np.linspace(-3, 3, 7)
    assert quantile(shifted, germ, reference=98e-6) == pytest.approx(quantile(plain, germ, reference=98e-6) + 2e-6)


def test_means_of_other_fitted_laws_are_distributed_as_student_has_it() -> None:
    """Exact: (mean' - mean) sqrt(n) / s has Student's t with n - 1 degrees; (s'/s)^2 is (n - 1) over chi-squared."""
    readings = np.random.default_rng(3).normal(0.0, 1.0, 12)
    law, chance = measured_law(readings), np.random.default_rng(8)
    pairs = np.array([law.value(law.resampled(np.array([0.0, 1.0]), chance)) for _ in range(4000)])
    student = (pairs[:, 0] - law.mean) * np.sqrt(12) / law.deviation
    chi = 11 * (law.deviation / (pairs[:, 1] - pairs[:, 0])) ** 2
    assert stats.kstest(student, stats.t(11).cdf).pvalue > 0.01
    assert stats.kstest(chi, stats.chi2(11).cdf).pvalue > 0.01


def test_shares_below_sorted_readings_are_those_of_sorted_uniforms() -> None:
    """Exact, whatever the law: the share below the k-th of n readings is Beta(k, n + 1 - k) (Wilks 1941)."""
    law, chance = measured_law(np.sort(np.random.default_rng(3).normal(0.0, 1.0, 60))), np.random.default_rng(8)
    germ = stats.norm.ppf((np.arange(8192) + 0.5) / 8192)
    for rank in (1, 5, 30, 60):
        limit = law.germ(law.knots[rank - 1 : rank])[0]
        shares = np.array([np.mean(law.resampled(germ, chance) <= limit) for _ in range(400)])
        assert stats.kstest(shares, stats.beta(rank, 61 - rank).cdf).pvalue > 0.01, rank


GERM = np.asarray(stats.norm.ppf((np.arange(1024) + 0.5) / 1024))


@pytest.mark.parametrize(("law", "count", "low", "high"), [
    (stats.norm(), 20, -2.0, 2.0), (stats.norm(), 12, -1.5, 2.5), (stats.norm(), 80, -2.0, 2.0),
    (stats.gamma(4.0), 100, 1.0, 8.0), (stats.uniform(), 60, 0.05, 0.98),
], ids=["20 normal", "12 normal, off centre", "80 normal", "100 gamma", "60 uniform"])
def test_the_interval_of_a_yield_covers_the_true_one(law: Any, count: int, low: float, high: float) -> None:
    """95 % is intended. Over 400 samples of readings it was 93 to 96 %, and the true yield lay under the interval in
    0.3 to 1 %: the interval errs towards too low a yield. Here fewer samples, each bound with three standard errors.
    """
    truth, samples = float(law.cdf(high) - law.cdf(low)), 120
    under = over = 0
    for seed in range(samples):
        chance = np.random.default_rng(seed)
        measured = measured_law(np.asarray(law.rvs(count, random_state=chance)))
        others = [measured.value(measured.resampled(GERM, chance)) for _ in range(200)]
        yields = [float(np.mean((value >= low) & (value <= high))) for value in others]
        under += bool(truth < np.quantile(yields, 0.025))
        over += bool(truth > np.quantile(yields, 0.975))
    assert 1.0 - (under + over) / samples == pytest.approx(0.95, abs=0.03 + 3.0 * np.sqrt(0.95 * 0.05 / samples))
    assert under / samples < 0.025 + 3.0 * np.sqrt(0.025 * 0.975 / samples)
