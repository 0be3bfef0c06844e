"""Draws of whole lots: their sizes, what coupons of a lot and a panel share, and chances that they are independent."""

from __future__ import annotations

import numpy as np
import pytest

from tests.nested_examples import SIZE, WEIGHTS, level_parts, nested_process, response
from tests.process_examples import process, variable
from tolerance.arrays import FloatArray
from tolerance.errors import InputError
from tolerance.process.draws import LotSize, draw_process
from tolerance.process.lots import count_lots, draw_lots, level_shares, rows_as_lots


@pytest.mark.parametrize(("coupons", "size", "lots"), [
    (65536, LotSize(), 2048),  # 65536 / 40 = 1638.4
    (1000, LotSize(), 32),  # 25 lots
    (1280, LotSize(), 32),
    (1281, LotSize(), 64),
    (1, LotSize(), 8),  # one for each replicate
    (4096, LotSize(1, 1), 4096),
])
def test_coupons_are_rounded_up_to_a_power_of_two_of_whole_lots(coupons: int, size: LotSize, lots: int) -> None:
    assert count_lots(coupons, size) == lots
    if coupons < 4096:
        draws = draw_lots(nested_process(), size, coupons=coupons, chance=np.random.default_rng(0))
        assert draws.coupons == lots * size.coupons
        assert draws.replicates == 8


def test_more_coupons_than_a_sample_may_have_are_refused() -> None:
    with pytest.raises(InputError, match="8 whole lots of 10000000"):
        count_lots(256, LotSize(100_000, 100))


def analysis_of_variance(values: FloatArray, size: LotSize) -> FloatArray:
    """Variance components of lot, panel and coupon (3,) of values (coupons,) by the nested analysis of variance.

    Source: H. Scheffe, "The analysis of variance", 1959, section 5.3 (expected mean squares).
    """
    table = values.reshape(-1, size.panels, size.coupons_per_panel)
    lots, panels, coupons = table.shape
    of_panel, of_lot = table.mean(axis=2), table.mean(axis=(1, 2))
    within = np.sum((table - of_panel[..., None]) ** 2) / (lots * panels * (coupons - 1))
    between_panels = coupons * np.sum((of_panel - of_lot[:, None]) ** 2) / (lots * (panels - 1))
    between_lots = coupons * panels * np.sum((of_lot - of_lot.mean()) ** 2) / (lots - 1)
    return np.array([(between_lots - between_panels) / (coupons * panels), (between_panels - within) / coupons, within])


@pytest.mark.parametrize("correlation", [0.0, -0.6])
def test_variance_components_are_the_shares(correlation: float) -> None:
    """Exact: a level's variance is w' R w over the variables' shares of it, R the correlation of the germs."""
    model = nested_process(correlation)
    draws = draw_lots(model, SIZE, coupons=60_000, chance=np.random.default_rng(4))
    roots = np.sqrt(level_shares(model)) * WEIGHTS
    exact = np.einsum("li,ij,lj->l", roots, model.correlation, roots)
    if correlation == 0.0:
        assert exact == pytest.approx(level_parts(), rel=1e-12)
    lots = draws.coupons // SIZE.coupons
    found = analysis_of_variance(response(draws.germ) / 2.0, SIZE)
    assert found == pytest.approx(exact, abs=4.0 * np.sqrt(2.0 / lots) * exact.sum())
    assert np.cov(draws.germ.T) == pytest.approx(model.correlation, abs=4.0 * np.sqrt(2.0 / lots))


def test_a_variable_of_the_lot_alone_is_the_same_on_all_its_coupons_and_only_there() -> None:
    germ = draw_lots(nested_process(), SIZE, coupons=500, chance=np.random.default_rng(1)).germ
    of_lot = germ[:, 2].reshape(-1, SIZE.coupons)
    assert np.ptp(of_lot, axis=1) == pytest.approx(0.0, abs=1e-15)
    assert len(np.unique(of_lot[:, 0])) == len(of_lot)
    assert len(np.unique(germ[:, 0])) == len(germ)


def test_panels_of_a_lot_and_lots_of_a_sample_are_independent() -> None:
    """Over many seeds the correlation of neighbours is nought within four standard errors (exact)."""
    model = nested_process()
    tables = [draw_lots(model, SIZE, coupons=120, chance=np.random.default_rng(seed)).germ[:, 0].reshape(-1, 5, 3)
              for seed in range(400)]
    table = np.concatenate(tables)  # shares 0.5, 0.2, 0.3
    for left, right, exact in ((table[:, 0, 0], table[:, 1, 2], 0.5), (table[:, 2, 0], table[:, 2, 1], 0.7),
                               (table[::8, 0, 0], table[1::8, 0, 0], 0.0)):
        assert np.mean(left * right) == pytest.approx(exact, abs=4.0 * np.sqrt((1.0 + exact**2) / left.size))


def test_the_same_seed_gives_the_same_lots() -> None:
    one, other, third = (draw_lots(nested_process(), SIZE, coupons=200, chance=np.random.default_rng(seed)).germ
                         for seed in (3, 3, 4))
    assert np.array_equal(one, other)
    assert not np.array_equal(one, third)


def test_coupons_without_levels_are_put_together_to_lots_at_random() -> None:
    """Neighbours of a Sobol' sequence fill each other's gaps: sums over a lot would vary far too little."""
    model = process(variable("P1.thickness", 1.0, tolerance=0.3))
    size = LotSize(16, 1)
    draws = draw_process(model, coupons=4096, chance=np.random.default_rng(2))
    rows = rows_as_lots(draws, size, np.random.default_rng(3))
    assert rows.shape == (8 * 256, 16)
    assert np.all(rows // 512 == rows[:, :1] // 512), "a lot is of one replicate"
    sums = np.sum(draws.germ[rows, 0], axis=1)
    assert np.var(sums) == pytest.approx(16.0, rel=4.0 * np.sqrt(2.0 / len(rows)))
    neighbours = np.sum(draws.germ[:, 0].reshape(-1, 16), axis=1)
    assert np.var(neighbours) < 4.0
    with pytest.raises(InputError, match="too large"):
        rows_as_lots(draws, LotSize(100_000, 100), np.random.default_rng(3))
