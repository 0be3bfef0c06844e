"""How a line is predicted: what goes between processes, and the derivatives that the fit is given."""

from __future__ import annotations

import pickle

import numpy as np
import pytest

from tests.scenario_texts import BOARD
from tolerance.process.draws import draw_process, process_of
from tolerance.scenario import parse
from tolerance.sections.section import Section
from tolerance.solver.derivatives import parameters
from tolerance.solver.plan import SolverSettings
from tolerance.study.lines import prepare, section_parameters
from tolerance.study.predicting import predict_line


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
