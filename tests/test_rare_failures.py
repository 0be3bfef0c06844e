"""Lines that hardly ever fail, and what raises the yield, from scenario to result."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import ndtr

from tests.scenario_texts import HEAD, LINES, SIX_LAYERS
from tests.test_certificate import ready
from tolerance.process.draws import ProcessDraws, process_of
from tolerance.results import LineResult
from tolerance.scenario import parse
from tolerance.study.run import run

ONE_DIMENSION = """
[[variations]]
of = "{of}"
tolerance = "{tolerance}"
shape = "lognormal"
"""
BOTH = """
[[variations]]
of = ["L1.etch", "L3.etch"]
tolerance = "6 um"

[[variations]]
of = "P1.thickness"
tolerance = "9 %"
"""


def lines(variations: str, coupons: int = 4096) -> tuple[LineResult, ...]:
    return run(parse(HEAD + SIX_LAYERS + LINES + variations), coupons=coupons, seed=1).lines


def test_a_tail_of_one_dimension_is_that_of_the_solver_itself() -> None:
    """One variable: the line fails beyond the thicknesses at which the field solver itself says so (bisection)."""
    scenario = parse(HEAD + SIX_LAYERS + LINES + ONE_DIMENSION.format(of="P1.thickness", tolerance="8 %"))
    line = run(scenario, coupons=4096, seed=1).lines[0]
    assert line.tail is not None
    prepared = ready(scenario, scenario.lines[0])

    def impedance(germ: float) -> float:
        return float(prepared.impedance(prepared.section(ProcessDraws(process_of(scenario), np.array([[germ]]))))[0])

    exact = []
    for limit, sign in ((prepared.low_limit, -1.0), (prepared.high_limit, 1.0)):
        near, far = 0.0, 9.0 * sign
        for _ in range(40):
            middle = 0.5 * (near + far)
            near, far = (near, middle) if sign * (impedance(middle) - limit) > 0.0 else (middle, far)
        exact.append(float(ndtr(-abs(near))))
    assert sum(exact) < 1e-4
    assert line.tail.failing.value == pytest.approx(sum(exact), rel=0.02)
    assert line.tail.below.value == pytest.approx(exact[0], rel=0.02)
    assert line.inside.value == pytest.approx(1.0 - sum(exact), abs=1e-9)


def test_shares_still_make_one_and_intervals_have_a_width() -> None:
    for line in lines(BOTH):
        assert line.below.value + line.inside.value + line.above.value == pytest.approx(1.0, abs=1e-12)
        assert line.inside.low < line.inside.high


def test_what_fails_often_is_counted_and_not_integrated() -> None:
    often = BOTH.replace('"9 %"', '"40 %"')
    assert lines(often)[0].tail is None


def test_the_gain_of_a_halved_tolerance_is_that_of_a_scenario_with_it() -> None:
    """A second run with half the tolerance on the page, of its own seed and its own fit."""
    wide = BOTH.replace('"9 %"', '"30 %"')
    before = lines(wide, coupons=65536)[0]
    after = run(parse(HEAD + SIX_LAYERS + LINES + BOTH.replace('"9 %"', '"15 %"')), coupons=65536, seed=7).lines[0]
    assert before.levers is not None
    gain = next(lever for lever in before.levers.each if lever.variable == "P1.thickness").halved
    assert gain.value == pytest.approx(after.inside.value - before.inside.value, abs=1.5e-3)
    assert gain.value > 0.01


def test_groups_hold_their_variables_and_their_shares() -> None:
    """A group of one has that variable's total; copper and prepreg of independent layers add up to all."""
    line = lines(BOTH)[0]
    totals = {(group.of, group.name): group for group in line.groups}
    driver = {one.variable: one.total.value for one in line.drivers}
    assert totals["layer", "P1"].total.value == pytest.approx(driver["P1.thickness"], abs=1e-12)
    assert totals["material", "copper"].variables == ("L1.etch",)
    assert totals["material", "copper"].total.value + totals["material", "prepreg"].total.value \
        == pytest.approx(1.0, abs=0.02)


def test_coupons_that_cannot_exist_leave_no_levers() -> None:
    closing = BOTH.replace('"6 um"', '"260 um"')
    for line in lines(closing):
        assert line.impossible > 0
        assert line.levers is None
