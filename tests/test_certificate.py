"""Verdicts against brute force: the field solver on every coupon of small boards."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from tests.scenario_texts import BOARD, HEAD, LINES, SIX_LAYERS
from tests.test_study import WIDE
from tolerance.arrays import BoolArray, FloatArray
from tolerance.process.draws import ProcessDraws, draw_process, process_of
from tolerance.scenario import load, parse
from tolerance.scenario.tables import Line, Scenario
from tolerance.solver.plan import SolverSettings
from tolerance.study import predicting
from tolerance.study.lines import PreparedLine, prepare
from tolerance.study.predicting import PredictedLine, predict_line
from tolerance.study.run import run

COUPONS = 2048
SCENARIOS = Path(__file__).parents[1] / "scenarios"


def sample(scenario: Scenario, coupons: int = COUPONS) -> ProcessDraws:
    return draw_process(process_of(scenario), coupons=coupons, chance=np.random.default_rng(6))


def ready(scenario: Scenario, line: Line) -> PreparedLine:
    return prepare(scenario, line, SolverSettings())


def inside(line: PredictedLine, impedance: FloatArray) -> BoolArray:
    return np.asarray((impedance >= line.prepared.low_limit) & (impedance <= line.prepared.high_limit), dtype=np.bool_)


@pytest.mark.parametrize("text", [BOARD, HEAD + SIX_LAYERS + LINES + WIDE])
def test_every_verdict_is_that_of_the_field_solver(text: str) -> None:
    scenario = parse(text)
    draws = sample(scenario)
    for line in scenario.lines:
        prepared = ready(scenario, line)
        predicted = predict_line(prepared, draws, chance=np.random.default_rng(1))
        solved = prepared.impedance(prepared.section(draws))
        assert predicted.certificate.certified
        assert np.array_equal(inside(predicted, predicted.impedance), inside(predicted, solved))
        assert predicted.impedance == pytest.approx(solved, abs=0.02)


def test_coupons_near_a_limit_are_solved(monkeypatch: pytest.MonkeyPatch) -> None:
    """With errors counted a million times, every coupon lies near a limit: all are the solver's own values."""
    monkeypatch.setattr(predicting, "MULTIPLE", 1e6)
    monkeypatch.setattr(predicting, "WIDEST", 1e7)
    scenario = parse(HEAD + SIX_LAYERS + LINES + WIDE)
    draws = sample(scenario, 256)
    prepared = ready(scenario, scenario.lines[1])
    predicted = predict_line(prepared, draws, chance=np.random.default_rng(1))
    assert predicted.impedance == pytest.approx(prepared.impedance(prepared.section(draws)), rel=1e-12)
    assert 200 < predicted.certificate.solved < 256  # some were solved for the fit before
    assert predicted.prediction.solver_runs == 15 + predicted.certificate.solved


def test_above_the_cap_the_line_is_not_certified_and_its_interval_is_wider(monkeypatch: pytest.MonkeyPatch) -> None:
    scenario = parse(HEAD + SIX_LAYERS + LINES + WIDE)
    certain = run(scenario, coupons=4096, seed=3)
    monkeypatch.setattr(predicting, "CAP", 0)
    monkeypatch.setattr(predicting, "MULTIPLE", 1e4)
    monkeypatch.setattr(predicting, "WIDEST", 1e5)
    doubtful = run(scenario, coupons=4096, seed=3)
    told = [line.certificate for line in doubtful.lines]
    assert any(not one.certified for one in told)
    for one, sure, unsure in zip(told, certain.lines, doubtful.lines, strict=True):
        assert sure.certificate.certified
        if not one.certified:
            assert one.needed > one.cap == 0
            assert unsure.inside.high - unsure.inside.low >= sure.inside.high - sure.inside.low


def test_equal_seeds_give_equal_certificates() -> None:
    scenario = parse(BOARD)
    one, other = (run(scenario, coupons=1024, seed=2).lines for _ in range(2))
    assert [line.certificate for line in one] == [line.certificate for line in other]


def test_a_line_takes_60_solver_runs_before_its_certificate() -> None:
    for line in run(parse(BOARD), coupons=256, seed=1).lines:
        assert line.prediction.solver_runs - line.certificate.solved <= 60


@pytest.mark.parametrize(("file", "name"), [
    ("fire-lookout-4-layer.toml", "camera pair"), ("greenhouse-hub-6-layer.toml", "network pair"),
    ("tide-gauge-radio-4-layer.toml", "antenna feed")])
def test_a_coated_line_that_often_fails_takes_250_solver_runs_in_all(file: str, name: str) -> None:
    """Of 65,536 coupons 4 to 6 % fail, so that many lie near a limit."""
    scenario = load(SCENARIOS / file)
    prepared = ready(scenario, next(line for line in scenario.lines if line.name == name))
    draws = sample(scenario, 65536)
    predicted = predict_line(prepared, draws, chance=np.random.default_rng(1))
    assert predicted.certificate.certified
    assert predicted.prediction.solver_runs <= 250
    doubtful = np.flatnonzero(np.abs(predicted.impedance - prepared.high_limit) < 0.1)[::8]
    solved = prepared.impedance(prepared.section(draws.rows(doubtful)))
    assert np.array_equal(inside(predicted, predicted.impedance[doubtful]), inside(predicted, solved))


@pytest.mark.parametrize(("registration", "limit"), [("75 um", "5 %"), ("150 um", "15 %")])
def test_a_broadside_pair_under_wide_registration_is_certified_and_right(registration: str, limit: str) -> None:
    """The traces of 102 um lie up to four widths apart; mean and deviation are those of the solver on every coupon."""
    text = (SCENARIOS / "ferry-beacon-6-layer.toml").read_text(encoding="utf-8")
    scenario = parse(text.replace('tolerance = "50 um"', f'tolerance = "{registration}"')
                     .replace('limit   = "5 %"', f'limit = "{limit}"'))
    prepared = ready(scenario, scenario.lines[1])
    draws = sample(scenario)
    predicted = predict_line(prepared, draws, chance=np.random.default_rng(1))
    solved = prepared.impedance(prepared.section(draws))
    assert predicted.certificate.certified
    assert np.array_equal(inside(predicted, predicted.impedance), inside(predicted, solved))
    error = predicted.predictor.impedance(draws.germ) - solved
    assert np.sqrt(np.mean(error**2)) < 0.005 * np.std(solved)
    assert np.mean(error) == pytest.approx(0.0, abs=0.002 * float(np.std(solved)))
