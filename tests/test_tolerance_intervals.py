"""Tolerance intervals, capability and nested variance against published figures; each row says how far it is known."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from tolerance.statistics.nested import shares, variance_components
from tolerance.statistics.tolerance_intervals import (
    capability,
    content_of_range,
    deviation_interval,
    howe_factor,
    mean_interval,
    one_sided_factor,
    readings_needed,
)


@pytest.mark.parametrize(("count", "content", "confidence", "expected", "source"), [
    (43, 0.90, 0.99, 2.217, "NIST/SEMATECH e-Handbook 7.2.6.3, found there"),
    (10, 0.95, 0.95, 3.3819, "Howe 1969, worked out from its formula apart from this program"),
    (30, 0.95, 0.95, 2.5496, "the same"), (50, 0.95, 0.95, 2.3788, "the same"), (100, 0.95, 0.95, 2.2328, "the same"),
])
def test_howe(count: int, content: float, confidence: float, expected: float, source: str) -> None:
    digits = 5e-4 if "NIST" in source else 5e-5
    assert howe_factor(count, content=content, confidence=confidence) == pytest.approx(expected, abs=digits), source


def test_howe_is_near_the_exact_factor() -> None:
    """Exact for n = 43, 90 % content, 99 % confidence: 2.2228, by integration apart from this program."""
    assert howe_factor(43, content=0.90, confidence=0.99) == pytest.approx(2.2228, rel=5e-3)


@pytest.mark.parametrize(("count", "content", "confidence", "expected", "source"), [
    (43, 0.90, 0.99, 1.87395, "exact, by noncentral t; the e-Handbook 7.2.6.3 approximates it by 1.8752"),
    (10, 0.95, 0.95, 2.9110, "exact; as in tables of one-sided factors (from memory)"),
    (30, 0.95, 0.95, 2.2198, "the same"), (50, 0.95, 0.95, 2.0650, "the same"), (100, 0.95, 0.95, 1.9265, "the same"),
])
def test_one_sided(count: int, content: float, confidence: float, expected: float, source: str) -> None:
    assert one_sided_factor(count, content=content, confidence=confidence) == pytest.approx(expected, abs=6e-5), source


@pytest.mark.parametrize(("content", "confidence", "outside", "expected"), [
    (0.95, 0.95, 1, 59), (0.99, 0.95, 1, 299), (0.99, 0.99, 1, 459), (0.90, 0.95, 1, 29),
    (0.95, 0.95, 2, 93), (0.95, 0.95, 3, 124), (0.90, 0.95, 2, 46), (0.99, 0.95, 2, 473), (0.99, 0.99, 2, 662),
])
def test_wilks(content: float, confidence: float, outside: int, expected: int) -> None:
    """Wilks 1941: the well-known sample sizes; both outermost readings, or the second largest, leave two outside."""
    assert readings_needed(content=content, confidence=confidence, outside=outside) == expected
    if outside == 2:
        assert content_of_range(expected, confidence=confidence) >= content
        assert content_of_range(expected - 1, confidence=confidence) < content


def test_capability() -> None:
    """NIST/SEMATECH e-Handbook 6.1.6: limits 8 and 20, mean 16, deviation 2: Cp 1.0, Cpk 0.6667 (from memory).

    The interval of Cpk after Bissell, of Cp by chi-squared from scipy, for 50 readings.
    """
    scores = np.asarray(stats.norm.ppf((np.arange(50) + 0.5) / 50))
    values = 16.0 + 2.0 * (scores - np.mean(scores)) / np.std(scores, ddof=1)
    cp, cpk = capability(values, low=8.0, high=20.0)
    assert cp is not None
    assert cpk is not None
    assert [cp.value, cpk.value] == pytest.approx([1.0, 2.0 / 3.0])
    assert [cp.low, cp.high] == pytest.approx(np.sqrt(stats.chi2(49).ppf([0.025, 0.975]) / 49))
    half = 1.959964 * np.sqrt(1 / 450 + (2 / 3) ** 2 / 98)
    assert [cpk.low, cpk.high] == pytest.approx([2 / 3 - half, 2 / 3 + half], rel=1e-6)
    assert capability(values, low=None, high=20.0)[0] is None
    assert capability(np.full(5, 3.0), low=0.0, high=20.0) == (None, None)


def test_intervals_of_mean_and_deviation() -> None:
    """By scipy.stats; JCGM 101:2008, 6.4.9.2: a mean of n readings has Student's t with n - 1 degrees."""
    values = np.array([99.8, 101.2, 100.4, 98.9, 100.9, 100.1])
    mean, deviation = mean_interval(values), deviation_interval(values)
    assert (mean.low, mean.high) == pytest.approx(stats.t(5, np.mean(values), stats.sem(values)).interval(0.95))
    spread = np.std(values, ddof=1) * np.sqrt(5 / stats.chi2(5).ppf([0.975, 0.025]))
    assert [deviation.low, deviation.high] == pytest.approx(spread)


TURNIPS = [  # calcium in turnip greens, per cent of dry weight: 4 plants, 3 leaves each, 2 determinations
    [[3.28, 3.09], [3.52, 3.48], [2.88, 2.80]], [[2.46, 2.44], [1.87, 1.92], [2.19, 2.19]],
    [[2.77, 2.66], [3.74, 3.44], [2.55, 2.55]], [[3.78, 3.87], [4.07, 4.12], [3.31, 3.31]],
]


def test_nested_turnip_greens() -> None:
    """Snedecor and Cochran, "Statistical Methods", nested example: mean squares 2.5201, 0.3288, 0.0067; components
    0.3652, 0.1611, 0.0067 (from memory; also an example of a general statistics program)."""
    values = np.array(TURNIPS).ravel()
    plants, leaves = np.repeat(np.arange(4), 6), np.tile(np.repeat(np.arange(3), 2), 4)
    found = variance_components(values, [("lot", list(plants)), ("panel", list(leaves))])
    assert [(one.level, one.groups, one.degrees) for one in found] == [
        ("lot", 4, 3), ("panel", 12, 8), ("coupon", 24, 12)]
    assert [one.mean_square for one in found] == pytest.approx([2.5201, 0.3288, 0.0067], abs=6e-5)
    assert [one.variance for one in found] == pytest.approx([0.3652, 0.1611, 0.0067], abs=6e-5)
    order = np.random.default_rng(0).permutation(24)
    shuffled = variance_components(values[order], [("lot", list(plants[order])), ("panel", list(leaves[order]))])
    assert [one.variance for one in shuffled] == pytest.approx([one.variance for one in found])


DYESTUFF = [[1545, 1440, 1440, 1520, 1580], [1540, 1555, 1490, 1560, 1495], [1595, 1550, 1605, 1510, 1560],
            [1445, 1440, 1595, 1465, 1545], [1595, 1630, 1515, 1635, 1625], [1520, 1455, 1450, 1480, 1445]]


def test_one_level_dyestuff() -> None:
    """Yield of dyestuff in six batches, O. L. Davies, "Statistical Methods in Research and Production": components
    1764.05 and 2451.25 (from memory; also given with a general statistics program)."""
    values, batches = np.array(DYESTUFF, dtype=float).ravel(), np.repeat(np.arange(6), 5)
    found = variance_components(values, [("lot", list(batches))])
    assert [one.variance for one in found] == pytest.approx([1764.05, 2451.25], abs=6e-3)
    assert shares(found) == pytest.approx({"lot": 1764.05 / 4215.30, "coupon": 2451.25 / 4215.30}, rel=1e-5)


def test_an_unbalanced_table_is_estimated_without_bias() -> None:
    """Exact: the expectation of every estimate is its component, whatever the group sizes. 4000 tables."""
    chance = np.random.default_rng(1)
    lots = np.repeat(np.arange(5), [12, 5, 9, 4, 8])
    panels = np.concatenate([np.repeat(np.arange(len(sizes)), sizes) for sizes in (
        [5, 4, 3], [4, 1], [1, 1, 7], [2, 2], [3, 3, 2])])
    joined = np.unique(lots * 10 + panels, return_inverse=True)[1]
    tables = []
    for _ in range(4000):
        values = (2.0 * chance.standard_normal(5)[lots] + 1.5 * chance.standard_normal(joined.max() + 1)[joined]
                  + chance.standard_normal(38))
        found = variance_components(values, [("lot", list(lots)), ("panel", list(panels))])
        tables.append([one.variance for one in found])
    error = np.std(tables, axis=0) / np.sqrt(4000)
    assert np.all(np.abs(np.mean(tables, axis=0) - [4.0, 2.25, 1.0]) < 4.0 * error)


def test_levels_that_say_nothing_are_left_out() -> None:
    values = np.array([1.0, 2.0, 3.0, 5.0])
    one_lot = variance_components(values, [("lot", [1] * 4), ("panel", [1, 1, 2, 2])])
    assert [one.level for one in one_lot] == ["panel", "coupon"]
    alone = variance_components(values, [("lot", [1, 1, 2, 2]), ("panel", [1, 2, 1, 2])])
    assert [one.level for one in alone] == ["lot", "coupon"]
    assert variance_components(values, [])[0].variance == pytest.approx(np.var(values, ddof=1))
