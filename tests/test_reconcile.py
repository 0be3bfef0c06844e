"""Measured coupons against the prediction: exact linear-normal cases, coverage, and known shifts of a small board.

Where the response is linear and all is normal, the most plausible shift is the conditional mean of a joint normal, in
closed form (textbook: conditioning of the multivariate normal), and so is its covariance.
"""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from openpyxl import Workbook
from scipy.optimize import minimize_scalar
from scipy.special import erf

from tests.scenario_texts import HEAD, LINES, SIX_LAYERS
from tolerance.arrays import FloatArray
from tolerance.command import main
from tolerance.cores import silent
from tolerance.errors import InputError
from tolerance.process.draws import ProcessDraws, process_of
from tolerance.reconciled import Reconciled
from tolerance.scenario import Scenario, parse
from tolerance.solver.plan import SolverSettings
from tolerance.statistics.readings import Readings, line_means
from tolerance.statistics.reconcile import (
    Observed,
    chance_of_more,
    misfit_of,
    most_plausible,
    single_causes,
    verdict_of,
)
from tolerance.study.coupon_tables import CouponTable, SectionReading, read_coupons, read_sections
from tolerance.study.lines import prepare
from tolerance.study.reconcile import FittedLines, fit_lines, reconcile, reconciled

VARIATIONS = """
[[variations]]
of = ["P1.thickness", "C1.thickness"]
tolerance = "8 %"

[[variations]]
of = ["P1.dk", "C1.dk"]
tolerance = "6 %"

[[variations]]
of = ["L1.etch", "L3.etch"]
tolerance = "15 um"
"""
TWO_MORE = """
[[lines]]
name = "wide feed"
layer = "L1"
width = "300 um"
target = "37 ohm"

[[lines]]
name = "narrow feed"
layer = "L1"
width = "90 um"
target = "68 ohm"
"""
TEXT = HEAD + SIX_LAYERS + LINES + TWO_MORE + VARIATIONS
SLOPES = np.array([[1.2, -0.7, 0.3], [0.4, 0.9, -1.1]])
PRIOR = np.array([[1.0, -0.5, 0.0], [-0.5, 1.0, 0.0], [0.0, 0.0, 1.0]])
NOISE = np.array([[0.09, 0.02], [0.02, 0.16]])


def linear(germ: FloatArray) -> FloatArray:
    return np.asarray(50.0 + germ @ SLOPES.T, dtype=np.float64)


@cache
def board() -> tuple[Scenario, FittedLines]:
    scenario = parse(TEXT)
    return scenario, fit_lines(scenario, process_of(scenario), 4096, 1, silent)[0]


def measured(germ: FloatArray, *, noise: float, chance: np.random.Generator) -> CouponTable:
    """Readings of coupons with these germs (coupons, variables), all solved by the field solver."""
    scenario, fitted = board()
    draws = ProcessDraws(fitted.process, np.asfortranarray(germ))
    names: list[str] = []
    values: list[FloatArray] = []
    for line in scenario.lines:
        prepared = prepare(scenario, line, SolverSettings())
        solved = prepared.impedance(prepared.section(draws))
        names += [line.name] * len(solved)
        values.append(solved + noise * chance.standard_normal(len(solved)))
    return CouponTable(tuple(names), np.concatenate(values), ("",) * len(names), ("",) * len(names))


def told(table: CouponTable, *, noise: float = 0.1, cuts: tuple[SectionReading, ...] = ()) -> Reconciled:
    scenario, fitted = board()
    return reconciled(scenario, fitted, table, cuts, noise, 1, np.random.default_rng(7))


def moved(name: str, germ: float, *, coupons: int = 20, scatter: float = 0.2, noise: float = 0.1) -> CouponTable:
    """Coupons whose one property is off by so many deviations of its distribution, the others scattering a little."""
    chance = np.random.default_rng(11)
    names = [variable.name for variable in board()[1].process.variables]
    germs = scatter * chance.standard_normal((coupons, len(names)))
    germs[:, names.index(name)] += germ
    return measured(germs, noise=noise, chance=chance)


def test_a_linear_normal_case_is_the_conditional_normal() -> None:
    values = np.array([51.3, 49.2])
    found = most_plausible(linear, Observed(values, NOISE), PRIOR)
    gain = PRIOR @ SLOPES.T @ np.linalg.inv(SLOPES @ PRIOR @ SLOPES.T + NOISE)
    assert found.mean == pytest.approx(gain @ (values - 50.0), rel=1e-7)
    assert found.covariance == pytest.approx(PRIOR - gain @ SLOPES @ PRIOR, rel=1e-7)
    whole = SLOPES @ PRIOR @ SLOPES.T + NOISE
    expected = float((values - 50.0) @ np.linalg.inv(whole) @ (values - 50.0))
    assert misfit_of(linear, Observed(values, NOISE), PRIOR) == pytest.approx(expected, rel=1e-7)
    assert chance_of_more(expected, 2) == pytest.approx(np.exp(-0.5 * expected))  # chi-squared of 2 degrees, exact


def test_the_search_settles_where_the_response_bends_over() -> None:
    """Towards the end of a uniform law nothing more follows; the mode is that of scipy's search along a line."""
    def response(germ: FloatArray) -> FloatArray:
        return np.asarray(0.05 * erf(germ * np.sqrt(0.5)))

    for seen in (0.1, 0.45, 0.7):
        found = most_plausible(response, Observed(np.array([seen]), np.array([[0.01]])), np.eye(1))
        exact = minimize_scalar(lambda germ, seen=seen: (seen - 0.05 * erf(germ * np.sqrt(0.5))) ** 2 / 0.01 + germ**2,
                                bounds=(0.0, 6.0), method="bounded", options={"xatol": 1e-10})
        assert found.mean[0] == pytest.approx(exact.x, abs=1e-4), "slopes are differences over a tenth of a germ"


def test_the_evidence_of_a_single_cause_is_that_of_a_normal() -> None:
    values = np.array([51.3, 49.2])
    off = values - 50.0
    for cause in single_causes(linear, Observed(values, NOISE), np.eye(3)):
        slope = SLOPES[:, cause.column]
        whole = NOISE + np.outer(slope, slope)
        exact = 0.5 * (off @ np.linalg.inv(NOISE) @ off - off @ np.linalg.inv(whole) @ off
                       - np.log(np.linalg.det(whole) / np.linalg.det(NOISE)))
        assert cause.evidence == pytest.approx(exact, rel=1e-7)


def test_the_intervals_of_a_linear_normal_case_hold_what_they_say() -> None:
    chance = np.random.default_rng(5)
    root, repeats = np.linalg.cholesky(PRIOR), 2000
    held = np.zeros(3)
    for _ in range(repeats):
        truth = root @ chance.standard_normal(3)
        values = linear(truth[np.newaxis])[0] + chance.multivariate_normal([0.0, 0.0], NOISE)
        found = most_plausible(linear, Observed(values, NOISE), PRIOR)
        held += np.abs(found.mean - truth) <= 1.6448536 * np.sqrt(np.diag(found.covariance))
    assert np.all(np.abs(held / repeats - 0.90) < 4.0 * np.sqrt(0.09 / repeats))


def test_no_shift_is_needed_where_nothing_is_off_and_a_mixture_is_said() -> None:
    assert verdict_of(single_causes(linear, Observed(np.array([50.1, 49.95]), NOISE), np.eye(3)))[0] == "none"
    far = Observed(np.array([53.0, 53.0]), 1e-4 * np.eye(2))
    assert verdict_of(single_causes(linear, far, np.eye(3)))[0] == "mixture"


def test_means_of_lines_scatter_together_as_their_coupons_do() -> None:
    chance = np.random.default_rng(3)
    spread = np.array([[4.0, 1.5], [1.5, 1.0]])
    coupons = chance.multivariate_normal([50.0, 90.0], spread, size=4000)
    line, unit = np.tile([0, 1], 4000), np.repeat(np.arange(4000), 2)
    noise = 0.5 * chance.standard_normal(8000)
    means = line_means(Readings(line, coupons.ravel() + noise, unit), spread=spread, repeatability=0.5)
    assert means.scatter == pytest.approx(1.0, abs=4.0 * np.sqrt(2.0 / 4000))
    assert means.covariance == pytest.approx((means.scatter * spread + 0.25 * np.eye(2)) / 4000, rel=1e-9)
    one = line_means(Readings(line[:2], coupons[0], unit[:2]), spread=spread, repeatability=0.5)
    assert one.scatter == 1.0  # a single coupon says nothing: as given


def test_a_width_six_micrometres_over_is_named() -> None:
    result = told(moved("L1.etch", 1.2))  # 15 um are three deviations, so 1.2 of them are 6 um
    assert result.verdict == "one"
    assert result.causes[0].variable == "L1.etch"
    member = result.causes[0].members[0]
    assert member.low <= 6e-6 <= member.high
    assert member.high - member.low < 4e-6
    etch = next(shift for shift in result.shifts if shift.variable == "L1.etch")
    assert etch.members[0].low <= 6e-6 <= etch.members[0].high
    assert {each.name for each in result.yields} == {*(line.name for line in board()[0].lines), "all lines together"}
    assert len(result.line_table) == 4


def test_what_one_line_alone_cannot_tell_apart_is_said() -> None:
    whole = moved("C1.dk", 1.5)  # 3 % high; only the pair on L3 sees C1, and sees it as it sees other things
    pair = [row for row, name in enumerate(whole.lines) if name == "clock pair"]
    table = CouponTable(("clock pair",) * len(pair), whole.values[pair], ("",) * len(pair), ("",) * len(pair))
    result = told(table)
    assert result.verdict == "several"
    names = {cause.variable for cause in result.causes}
    assert {"C1.dk", "L3.etch"} <= names
    cut = (*(SectionReading("L3.etch", each) for each in (2e-7, -4e-7, 1e-7, 0.0, 3e-7, -2e-7, 1e-7, -1e-7)),
           SectionReading("C1.thickness", 120.3e-6), SectionReading("C1.thickness", 119.8e-6))
    decided = told(table, cuts=cut)
    assert (decided.verdict, decided.causes[0].variable) == ("one", "C1.dk")


def test_a_dk_three_percent_high_is_named_where_lines_of_several_widths_tell_it() -> None:
    result = told(moved("P1.dk", 1.5))  # 6 % are three deviations: 3 % of 4.0 is 0.12
    assert (result.verdict, result.causes[0].variable) == ("one", "P1.dk")
    member = result.causes[0].members[0]
    assert member.low <= 0.12 <= member.high


def test_intervals_of_a_small_board_hold_the_true_shift() -> None:
    """90 % intervals of all shifts, in 80 lots whose shifts come from the given distributions."""
    _, fitted = board()
    chance = np.random.default_rng(21)
    variables = len(fitted.process.variables)
    held = np.zeros(variables)
    repeats = 80
    for _ in range(repeats):
        truth = chance.standard_normal(variables)
        germs = truth + 0.4 * chance.standard_normal((16, variables))
        result = told(measured(germs, noise=0.2, chance=chance), noise=0.2)
        shifts = {shift.variable: shift.germ for shift in result.shifts}
        for column, variable in enumerate(fitted.process.variables):
            held[column] += shifts[variable.name].low <= truth[column] <= shifts[variable.name].high
    assert 0.85 <= np.mean(held) / repeats <= 0.95, held
    standard_error = np.sqrt(0.09 / repeats)
    assert np.all(held / repeats > 0.90 - 4.0 * standard_error), held


def test_several_lots_are_told_one_by_one() -> None:
    one, other = moved("L1.etch", 0.0), moved("L1.etch", 4.5)
    table = CouponTable(one.lines + other.lines, np.concatenate([one.values, other.values]),
                        ("A",) * len(one.lines) + ("B",) * len(other.lines), ("",) * 2 * len(one.lines))
    result = told(table)
    assert [(lot.lot, lot.fits) for lot in result.lots] == [("A", True), ("B", False)]
    assert result.everything.lot == "all readings"


def test_tables_are_read_and_what_is_wrong_is_told_by_its_row(tmp_path: Path) -> None:
    scenario = board()[0]
    good = tmp_path / "good.csv"
    good.write_text("Panel;Line;Value [ohm];lot\n1;radio feed;50,1;A\n2;clock pair;99,5;A\n", encoding="utf-8")
    table = read_coupons(good, scenario)
    assert table.lines == ("radio feed", "clock pair")
    assert table.values.tolist() == [50.1, 99.5]
    assert (table.lots, table.panels) == (("A", "A"), ("1", "2"))
    bad = tmp_path / "bad.csv"
    bad.write_text("line,value\nradio fed,50\nradio feed,-3\n", encoding="utf-8")
    with pytest.raises(InputError, match=r'row 2: no line is called "radio fed"; did you mean.*row 3 holds -3 ohm'):
        read_coupons(bad, scenario)
    bad.write_text("trace,value\nradio feed,50\n", encoding="utf-8")
    with pytest.raises(InputError, match=r'needs a column headed line; it has "trace", "value"'):
        read_coupons(bad, scenario)
    book = Workbook()
    sheet = book.active
    assert sheet is not None
    for row in (("property", "value"), ("radio feed.width", "186 um"), ("P1.dk", 4.1), ("P1.thickness", "98 um")):
        sheet.append(row)
    book.save(tmp_path / "cuts.xlsx")
    cuts = read_sections(tmp_path / "cuts.xlsx", scenario, board()[1].process)
    assert [cut.property for cut in cuts] == ["L1.etch", "P1.dk", "P1.thickness"]
    assert [cut.value for cut in cuts] == pytest.approx([6e-6, 4.1, 98e-6])
    sheet.append(("P2.thickness", "98 um"))
    book.save(tmp_path / "cuts.xlsx")
    with pytest.raises(InputError, match=r'row 5: "P2.thickness" is nothing that varies'):
        read_sections(tmp_path / "cuts.xlsx", scenario, board()[1].process)


def test_the_command_prints_writes_a_figure_and_says_the_same_as_json(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "orchard.toml").write_text(TEXT, encoding="utf-8")
    table = moved("L1.etch", 1.2)
    rows = [f"{name},{value:.4f}" for name, value in zip(table.lines, table.values.tolist(), strict=True)]
    (tmp_path / "lot.csv").write_text("\n".join(["line,value", *rows]), encoding="utf-8")

    def command(*words: str) -> int:
        with pytest.raises(SystemExit) as ended:
            main(["reconcile", "orchard.toml", "lot.csv", "--coupons", "1024", "--repeatability", *words])
        assert isinstance(ended.value.code, int)
        return ended.value.code

    assert command("0.1 ohm") == 0
    said = capsys.readouterr().out
    assert "Most plausible cause: L1.etch (+" in said
    assert (tmp_path / "out" / "orchard" / "predicted-and-measured.png").stat().st_size > 10_000
    assert command("0.1 ohm", "--json") == 0
    answer = json.loads(capsys.readouterr().out)
    assert (answer["verdict"], answer["causes"][0]["variable"], answer["readings"]) == ("one", "L1.etch", 80)
    assert answer["yields"][-1]["name"] == "all lines together"
    assert command("-1 ohm") == 2
    assert command("1 um") == 2
    (tmp_path / "high.csv").write_text("\n".join(["line,value ohm", *(
        f"{name},{value + 3.0:.4f}" for name, value in zip(table.lines, table.values.tolist(), strict=True))]),
        encoding="utf-8")
    biased = parse(TEXT + '[test]\nbias = "3 ohm"\n')  # what a reading has too much is taken off it
    off = reconcile(biased, tmp_path / "high.csv", repeatability=0.1, coupons=1024, seed=1).everything.lines[0].mean
    assert off == pytest.approx(float(np.mean(table.values[:20])), abs=1e-3)
    direct = reconcile(parse(TEXT), tmp_path / "lot.csv", repeatability=0.1, coupons=1024, seed=1)
    assert direct.shift_table.iloc[0]["learned"] > 0.8
