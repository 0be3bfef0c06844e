"""Draws of the process: what varies, the Sobol' sample of it, and sums of draws against published results."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import ndtr

from tests.process_examples import process, variable
from tests.scenario_texts import HEAD, SIX_LAYERS
from tolerance.process.draws import (
    Process,
    columns_moving,
    correlated_groups,
    draw_process,
    process_of,
    sobol_uniforms,
)
from tolerance.process.laws import Shape
from tolerance.process.values import NominalValues
from tolerance.scenario import parse
from tolerance.scenario.amounts import Amount

LINES = """
[[lines]]
name = "clock"
layer = "L1"
width = "180 um"
target = "50 ohm"
"""
VARIATIONS = """
[[variations]]
of = "P*.thickness"
tolerance = "10 %"
together = true

[[variations]]
of = ["P2.dk", "P1.dk"]
tolerance = "5 %"
sigmas = 2

[[variations]]
of = "L1.etch"
shape = "uniform"
tolerance = "8 %"
shift = "2 um"
"""


def six_layers(extra: str = "") -> Process:
    return process_of(parse(HEAD + SIX_LAYERS + LINES + VARIATIONS + extra))


def test_variables_are_named_by_their_properties_in_the_order_of_the_scenario() -> None:
    assert [each.name for each in six_layers().variables] == [
        "P1.thickness + P2.thickness", "P1.dk", "P2.dk", "L1.etch"]


def test_properties_drawn_together_share_the_draw_and_keep_their_nominals() -> None:
    draws = draw_process(six_layers(), coupons=256, chance=np.random.default_rng(1))
    shares = [draws.value(name) / draws.process.nominals[name] for name in ("P1.thickness", "P2.thickness")]
    assert shares[0] == pytest.approx(shares[1], rel=1e-12)
    assert shares[0] == pytest.approx(1.0 + 0.1 / 3.0 * draws.germ[:, 0], rel=1e-12)


def test_a_property_that_does_not_vary_stays_at_its_nominal() -> None:
    draws = draw_process(six_layers(), coupons=256, chance=np.random.default_rng(1))
    assert np.array_equal(draws.value("C1.thickness"), np.full(256, 120e-6))
    assert np.array_equal(draws.value("L2.plating"), np.zeros(256))
    assert np.array_equal(draws.etch("L3", width=100e-6), np.zeros(256))
    with pytest.raises(KeyError):
        draws.value("P9.dk")


def test_etch_is_one_draw_for_the_layer_in_the_share_of_each_width() -> None:
    draws = draw_process(six_layers(), coupons=256, chance=np.random.default_rng(1))
    narrow, wide = (draws.etch("L1", width=width) - 2e-6 for width in (100e-6, 300e-6))
    assert wide == pytest.approx(3.0 * narrow, rel=1e-9)
    assert np.max(np.abs(narrow)) <= 8e-6


def test_nominals_know_nothing_of_a_shift() -> None:
    nominal = NominalValues(six_layers().nominals)
    assert nominal.etch("L1", width=180e-6)[0] == 0.0
    assert nominal.value("P1.thickness")[0] == 100e-6


def test_columns_that_move_a_set_of_properties() -> None:
    assert columns_moving(six_layers(), {"P2.thickness", "L1.etch", "C1.dk"}) == (0, 3)


def test_a_correlation_names_a_variable_or_a_property_that_moves_with_one() -> None:
    extra = '\n[[correlations]]\nbetween = ["P2.thickness", "P1.dk"]\ncoefficient = -0.5\n'
    correlated = six_layers(extra)
    assert correlated.is_correlated
    assert correlated.correlation[0, 1] == correlated.correlation[1, 0] == -0.5
    assert correlated_groups(correlated.correlation) == [[0, 1]]
    germ = draw_process(correlated, coupons=65536, chance=np.random.default_rng(3)).germ
    # standard error of a correlation of independent draws: (1 - r^2) / sqrt(n)
    assert np.corrcoef(germ.T) == pytest.approx(correlated.correlation, abs=4.0 / np.sqrt(65536))
    assert np.std(germ, axis=0) == pytest.approx(np.ones(4), abs=4.0 / np.sqrt(2 * 65536))


def test_the_sample_depends_on_the_seed_alone_and_nought_is_a_seed() -> None:
    first, again, other = (
        draw_process(six_layers(), coupons=512, chance=np.random.default_rng(seed)).germ for seed in (0, 0, 1))
    assert np.array_equal(first, again)
    assert not np.any(first == other)


def test_uncorrelated_columns_are_those_of_the_uncorrelated_process() -> None:
    extra = '\n[[correlations]]\nbetween = ["P2.dk", "P1.dk"]\ncoefficient = 0.8\n'
    plain, correlated = (
        draw_process(six_layers(text), coupons=512, chance=np.random.default_rng(0)).germ for text in ("", extra))
    assert np.array_equal(plain[:, [0, 1, 3]], correlated[:, [0, 1, 3]])


def test_each_replicate_is_a_scramble_of_its_own_with_one_point_in_each_slice() -> None:
    draws = draw_process(six_layers(), coupons=1024, chance=np.random.default_rng(0))
    slices = np.floor(ndtr(draws.germ.reshape(draws.replicates, -1, 4)) * 128).astype(int)
    for replicate in slices:  # exact: a one-dimensional projection of a Sobol' net fills each of its slices once
        for column in replicate.T:
            assert np.array_equal(np.sort(column), np.arange(128))
    assert len({tuple(replicate[:, 0]) for replicate in slices}) == draws.replicates


def test_points_stand_in_the_middle_of_their_cells_so_that_none_is_at_an_end() -> None:
    uniforms = sobol_uniforms(3, 1 << 14, np.random.default_rng(0))
    assert np.all((uniforms * 2.0**31) % 2.0 == 1.0)  # exact: cells of 2^-30


def test_sizes_that_are_no_powers_of_two_are_refused() -> None:
    with pytest.raises(ValueError, match="power of two"):
        draw_process(six_layers(), coupons=1000, chance=np.random.default_rng(0))


def test_rows_are_a_sample() -> None:
    draws = draw_process(six_layers(), coupons=256, chance=np.random.default_rng(0))
    rows = np.array([7, 3])
    assert np.array_equal(draws.rows(rows).value("P1.dk"), draws.value("P1.dk")[rows])


def test_a_process_without_variations_can_be_drawn() -> None:
    draws = draw_process(process(), coupons=256, chance=np.random.default_rng(0))
    assert draws.coupons == 256
    assert draws.germ.shape == (256, 0)


# Sums of four independent inputs of mean 0, JCGM 101:2008, section 9.2. The numbers are recalled from memory and were
# confirmed by the exact distribution of the sum; for the rectangular ones that gives one digit more.
@pytest.mark.parametrize(("shape", "deviations", "deviation", "end", "source"), [
    ("normal", (1.0, 1.0, 1.0, 1.0), 2.0, 3.920, "9.2.2, normal: u = 2.0, [-3.92, 3.92]"),
    ("uniform", (1.0, 1.0, 1.0, 1.0), 2.0, 3.8794, "9.2.3, rectangular: u = 2.0, [-3.88, 3.88]"),
    ("uniform", (1.0, 1.0, 1.0, 10.0), np.sqrt(103.0), 17.016, "9.2.4, rectangular: u = 10.1, [-17.0, 17.0]"),
])
def test_additive_models(
    shape: Shape, deviations: tuple[float, ...], deviation: float, end: float, source: str,
) -> None:
    inputs = [
        variable(f"input.part{number}", 0.0, low=-size * np.sqrt(3.0), high=size * np.sqrt(3.0), shape=shape)
        if shape == "uniform" else
        variable(f"input.part{number}", 0.0, shape=shape, tolerance=Amount(3.0 * size, relative=False))
        for number, size in enumerate(deviations)
    ]
    draws = draw_process(process(*inputs), coupons=65536, chance=np.random.default_rng(5))
    total = np.sum([draws.value(each.name) for each in inputs], axis=0)
    assert np.mean(total) == pytest.approx(0.0, abs=4.0 * deviation / np.sqrt(total.size)), source
    assert np.std(total) == pytest.approx(deviation, rel=4.0 / np.sqrt(2 * total.size)), source
    low, high = np.quantile(total, [0.025, 0.975])
    # four standard errors of a 2.5 % quantile of independent draws; the density at the end is at least 0.01 of 1 / u
    density = np.mean(np.abs(total - end) < 0.05 * deviation) / (0.1 * deviation)
    allowed = 4.0 * np.sqrt(0.025 * 0.975 / total.size) / density
    assert (low, high) == pytest.approx((-end, end), abs=allowed), source
