"""The whole way from scenario to result, on small boards.

Reference values are brute force with the field solver, or exact relations of the format; what a line's own impedance
should be is checked in the tests of the solver.
"""

from __future__ import annotations

import numpy as np
import pytest

from tests.scenario_texts import BOARD, HEAD, LINES, SIX_LAYERS, changed
from tolerance.process.draws import draw_process, process_of
from tolerance.report.json_text import run_json
from tolerance.scenario import parse
from tolerance.solver.plan import SolverSettings
from tolerance.study.check import check
from tolerance.study.lines import prepare
from tolerance.study.run import run

COUPONS = 1024
WIDE = """
[[variations]]
of = ["L1.etch", "L3.etch"]
tolerance = "20 um"
together = true

[[variations]]
of = "C1.thickness"
tolerance = "15 %"
shape = "uniform"
"""


def test_yield_and_moments_equal_those_of_the_field_solver_itself() -> None:
    scenario = parse(HEAD + SIX_LAYERS + LINES + WIDE)
    result = run(scenario, coupons=COUPONS, seed=3)
    draws = draw_process(process_of(scenario), coupons=COUPONS, chance=np.random.default_rng(3).spawn(3)[0])
    passing = np.ones(COUPONS, dtype=bool)
    for line, predicted in zip(scenario.lines, result.lines, strict=True):
        prepared = prepare(scenario, line, SolverSettings())
        solved = prepared.impedance(prepared.section(draws))
        inside = (solved >= prepared.low_limit) & (solved <= prepared.high_limit)
        passing &= inside
        assert predicted.mean.value == pytest.approx(solved.mean(), rel=1e-5)
        assert predicted.deviation.value == pytest.approx(solved.std(ddof=1), rel=1e-3)
        assert predicted.inside.value == pytest.approx(inside.mean(), abs=1.5 / COUPONS)
        assert predicted.prediction.held_out_error < 1e-4 * line.target
    assert result.inside.value == pytest.approx(passing.mean(), abs=1.5 / COUPONS)
    assert result.inside.value <= min(line.inside.value for line in result.lines)


def test_shares_below_inside_and_above_make_one() -> None:
    for line in run(parse(HEAD + SIX_LAYERS + LINES + WIDE), coupons=COUPONS, seed=3).lines:
        assert line.below.value + line.inside.value + line.above.value == pytest.approx(1.0, abs=1e-12)


def test_only_variables_that_reach_a_line_drive_it() -> None:
    result = run(parse(BOARD), coupons=256)
    drivers = {line.name: {driver.variable for driver in line.drivers} for line in result.lines}
    together = "P1.dk + P2.dk"
    assert drivers["radio feed"] == {"P1.thickness", together, "L1.etch"}
    assert drivers["clock pair"] == {together, "L3.etch"}


def test_two_runs_with_the_same_seed_are_the_same_text() -> None:
    assert run_json(run(parse(BOARD), coupons=256)) == run_json(run(parse(BOARD), coupons=256))
    assert run_json(run(parse(BOARD), coupons=256)) != run_json(run(parse(BOARD), coupons=256, seed=2))


def test_a_seed_is_drawn_and_told_where_none_is_given() -> None:
    scenario = parse(changed(BOARD, ("seed = 1\n", "")))
    first = run(scenario, coupons=256)
    assert run_json(run(scenario, coupons=256, seed=first.seed)) == run_json(first)


def test_nothing_varies() -> None:
    result = run(parse(HEAD + SIX_LAYERS + LINES), coupons=256)
    for line in result.lines:
        assert line.drivers == ()
        assert line.deviation.value == 0.0
        assert line.mean.value == pytest.approx(line.nominal, rel=1e-12)
        assert line.cpk is None
    assert '"cpk": null' in run_json(result)


def test_coupons_that_cannot_exist_fail_and_are_counted() -> None:
    closing = WIDE.replace('"20 um"', '"260 um"')
    result = run(parse(HEAD + SIX_LAYERS + LINES + closing), coupons=4096, seed=1)
    assert all(line.impossible > 0 for line in result.lines)
    assert result.impossible >= max(line.impossible for line in result.lines)
    for line in result.lines:
        total = line.below.value + line.inside.value + line.above.value + line.impossible / 4096
        assert total == pytest.approx(1.0, abs=1e-12)


def test_solving_directly_reports_the_difference() -> None:
    for line in run(parse(BOARD), coupons=256, direct=20).lines:
        assert line.direct is not None
        assert line.direct.coupons == 20
        assert line.direct.largest < 1e-3 * line.target
        assert line.direct.verdicts_that_differ == 0


def test_modes_of_a_pair_hang_together() -> None:
    both_tied = 'gap = "150 um"\ntarget = "25 ohm"\nmode = "common"'
    common = changed(BOARD, ('gap = "150 um"\ntarget = "100 ohm"', both_tied))
    differential, even = check(parse(BOARD)).lines[1], check(parse(common)).lines[1]
    assert differential.common_mode == pytest.approx(even.impedance, rel=1e-12)
    assert even.effective_dk == pytest.approx(differential.even_effective_dk, rel=1e-12)
    assert 4.0 * even.impedance > differential.impedance, "the even mode's impedance is above the odd mode's"


def test_progress_is_told_to_the_end() -> None:
    told: list[tuple[str, int, int]] = []
    run(parse(BOARD), coupons=256, on_progress=lambda *step: told.append(step))
    assert ("solving lines", 2, 2) in told
    assert ("ranking drivers", 2, 2) in told


FAR = """
[[variations]]
of = "P1.dk"
shape = "uniform"
low = 4.40
high = 4.46
"""


def test_a_process_far_from_the_nominal_is_predicted_as_well_as_one_round_it() -> None:
    """The reference is the field solver on the same coupons."""
    for line in run(parse(HEAD + SIX_LAYERS + LINES + FAR), coupons=256, direct=50).lines[:1]:
        assert line.direct is not None
        assert line.direct.largest < 1e-4
        assert line.prediction.held_out_error < 1e-4


def test_a_variable_that_does_nothing_is_no_failure() -> None:
    flat = changed(HEAD + SIX_LAYERS + LINES, ('thickness = "25 um"', 'thickness = "90 um"'))
    nothing = '\n[[variations]]\nof = "top mask.over_copper"\ntolerance = "3 um"\n'
    result = run(parse(flat + nothing), coupons=256)
    assert result.lines[0].deviation.value == 0.0
