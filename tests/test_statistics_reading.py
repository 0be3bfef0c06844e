"""Risks of the impedance test against the integrals of JCGM 106, and the guard bands that hold them."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, optimize, stats

from tolerance.arrays import FloatArray
from tolerance.statistics.reading import (
    FALSE_ACCEPTS_WANTED,
    Coupons,
    Reading,
    acceptance,
    guard_band_for,
    judge_readings,
)
from tolerance.statistics.yields import Limits

PRIOR, ERROR, LIMIT = 0.12, 0.04, Limits(-0.2, 0.2)


def coupons_of(impedance: FloatArray, *limits: Limits, error: float = 0.0, cluster: int = 1) -> Coupons:
    """Coupons with these impedances [ohm] (coupons,) on every line."""
    values = np.stack([impedance] * len(limits))
    return Coupons(values, np.ones(values.shape, dtype=np.bool_), limits, np.full(len(limits), error), 8, cluster)


def normal_sample(mean: float, deviation: float, count: int = 65536) -> FloatArray:
    """Evenly spread over the probability, shuffled: integrals over it are those over the normal."""
    shares = (np.random.default_rng(0).permutation(count) + 0.5) / count
    return np.asarray(mean + deviation * stats.norm.ppf(shares), dtype=np.float64)


def exact_risks(guard_band: float, bias: float = 0.0) -> tuple[float, float]:
    """Consumer's and producer's risk of the case: scipy's quadrature of the definition (general library)."""
    def accepted(true: float) -> float:
        high, low = 0.2 - guard_band - bias, -0.2 + guard_band - bias
        return float(stats.norm.cdf((high - true) / ERROR) - stats.norm.cdf((low - true) / ERROR))

    def prior(true: float) -> float:
        return float(stats.norm.pdf(true, scale=PRIOR))

    outside = sum(integrate.quad(lambda true: prior(true) * accepted(true), *ends)[0]
                  for ends in ((-1.2, -0.2), (0.2, 1.2)))
    inside = integrate.quad(lambda true: prior(true) * (1.0 - accepted(true)), -0.2, 0.2)[0]
    return float(outside), float(inside)


@pytest.mark.parametrize(("guard_band", "false_accepts", "false_rejects", "digits"), [
    (0.0, 0.0189, 0.0372, 5e-5), (ERROR, 0.0043, 0.1147, 5e-5), (2.0 * ERROR, 0.00047, 0.2477, 5e-5),
])
def test_guard_band_case(guard_band: float, false_accepts: float, false_rejects: float, digits: float) -> None:
    """Prior N(0, 0.12), reading 0.04, limits +-0.2: the case of JCGM 106:2012, recalled from memory; the numbers are
    the integrals of its definition, computed independently, and again here by scipy."""
    result = judge_readings(coupons_of(normal_sample(0.0, PRIOR), LIMIT), Reading(ERROR, 0.0, guard_band))
    assert result.false_accepts.value == pytest.approx(false_accepts, abs=digits)
    assert result.false_rejects.value == pytest.approx(false_rejects, abs=digits)
    exact = exact_risks(guard_band)
    assert (result.false_accepts.value, result.false_rejects.value) == pytest.approx(exact, rel=2e-3)
    conforming = 0.9044  # the same source
    assert result.accepted.value == pytest.approx(conforming + exact[0] - exact[1], abs=1e-4)
    spread = np.hypot(PRIOR, ERROR)  # a reading is normal too (exact)
    assert result.as_read.value == pytest.approx(1.0 - 2.0 * stats.norm.cdf(-0.2 / spread), abs=1e-4)


def test_a_bias_moves_both_risks() -> None:
    result = judge_readings(coupons_of(normal_sample(0.0, PRIOR), LIMIT), Reading(ERROR, 0.05))
    assert (result.false_accepts.value, result.false_rejects.value) == pytest.approx(exact_risks(0.0, 0.05), rel=2e-3)


@pytest.mark.parametrize("wanted", [0.01, 0.0043, 0.001, 0.0001])
def test_guard_bands_hold_false_accepts_to_what_is_wanted(wanted: float) -> None:
    """scipy's root of scipy's integral (general library)."""
    exact = optimize.brentq(lambda band: exact_risks(float(band))[0] - wanted, 0.0, 0.19)
    found = guard_band_for(wanted, coupons_of(normal_sample(0.0, PRIOR), LIMIT), Reading(ERROR, 0.0, 0.07))
    assert found.band.value == pytest.approx(exact, abs=5e-4)
    assert found.band.low < found.band.value < found.band.high
    assert found.false_accepts == pytest.approx(wanted, rel=1e-3)
    assert found.false_rejects == pytest.approx(exact_risks(float(exact))[1], rel=5e-3)


def test_no_guard_band_is_needed_where_false_accepts_are_rare_without() -> None:
    found = guard_band_for(0.02, coupons_of(normal_sample(0.0, PRIOR), LIMIT), Reading(ERROR))
    assert found.band.value == 0.0
    assert found.false_accepts == pytest.approx(0.0189, abs=5e-5)  # as in the case above


def test_a_perfect_reading_with_a_guard_band_only_rejects() -> None:
    """Exact: the normal's share between guarded and true limits."""
    result = judge_readings(coupons_of(normal_sample(0.0, PRIOR), LIMIT), Reading(guard_band=0.05))
    exact = 2.0 * (stats.norm.cdf(0.2 / PRIOR) - stats.norm.cdf(0.15 / PRIOR))
    assert result.false_rejects.value == pytest.approx(exact, abs=2e-5)
    assert result.false_accepts.value == 0.0
    assert all(each.band.value == 0.0 for each in result.guard_bands)


def test_acceptance_keeps_its_digits_in_both_tails() -> None:
    """scipy's normal tail (general library); the two sides mirror each other (exact)."""
    limit = Limits(45.0, 55.0)
    far = acceptance(np.array([57.5, 42.5]), limit, Reading(0.25))
    assert far == pytest.approx(np.full(2, stats.norm.sf(10.0)), rel=1e-9, abs=0.0)
    assert acceptance(np.array([45.0, 55.0, 44.999, 55.001]), limit, Reading()).tolist() == [1.0, 1.0, 0.0, 0.0]
    assert acceptance(np.array([50.0]), limit, Reading(0.5, 0.0, 6.0)).tolist() == [0.0]


def test_a_coupon_is_accepted_where_all_its_lines_are() -> None:
    """Exact for two lines with the same true impedance and independent readings: probabilities multiply."""
    impedance = normal_sample(0.0, PRIOR)
    both = coupons_of(impedance, LIMIT, Limits(-0.1, 0.3))
    reading = Reading(ERROR)
    product = acceptance(impedance, LIMIT, reading) * acceptance(impedance, Limits(-0.1, 0.3), reading)
    assert both.accepted(reading) == pytest.approx(product, rel=1e-12)
    assert judge_readings(both, reading).accepted.value == pytest.approx(product.mean(), rel=1e-12)
    conforming = (impedance >= -0.1) & (impedance <= 0.2)
    assert judge_readings(both, reading).false_accepts.value == pytest.approx(
        np.mean(product * ~conforming), rel=1e-12)
    assert both.line(1).accepted(reading) == pytest.approx(acceptance(impedance, Limits(-0.1, 0.3), reading))


def test_impossible_coupons_are_neither_accepted_nor_wrongly_rejected() -> None:
    impedance = np.zeros(4096)
    possible = (np.arange(4096) % 2 == 0)[None]
    coupons = Coupons(impedance[None], possible, (LIMIT,), np.zeros(1), 8)
    result = judge_readings(coupons, Reading(ERROR))
    assert result.accepted.value == pytest.approx(0.5, abs=1e-5)
    assert result.false_accepts.value == 0.0
    assert result.false_rejects.value < 1e-5


def test_intervals_hold_the_exact_risks() -> None:
    """Independent samples: 95 of 100 intervals hold the exact integral, within four standard errors."""
    exact = exact_risks(0.0)
    held = np.zeros(2)
    runs = 100
    for seed in range(runs):
        impedance = np.random.default_rng(seed).normal(0.0, PRIOR, size=4096)
        result = judge_readings(coupons_of(impedance, LIMIT), Reading(ERROR))
        held += [each.low <= value <= each.high
                 for each, value in zip((result.false_accepts, result.false_rejects), exact, strict=True)]
    assert np.all(held >= runs * 0.95 - 4.0 * np.sqrt(runs * 0.95 * 0.05)), held
    assert np.all(held < runs)


def test_risks_that_rest_on_few_coupons_reach_far_enough() -> None:
    """With no coupon outside, false accepts may still be what unseen coupons bring: half of (1 - 0.025^(1/n)) at most
    (exact: the far end of the binomial, and a reading at its limit accepted half the time)."""
    result = judge_readings(coupons_of(normal_sample(0.0, 0.02, 4096), LIMIT), Reading(ERROR))
    assert result.false_accepts.value == 0.0
    assert result.false_accepts.high == pytest.approx(0.5 * (1.0 - 0.025 ** (1.0 / 4096)), rel=1e-6)
    assert result.accepted.low < result.accepted.value
    by_lot = judge_readings(coupons_of(normal_sample(0.0, 0.02, 4096), LIMIT, cluster=16), Reading(ERROR))
    assert by_lot.false_accepts.high == pytest.approx(0.5 * (1.0 - 0.025 ** (1.0 / 256)), rel=1e-6)


def test_the_error_of_the_impedance_moves_the_ends_out() -> None:
    impedance = normal_sample(0.0, PRIOR)
    plain, wide = (judge_readings(coupons_of(impedance, LIMIT, error=error), Reading(ERROR)) for error in (0.0, 0.005))
    for name in ("as_read", "accepted", "false_accepts", "false_rejects"):
        before, after = getattr(plain, name), getattr(wide, name)
        assert after.value == before.value
        assert after.low <= before.low
        assert after.high >= before.high
        assert after.high - after.low > before.high - before.low
    assert [each.wanted for each in plain.guard_bands] == list(FALSE_ACCEPTS_WANTED)
