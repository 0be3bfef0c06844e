"""What matters for yield, on a microstrip in closed form and on exact lognormals; see microstrip_model for sources."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import ndtr

from tests.microstrip_model import (
    BY_LOG_DEVIATION,
    BY_MEAN,
    HALVED,
    HIGH,
    LOW,
    NAMES,
    YIELD_NORMAL,
    normal,
    normal_moments,
)
from tests.process_examples import process, variable
from tolerance.arrays import FloatArray
from tolerance.process.changes import Change, ChangedValues, Moments, moments_of
from tolerance.process.draws import draw_process
from tolerance.process.laws import Shape
from tolerance.statistics.levers import levers_of
from tolerance.statistics.yields import Limits


def test_the_microstrips_levers() -> None:
    """Status of the values: measured beforehand with 16 x 2^20 points and an expansion of degree 5."""
    levers = levers_of(normal, NAMES, normal_moments(), Limits(LOW, HIGH), chance=np.random.default_rng(3), lines=128)
    assert levers.inside.value == pytest.approx(YIELD_NORMAL, abs=3e-5)
    for lever in levers.each:
        place = NAMES.index(lever.variable)
        assert levers.inside.value + lever.halved.value == pytest.approx(HALVED[place], abs=8e-5)
        assert lever.by_mean.value == pytest.approx(BY_MEAN[place], abs=1.5e-4)
        assert lever.by_deviation.value == pytest.approx(BY_LOG_DEVIATION[place], abs=1.5e-4)


def test_the_ranking_by_yield_is_not_that_by_variance() -> None:
    """The second ply has the largest share of the variance (0.318 against 0.296), the drawn width the largest gain."""
    levers = levers_of(normal, NAMES, normal_moments(), Limits(LOW, HIGH), chance=np.random.default_rng(4))
    assert [lever.variable for lever in levers.each[:3]] == ["drawn width", "ply 2", "ply 1"]
    assert all(lever.order > 0.95 for lever in levers.each)


DEVIATIONS = np.array([0.03, 0.02, 0.0])


def lognormals(points: FloatArray, change: Change | None) -> FloatArray:
    factors = np.exp(DEVIATIONS * points)
    if change is not None:
        factors = np.column_stack([change.of(f"factor {place}", column) for place, column in enumerate(factors.T)])
    return np.asarray(50.0 * np.prod(factors, axis=1), dtype=np.float64)


def test_levers_of_a_product_of_lognormals() -> None:
    """Exact: ln Z is normal with the root of the summed squares; its yield and derivatives in closed form."""
    moments = [{f"factor {place}": Moments(1.0, float(deviation), logarithmic=True)}
               for place, deviation in enumerate(DEVIATIONS)]
    high = 54.0
    levers = levers_of(lognormals, ("one", "two", "none"), moments, Limits(1.0, high), chance=np.random.default_rng(0))
    whole = float(np.linalg.norm(DEVIATIONS))
    reach = np.log(high / 50.0)
    density = np.exp(-0.5 * (reach / whole) ** 2) / np.sqrt(2.0 * np.pi)
    assert levers.inside.value == pytest.approx(ndtr(reach / whole), abs=1e-9)
    for lever, place in zip(levers.each, (0, 1, 2), strict=True):
        halved = np.sqrt(whole**2 - 0.75 * DEVIATIONS[place] ** 2)
        assert lever.variable == ("one", "two", "none")[place]
        assert lever.halved.value == pytest.approx(ndtr(reach / halved) - ndtr(reach / whole), rel=1e-2, abs=1e-9)
        assert lever.by_deviation.value == pytest.approx(
            -density * reach / whole**3 * DEVIATIONS[place] ** 2, rel=1e-2, abs=1e-9)
    assert levers.each[-1].halved.value == 0.0


def test_intervals_of_gains_hold_the_reference_in_95_of_100_runs() -> None:
    held = count = 0
    for seed in range(40):
        levers = levers_of(normal, NAMES, normal_moments(), Limits(LOW, HIGH), chance=np.random.default_rng(seed),
                           lines=16)
        for lever in levers.each[:3]:
            exact = HALVED[NAMES.index(lever.variable)] - YIELD_NORMAL
            held += lever.halved.low - 5e-6 <= exact <= lever.halved.high + 5e-6  # the reference has five digits
            count += 1
    # gains of one run hang together, so that 40 runs count, not 120 intervals
    assert abs(held / count - 0.95) < 4.0 * np.sqrt(0.95 * 0.05 / 40), held / count


@pytest.mark.parametrize("shape", ["normal", "truncated_normal", "uniform", "triangular", "lognormal"])
def test_a_changed_law_has_the_spread_and_mean_that_were_asked_for(shape: Shape) -> None:
    """Against the sample's own moments (numpy)."""
    known = process(variable("P1.thickness", 1e-4, shape=shape, tolerance=0.2), variable("L1.etch", 0.0, tolerance=0.1))
    draws = draw_process(known, coupons=16384, chance=np.random.default_rng(1))
    before = draws.value("P1.thickness")
    moments = moments_of(known, 0, width=2e-4)
    narrow = ChangedValues(draws, Change(moments, stretch=0.5)).value("P1.thickness")
    moved = ChangedValues(draws, Change(moments, shift=1.0)).value("P1.thickness")
    if shape == "lognormal":
        before, narrow_seen = np.log(before), np.log(narrow)
        moved = np.log(moved - moments["P1.thickness"].deviation)
    else:
        narrow_seen, moved = narrow, moved - np.std(before)
    assert np.std(narrow_seen) == pytest.approx(0.5 * np.std(before), rel=1e-6)
    assert np.mean(narrow_seen) == pytest.approx(np.mean(before), rel=1e-4)
    assert moved == pytest.approx(before, rel=1e-3)
    changed = ChangedValues(draws, Change(moments_of(known, 1, width=2e-4), stretch=0.5))
    assert changed.etch("L1", width=2e-4) == pytest.approx(0.5 * draws.etch("L1", width=2e-4), abs=1e-12)
    assert np.array_equal(changed.value("P1.thickness"), draws.value("P1.thickness"))
