"""Lots and the impedance test through a whole run, on small boards."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from tests.scenario_texts import BOARD, HEAD, LINES, SIX_LAYERS, changed
from tests.test_command import command
from tolerance.report.json_text import run_json
from tolerance.results import LineResult, RunResult
from tolerance.scenario import parse
from tolerance.study.run import run

SHARES = {"P1.thickness": (0.3, 0.3, 0.4), "P1.dk + P2.dk": (0.6, 0.2, 0.2), "L1.etch": (0.2, 0.25, 0.55),
          "L3.etch": (0.2, 0.25, 0.55)}
VARIATIONS = """
[[variations]]
of = "P1.thickness"
tolerance = "12 %"
level = { lot = 0.3, panel = 0.3, coupon = 0.4 }

[[variations]]
of = "P*.dk"
tolerance = 0.3
together = true
level = { lot = 0.6, panel = 0.2, coupon = 0.2 }

[[variations]]
of = ["L1.etch", "L3.etch"]
tolerance = "20 %"
level = { lot = 0.2, panel = 0.25, coupon = 0.55 }
"""
NESTED = changed(HEAD, ('"10 %"', '"9 %"')) + SIX_LAYERS + LINES + VARIATIONS
TEST = """
[test]
repeatability = "0.4 ohm"
guard_band = "0.2 ohm"
panels_per_lot = 10
coupons_per_panel = 3
sample_size = 6
accept_number = 1
"""


def without_levels(text: str) -> str:
    return "\n".join(row for row in text.split("\n") if not row.startswith("level = "))


@pytest.fixture(scope="module")
def nested() -> RunResult:
    return run(parse(NESTED + TEST), coupons=8000)


def test_coupons_are_whole_lots_of_the_size_told(nested: RunResult) -> None:
    assert nested.lots is not None
    assert (nested.lots.panels_per_lot, nested.lots.coupons_per_panel) == (10, 3)
    assert nested.lots.lots == 512  # 8000 / 30 = 266.7
    assert nested.coupons == 512 * 30
    by_default = run(parse(NESTED), coupons=1000)
    assert by_default.coupons == 32 * 40
    assert by_default.reading is None
    assert by_default.acceptance is None


def test_levels_leave_the_coupon_and_its_drivers_as_they_are(nested: RunResult) -> None:
    """Every germ is standard normal whatever its levels: all agrees within the intervals, or twice as much."""
    plain = run(parse(without_levels(NESTED)), coupons=16384)
    for one, other in zip(nested.lines, plain.lines, strict=True):
        assert {driver.variable for driver in one.drivers} == {driver.variable for driver in other.drivers}
        for driver in one.drivers:
            same = next(each for each in other.drivers if each.variable == driver.variable)
            assert driver.total.value == pytest.approx(same.total.value, abs=0.005)
        for here, there in ((one.inside, other.inside), (one.mean, other.mean), (one.deviation, other.deviation)):
            reach = 2.0 * (max(here.high - here.value, 0.0) + max(there.high - there.value, 0.0))
            assert here.value == pytest.approx(there.value, abs=reach)


def test_shares_of_the_variance_follow_from_the_drivers(nested: RunResult) -> None:
    """Nearly linear lines: the lot's share is the sum of first-order indices times lot shares."""
    for line in nested.lines:
        assert line.variance is not None
        for level, name in enumerate(("lot", "panel", "coupon")):
            expected = sum(driver.first.value * SHARES[driver.variable][level] for driver in line.drivers)
            assert getattr(line.variance, name).value == pytest.approx(expected, abs=0.02)
        assert {driver.variable for driver in line.variance.drivers} == {each.variable for each in line.drivers}


def test_yields_of_panels_and_lots_lie_between_alike_and_independent(nested: RunResult) -> None:
    """P(one passes) >= P(all n pass) >= P(one passes)^n for coupons that share anything."""
    places: list[LineResult | RunResult] = [*nested.lines, nested]
    for place in places:
        assert place.nested is not None
        coupon, panel, lot = place.inside.value, place.nested.panel.value, place.nested.lot.value
        assert coupon > panel > coupon**3
        assert panel > lot > panel**10
        assert int(place.nested.failing.sum()) == 512


def test_what_varies_by_the_lot_alone_passes_or_fails_by_the_lot() -> None:
    text = without_levels(NESTED).replace("tolerance = ", 'level = "lot"\ntolerance = ')
    result = run(parse(text), coupons=20_000)
    for line in result.lines:
        assert line.nested is not None
        assert line.variance is not None
        assert line.nested.lot.value == line.nested.panel.value == line.inside.value
        assert line.variance.lot.value == 1.0
        assert line.variance.panel.value == line.variance.coupon.value == 0.0
        assert line.inside.high - line.inside.low > 0.01, "512 lots, not 20,480 coupons"


def test_where_no_coupon_fails_each_lot_is_one_trial() -> None:
    """Exact: with none of n lots seen to fail, (1 - p)^n = 0.025 gives the far end of every yield."""
    result = run(parse(changed(NESTED, ('"9 %"', '"60 %"'))), coupons=1000)
    assert result.lots is not None
    assert result.nested is not None
    counted = 0.025 ** (1.0 / result.lots.lots)
    for interval in (result.nested.panel, result.nested.lot):
        assert interval.low == pytest.approx(counted, rel=1e-9)
    for interval in (result.inside, result.lines[0].inside):  # integrated along the tail, which no lot counts
        assert counted < interval.low < interval.high <= 1.0
        assert interval.high == 1.0


def test_the_coupon_level_told_makes_whole_lots_of_independent_coupons() -> None:
    """Exact: of independent coupons all n of a panel or lot pass with the n-th power of the yield."""
    told = BOARD.replace("tolerance = ", 'level = "coupon"\ntolerance = ')
    result = run(parse(told), coupons=20000)
    assert parse(told).has_levels
    assert not parse(BOARD).has_levels
    assert result.lots is not None
    for line in result.lines:
        assert line.nested is not None
        assert line.variance is not None
        assert line.variance.coupon.value == pytest.approx(1.0, abs=1e-9)
        for interval, size in ((line.nested.panel, 2), (line.nested.lot, 40)):
            assert interval.low - 0.01 < line.inside.value**size < interval.high + 0.01
    plain = run(parse(BOARD), coupons=16384)
    assert result.inside.value == pytest.approx(plain.inside.value, abs=0.006)


def test_the_test_judges_readings_and_lots(nested: RunResult) -> None:
    assert nested.acceptance is not None
    assert nested.acceptance.lots == 512
    places: list[LineResult | RunResult] = [*nested.lines, nested]
    for place in places:
        risks = place.reading
        assert risks is not None
        expected = place.inside.value + risks.false_accepts.value - risks.false_rejects.value
        assert risks.accepted.value == pytest.approx(expected, abs=1e-12)  # what is accepted, by definition
        assert risks.as_read.value > risks.accepted.value, "a guard band takes some"
        bands = [each.band.value for each in risks.guard_bands]
        assert bands == sorted(bands)
    assert nested.acceptance.quality is not None
    assert nested.acceptance.quality.value > nested.inside.value, "refused lots are the worse ones"


def test_the_table_of_lines_has_what_levels_and_readings_add(nested: RunResult) -> None:
    table = nested.line_table
    for name in ("panel_yield_low", "lot_yield", "variance_lot", "variance_panel", "variance_coupon", "as_read",
                 "false_accepts_high"):
        assert table[name].notna().all(), name
    assert "lot_yield" not in run(parse(BOARD), coupons=256).line_table


def test_a_test_without_levels_has_lots_of_independent_coupons() -> None:
    """Exact: the binomial formula. True impedance and yield are those of the run without a test."""
    text = without_levels(NESTED)
    result, plain = run(parse(text + TEST), coupons=16384), run(parse(text), coupons=16384)
    assert result.acceptance is not None
    assert result.lots is None
    assert result.nested is None
    accepted = result.acceptance.accepted
    assert accepted.value == pytest.approx(result.acceptance.if_independent,
                                           abs=2.0 * (accepted.high - accepted.low))
    assert accepted.high - accepted.low < 0.06
    answer, bare = json.loads(run_json(result)), json.loads(run_json(plain))
    assert "panel_yield" not in answer
    for place in (answer, *answer["lines"]):
        assert place.pop("test")
    assert answer == bare


def test_a_perfect_test_says_nothing() -> None:
    text = f"{without_levels(NESTED)}\n[test]\npanels_per_lot = 5\n"
    assert "test" not in json.loads(run_json(run(parse(text), coupons=256)))


def test_two_runs_with_the_same_seed_are_the_same_text() -> None:
    text = NESTED + TEST
    assert run_json(run(parse(text), coupons=300)) == run_json(run(parse(text), coupons=300))
    assert run_json(run(parse(text), coupons=300)) != run_json(run(parse(text), coupons=300, seed=2))


def test_coupons_on_the_command_line(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "board.toml"
    path.write_text(NESTED, encoding="utf-8")
    assert command("run", path, "--json", "--coupons", 1000) == 0
    assert json.loads(capsys.readouterr().out)["coupons"] == 1280
    assert command("run", path, "--json", "--coupons", 0) == 2
    assert "--coupons 0: must be from 1 to 16777216" in capsys.readouterr().err
    path.write_text(f"{NESTED}\n[test]\npanels_per_lot = 100000\ncoupons_per_panel = 100\n", encoding="utf-8")
    assert command("run", path, "--json") == 2
    assert "8 whole lots of 10000000" in capsys.readouterr().err
