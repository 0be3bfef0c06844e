"""Decisions on whole boards. What they say of a changed board must be what `run` says of the board so changed, which
solves its own sections anew; both use the same draws."""

from __future__ import annotations

import json
import math
from typing import Any

import numpy as np
import pytest

from tests.scenario_texts import BOARD, changed
from tolerance.decided import CenterResult, TightenResult
from tolerance.errors import InputError
from tolerance.report.decisions_json import center_json, compare_json, promise_json, tighten_json
from tolerance.scenario import parse
from tolerance.scenario.tables import Scenario
from tolerance.study.center import Wishes, center
from tolerance.study.decide import compare, promise, tighten
from tolerance.study.run import run

COUPONS = 4096
SAME = 4.5 / COUPONS  # verdicts that may differ by the predictions' errors, each time a few coupons
OFFERS = """
[[offers]]
of = "P1.thickness"
tolerance = "4 %"
cost = 4

[[offers]]
of = ["L1.etch", "L3.etch"]
tolerance = "5 %"
cost = 2.5

[[offers]]
of = ["L1.etch", "L3.etch"]
tolerance = "2 %"
cost = 8
"""
LEVELS = 'of = "P1.thickness"\nlevel = { lot = 0.7, coupon = 0.3 }'


@pytest.fixture(scope="module")
def board() -> Scenario:
    return parse(BOARD + OFFERS)


@pytest.fixture(scope="module")
def tightened(board: Scenario) -> TightenResult:
    return tighten(board, coupons=COUPONS)


@pytest.fixture(scope="module")
def centred(board: Scenario) -> CenterResult:
    return center(board, Wishes(grid=1e-6), coupons=COUPONS)


def yields_of_run(text: str) -> list[float]:
    """Of each line and of all together."""
    result = run(parse(text), coupons=COUPONS)
    return [*(line.inside.value for line in result.lines), result.inside.value]


@pytest.mark.parametrize(("key", "name", "change"), [
    ("halved", "P1.thickness", ('of = "P1.thickness"\ntolerance = "10 %"', 'of = "P1.thickness"\ntolerance = "5 %"')),
    ("doubled", "P1.thickness", ('of = "P1.thickness"\ntolerance = "10 %"', 'of = "P1.thickness"\ntolerance = "20 %"')),
    ("halved", "P*.dk", ("tolerance = 0.1", "tolerance = 0.05")),
    ("doubled", "L1.etch, L3.etch", ('of = ["L1.etch", "L3.etch"]\ntolerance = "10 %"',
                                     'of = ["L1.etch", "L3.etch"]\ntolerance = "20 %"')),
])
def test_a_changed_tolerance_yields_what_a_run_of_it_yields(
    tightened: TightenResult, key: str, name: str, change: tuple[str, str],
) -> None:
    one = next(each for each in tightened.variations if each.name == name)
    judged = getattr(one, key)
    found = [*(line.value for line in judged.lines), judged.together.value]
    assert found == pytest.approx(yields_of_run(changed(BOARD, change)), abs=SAME)


def test_as_it_is_it_yields_what_run_yields(tightened: TightenResult, board: Scenario) -> None:
    result = run(board, coupons=COUPONS)
    now = tightened.now
    assert [line.value for line in now.lines] == pytest.approx([line.inside.value for line in result.lines], abs=SAME)
    assert tightened.basis.solver_runs <= result.record.solver_runs, "no further solver run than run needs"
    for one in tightened.variations:
        place = one.factors.tolist().index(1.0)
        assert one.together[place] == now.together.value


def test_offers_yield_what_a_run_of_them_yields(tightened: TightenResult) -> None:
    offers = tightened.offers
    assert offers is not None
    for number, change in ((0, ('of = "P1.thickness"\ntolerance = "10 %"', 'of = "P1.thickness"\ntolerance = "4 %"')),
                           (2, ('of = ["L1.etch", "L3.etch"]\ntolerance = "10 %"',
                                'of = ["L1.etch", "L3.etch"]\ntolerance = "2 %"'))):
        yields = offers.offers[number].yields
        found = [*(line.value for line in yields.lines), yields.together.value]
        assert found == pytest.approx(yields_of_run(changed(BOARD, change)), abs=SAME)
    costs, values = (np.array([getattr(one, key) if key == "cost" else one.yields.aimed("each line")
                               for one in offers.front]) for key in ("cost", "value"))
    assert np.all(np.diff(costs) > 0.0)
    assert np.all(np.diff(values) > 0.0)


def test_a_centred_board_yields_what_a_run_of_the_moved_artwork_yields(centred: CenterResult) -> None:
    feed, pair = centred.lines
    assert feed.best == pytest.approx(round(feed.best * 1e6) * 1e-6, abs=1e-12), "on the grid"
    text = changed(BOARD, ('width = "180 um"', f'width = "{feed.best * 1e6:.6g} um"'),
                   ('width = "100 um"', f'width = "{pair.best * 1e6:.6g} um"'),
                   ('gap = "150 um"', f'gap = "{(pair.gap_at_best or 0.0) * 1e6:.6g} um"'))
    found = [*(line.value for line in centred.centred.lines), centred.centred.together.value]
    assert found == pytest.approx(yields_of_run(text), abs=2.0 * SAME)
    result = run(parse(changed(BOARD, ('width = "180 um"', f'width = "{(feed.on_target or 0) * 1e6:.9g} um"'))),
                 coupons=COUPONS)
    assert result.lines[0].mean.value == pytest.approx(50.0, abs=0.02)


def test_a_better_width_is_no_worse_than_those_beside_it(centred: CenterResult) -> None:
    feed = centred.lines[0]
    best = yields_of_run(changed(BOARD, ('width = "180 um"', f'width = "{feed.best * 1e6:.6g} um"')))[0]
    for other in (-4.0, 4.0):
        width = feed.best * 1e6 + other
        assert best >= yields_of_run(changed(BOARD, ('width = "180 um"', f'width = "{width:.6g} um"')))[0] - SAME


def test_a_moved_thickness_yields_what_a_run_of_it_yields(board: Scenario) -> None:
    result = center(board, Wishes(move="P1.thickness"), coupons=COUPONS)
    assert result.moved is not None
    text = changed(BOARD, ('thickness = "100 um"', f'thickness = "{result.moved.best * 1e6:.6g} um"'))
    found = [line.value for line in result.centred.lines]
    assert found == pytest.approx(yields_of_run(text)[:2], abs=2.0 * SAME)
    assert result.lines[1].best == result.lines[1].width, "the widths stay"


def test_other_gaps_yield_what_a_run_of_them_yields() -> None:
    close = changed(BOARD, ('limit = "10 %"', 'limit = "5 %"'))
    result = center(parse(close), Wishes(gaps=(130e-6, 170e-6)), coupons=COUPONS)
    alone = center(parse(close), Wishes(), coupons=COUPONS)
    for each in result.lines[1].gaps:
        text = changed(close, ('width = "100 um"\ngap = "150 um"',
                               f'width = "{each.width * 1e6:.9g} um"\ngap = "{each.gap * 1e6:.9g} um"'))
        known = run(parse(text), coupons=COUPONS)
        assert known.lines[1].nominal == pytest.approx(100.0, abs=0.01)
        assert each.inside.value == pytest.approx(known.lines[1].inside.value, abs=2.0 * SAME)
    runs = result.basis.solver_runs - alone.basis.solver_runs
    assert 0 < runs <= 2 * (60 + 15), "two fits without certificates, and a width each"


def test_ways_name_a_price_only_for_what_is_bought(centred: CenterResult) -> None:
    assert [way.name for way in centred.ways] == ["as it is", "center", "tighten", "both"]
    assert centred.ways[1].cost == 0.0
    assert (centred.ways[3].cost or 0.0) <= (centred.ways[2].cost or math.inf)


def test_what_varies_by_the_lot_goes_when_each_lot_is_centred() -> None:
    wide = ('tolerance = "10 %"', 'tolerance = "25 %"')
    text = changed(BOARD, ('of = "P1.thickness"', LEVELS), wide)
    lots, none = (center(parse(each), coupons=COUPONS) for each in (text, changed(BOARD, wide)))
    assert lots.lines[0].to_impedance.value > lots.lines[0].at_best.value + 0.02
    assert none.lines[0].to_impedance.value < none.lines[0].at_best.value + SAME


def test_promised_limits_are_those_of_the_run(board: Scenario) -> None:
    result, ran = promise(board, coupons=COUPONS), run(board, coupons=COUPONS)
    assert [one.curve.needed for one in result.lines] == [line.by_limit.needed for line in ran.lines]
    assert result.together.curve.needed == ran.by_limit.needed
    needed = result.lines[0].curve.needed
    assert needed is not None
    held = run(parse(changed(BOARD, ('limit = "10 %"', f'limit = "{100.0 * needed.value:.9g} %"'))), coupons=COUPONS)
    assert held.lines[0].inside.value == pytest.approx(0.99, abs=SAME)


def test_compared_scenarios_yield_what_their_runs_yield(board: Scenario) -> None:
    other_text = changed(BOARD, ('of = "P1.thickness"\ntolerance = "10 %"', 'of = "P1.thickness"\ntolerance = "15 %"'))
    result = compare([board, parse(other_text)], coupons=COUPONS)
    first, second = result.scenarios
    assert second.yields.together.value == pytest.approx(yields_of_run(other_text)[-1], abs=SAME)
    assert second.difference is not None
    gap = second.yields.together.value - first.yields.together.value
    assert second.difference.together.value == pytest.approx(gap, abs=1e-12)
    assert second.difference.lines["clock pair"].value == 0.0, "P1 does not reach it"
    assert first.has_offers
    assert not second.has_offers


def test_a_scenario_with_variables_of_its_own_is_compared_on_common_draws(board: Scenario) -> None:
    more = parse(BOARD + '[[variations]]\nof = "C1.dk"\ntolerance = "0.1 %"\n')
    result = compare([board, more], coupons=COUPONS)
    assert result.scenarios[1].difference is not None
    assert abs(result.scenarios[1].difference.together.value) <= SAME


def test_compare_wants_two(board: Scenario) -> None:
    with pytest.raises(InputError, match="two scenarios"):
        compare([board])


@pytest.mark.parametrize("move", ["L1.thickness", "P9.thickness", "P1.dk", "thickness"])
def test_a_move_of_what_is_no_thickness_of_a_dielectric_is_refused(board: Scenario, move: str) -> None:
    with pytest.raises(InputError, match="must be one of"):
        center(board, Wishes(move=move), coupons=256)


def test_etch_that_does_not_vary_can_be_moved_all_the_same() -> None:
    still = BOARD.split('[[variations]]\nof = ["L1.etch"')[0]
    result = center(parse(still), coupons=1024)
    moved = changed(still, ('width = "180 um"', f'width = "{result.lines[0].best * 1e6:.6g} um"'))
    expected = run(parse(moved), coupons=1024).lines[0].inside.value
    assert result.lines[0].at_best.value == pytest.approx(expected, abs=4.5 / 1024)


def test_json_is_the_same_for_the_same_seed_and_has_no_nan(board: Scenario, tightened: TightenResult,
                                                          centred: CenterResult) -> None:
    assert tighten_json(tighten(board, coupons=COUPONS)) == tighten_json(tightened)
    for text in (tighten_json(tightened), center_json(centred), promise_json(promise(board, coupons=256)),
                 compare_json(compare([board, board], coupons=256))):
        value: dict[str, Any] = json.loads(text, parse_constant=_refuse)
        assert value["seed"] == 1


def _refuse(constant: str) -> None:
    raise AssertionError(constant)


def test_tables_are_data_frames_with_a_row_for_each(tightened: TightenResult, centred: CenterResult) -> None:
    assert len(tightened.table) == 3
    assert len(tightened.curve_table) == 3 * 21
    assert set(tightened.front_table["reaches_target"]) <= {True, False}
    assert list(centred.table["line"]) == ["radio feed", "clock pair"]
