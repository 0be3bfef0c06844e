"""How a line is predicted: what goes between processes, and the derivatives that the fit is given."""

from __future__ import annotations

import pickle
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from tests.scenario_texts import BOARD
from tolerance.process.draws import draw_process, process_of
from tolerance.scenario import load, parse
from tolerance.sections.section import Section
from tolerance.solver.derivatives import parameters
from tolerance.solver.plan import SolverSettings
from tolerance.study.lines import prepare, section_parameters
from tolerance.study.predicting import predict_line, solve_runs
from tolerance.surrogate.coordinates import BoxValues

SCENARIOS = Path(__file__).parents[1] / "scenarios"


def test_a_predicted_line_goes_through_a_pipe() -> None:
    """Work on several cores is done in processes of their own, which send back what they come to."""
    scenario = parse(BOARD)
    draws = draw_process(process_of(scenario), coupons=256, chance=np.random.default_rng(1))
    line = predict_line(prepare(scenario, scenario.lines[0], SolverSettings()), draws, chance=np.random.default_rng(2))
    received = pickle.loads(pickle.dumps(line))
    assert np.array_equal(received.predictor.impedance(draws.germ), line.predictor.impedance(draws.germ))


@pytest.mark.parametrize("number", range(len(parse(BOARD).lines)))
def test_partial_derivatives_of_a_line_are_those_of_the_impedance_it_shows(number: int) -> None:
    """Against central differences of the impedance that is meant: for pairs twice or half of a mode's."""
    scenario = parse(BOARD)
    prepared = prepare(scenario, scenario.lines[number], SolverSettings())
    assert prepared.has_gradient
    assert isinstance(prepared.nominal, Section)
    impedance, gradient = prepared.impedance_and_gradient(prepared.nominal)
    assert impedance == pytest.approx(prepared.impedance(prepared.nominal), rel=1e-12)
    assert len(gradient) == len(section_parameters(prepared.nominal))
    for (name, value, put), slope in zip(parameters(prepared.nominal), gradient, strict=True):
        up, down = (prepared.impedance(put(prepared.nominal, way * value)) for way in (1.001, 0.999))
        assert slope == pytest.approx((up - down) / (0.002 * value), rel=1e-3, abs=1e-5 * impedance[0] / value[0]), name


def test_slopes_along_the_coordinates_are_those_of_the_solver_between_neighbours() -> None:
    """ln Z of sections a small step apart in every variable at once, solved, against slope times step."""
    scenario = load(SCENARIOS / "weir-module-10-layer.toml")
    prepared = prepare(scenario, scenario.lines[1], SolverSettings())
    process = process_of(scenario)
    draws = draw_process(process, coupons=256, chance=np.random.default_rng(1))
    seen = predict_line(prepared, draws, chance=np.random.default_rng(2)).predictor.seen
    width = prepared.line.width
    for places in (np.random.default_rng(3).uniform(-0.6, 0.6, (5, len(seen.columns))),
                   np.zeros((1, len(seen.columns)))):
        here = solve_runs(prepared, seen, BoxValues(process, seen.columns, width, places), slopes=True)
        step = 0.003 * np.random.default_rng(4).choice([-1.0, 1.0], places.shape)
        up, down = (solve_runs(prepared, seen, BoxValues(process, seen.columns, width, places + way * step))
                    for way in (1.0, -1.0))
        told = np.sum(here.slopes.values * (up.coordinates - down.coordinates), axis=1)
        assert told == pytest.approx(np.log(up.impedance / down.impedance), rel=2e-3, abs=1e-7)


def test_a_thicker_mask_never_raises_the_impedance() -> None:
    """Exact: capacitance rises with the permittivity anywhere (Dirichlet's principle), and mask is more than air."""
    scenario = load(SCENARIOS / "fire-lookout-4-layer.toml")
    for line in scenario.lines:
        prepared = prepare(scenario, line, SolverSettings())
        assert isinstance(prepared.nominal, Section)
        assert prepared.nominal.mask is not None
        nominal = prepared.nominal.mask
        thinner = np.linspace(0.0, 10e-6, 21)
        rows = prepared.nominal.rows(np.zeros(21, dtype=np.int64))
        masks = replace(nominal, on_laminate=nominal.on_laminate - thinner, dk=np.repeat(nominal.dk, 21),
                        over_copper=nominal.over_copper - thinner)
        impedance = prepared.impedance(replace(rows, mask=masks))
        assert np.all(np.diff(impedance) > 0.0)
        assert np.all(np.diff(impedance, 2)[2:-1] < 0.02)
