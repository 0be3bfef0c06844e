"""Every shape against scipy.stats distributions put together here from the scenario format's own words."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from scipy.special import ndtr

from tolerance.arrays import FloatArray
from tolerance.errors import InputError
from tolerance.process.laws import Law, Shape, quantile
from tolerance.scenario.amounts import Amount

TEN_PERCENT = Amount(0.10, relative=True)
TEN_MICROMETRES = Amount(10e-6, relative=False)
SHIFT = Amount(2e-6, relative=False)
NOMINAL = 100e-6
GERM = np.linspace(-6.0, 6.0, 241)

CASES: list[tuple[str, Law, Any]] = [
    ("normal, 10 % covers three deviations",
     Law("normal", NOMINAL, TEN_PERCENT), stats.norm(NOMINAL, 10e-6 / 3)),
    ("normal, 10 um covers two deviations, shifted",
     Law("normal", NOMINAL, TEN_MICROMETRES, SHIFT, sigmas=2.0), stats.norm(102e-6, 5e-6)),
    ("normal by cpk: (half-width - |shift|) / (3 cpk)",
     Law("normal", NOMINAL, TEN_MICROMETRES, Amount(-2e-6, relative=False), cpk=1.33),
     stats.norm(98e-6, 8e-6 / 3.99)),
    ("truncated normal, cut at the half-width",
     Law("truncated_normal", NOMINAL, TEN_PERCENT, SHIFT, sigmas=2.0), stats.truncnorm(-2, 2, 102e-6, 5e-6)),
    ("truncated normal by its ends: deviation a third of half their distance",
     Law("truncated_normal", NOMINAL, shift=SHIFT, low=95e-6, high=107e-6),
     stats.truncnorm(-3.5, 2.5, 102e-6, 2e-6)),
    ("truncated normal whose mean lies outside its ends",
     Law("truncated_normal", NOMINAL, low=104e-6, high=116e-6), stats.truncnorm(2, 8, 100e-6, 2e-6)),
    ("truncated normal whose mean lies seven deviations outside",
     Law("truncated_normal", NOMINAL, low=114e-6, high=126e-6), stats.truncnorm(7, 13, 100e-6, 2e-6)),
    ("uniform", Law("uniform", NOMINAL, TEN_PERCENT, SHIFT), stats.uniform(92e-6, 20e-6)),
    ("uniform by its ends", Law("uniform", NOMINAL, low=97e-6, high=112e-6), stats.uniform(97e-6, 15e-6)),
    ("triangular", Law("triangular", NOMINAL, TEN_PERCENT), stats.triang(0.5, 90e-6, 20e-6)),
    ("triangular by its ends, off centre",
     Law("triangular", NOMINAL, low=95e-6, high=115e-6), stats.triang(0.25, 95e-6, 20e-6)),
    ("triangular with its peak at the upper end",
     Law("triangular", NOMINAL, low=80e-6, high=100e-6), stats.triang(1.0, 80e-6, 20e-6)),
    ("triangular with its peak at the lower end",
     Law("triangular", NOMINAL, low=100e-6, high=120e-6), stats.triang(0.0, 100e-6, 20e-6)),
    ("lognormal: log deviation ln(1 + half-width / nominal) / 3 about nominal + shift",
     Law("lognormal", NOMINAL, TEN_PERCENT, SHIFT), stats.lognorm(np.log(1.1) / 3, scale=102e-6)),
]
NAMED = pytest.mark.parametrize(("law", "distribution"), [case[1:] for case in CASES], ids=[case[0] for case in CASES])


def upper_tail(distribution: Any, value: FloatArray) -> FloatArray:
    """Mass above `value`; of a triangle by its mirror image, because scipy takes it as 1 - cdf and loses digits."""
    if distribution.dist.name == "triang":
        peak, low, width = distribution.args
        return np.asarray(stats.triang(1.0 - peak, -low - width, width).cdf(-value), dtype=np.float64)
    return np.asarray(distribution.sf(value), dtype=np.float64)


@NAMED
def test_quantile_is_the_inverse_distribution_in_both_tails(law: Law, distribution: Any) -> None:
    value = quantile(law, GERM, reference=NOMINAL)
    # a value near an end holds its distance to the end only to rounding, which is what the looser part allows
    rounding = 8 * np.finfo(float).eps * NOMINAL * distribution.pdf(value)
    for share, exact in ((distribution.cdf(value), ndtr(GERM)), (upper_tail(distribution, value), ndtr(-GERM))):
        assert np.all(np.abs(share - exact) <= 1e-10 * exact + np.where(np.isfinite(rounding), rounding, 0.0))


@NAMED
def test_mean_and_deviation(law: Law, distribution: Any) -> None:
    nodes, weights = np.polynomial.legendre.leggauss(12)
    edges = np.linspace(-9.0, 9.0, 145)
    germ = (0.5 * (edges[1:] + edges[:-1])[:, None] + 0.5 * np.diff(edges)[:, None] * nodes).ravel()
    mass = (0.5 * np.diff(edges)[:, None] * weights).ravel() * stats.norm.pdf(germ)
    value = quantile(law, germ, reference=NOMINAL)
    mean = np.sum(mass * value)
    assert mean == pytest.approx(distribution.mean(), rel=1e-7)  # a kink at a triangle's peak costs some digits
    assert np.sqrt(np.sum(mass * (value - mean) ** 2)) == pytest.approx(distribution.std(), rel=1e-4)


@NAMED
def test_infinite_germs_give_the_ends(law: Law, distribution: Any) -> None:
    ends = quantile(law, np.array([-np.inf, np.inf]), reference=NOMINAL)
    assert ends == pytest.approx(distribution.support(), rel=1e-12)


SHAPES: tuple[Shape, ...] = ("normal", "truncated_normal", "uniform", "triangular", "lognormal")


@given(
    shape=st.sampled_from(SHAPES), tolerance=st.floats(1e-4, 0.5), shift=st.floats(-0.4, 0.4),
    sigmas=st.floats(0.3, 6.0), germs=st.lists(st.floats(-6.2, 6.2), min_size=2, max_size=20),
)
def test_values_rise_with_the_germ_and_bounded_ones_stay_between_their_ends(
    shape: Shape, tolerance: float, shift: float, sigmas: float, germs: list[float],
) -> None:
    law = Law(shape, 4.0, Amount(tolerance, relative=True), Amount(shift, relative=True),
              sigmas=None if shape in ("uniform", "triangular") else sigmas)
    value = quantile(law, np.sort(germs), reference=4.0)
    assert np.all(np.diff(value) >= -1e-14)
    if shape not in ("normal", "lognormal"):
        low, high = law.ends(reference=4.0)
        assert low <= value[0]
        assert value[-1] <= high


def test_a_percentage_is_of_the_reference() -> None:
    etch = Law("normal", 0.0, TEN_PERCENT, Amount(-0.05, relative=True))
    for width in (100e-6, 250e-6):
        value = quantile(etch, np.array([0.0, 3.0]), reference=width)
        assert value == pytest.approx([-0.05 * width, 0.05 * width], rel=1e-12), "mean -5 %, three deviations 10 %"


@pytest.mark.parametrize("law", [
    Law("normal", NOMINAL, TEN_MICROMETRES, Amount(10e-6, relative=False), cpk=1.0),
    Law("lognormal", 0.0, TEN_MICROMETRES),
    Law("lognormal", NOMINAL, TEN_PERCENT, Amount(-1.0, relative=True)),
    Law("triangular", NOMINAL, low=101e-6, high=120e-6),
    Law("truncated_normal", NOMINAL, low=200e-6, high=202e-6),
])
def test_what_cannot_be_is_refused(law: Law) -> None:
    with pytest.raises(InputError):
        quantile(law, GERM, reference=NOMINAL)
