"""Sampled Sobol' indices of real lines against the analytic ones of a polynomial.

The predicted impedance is expanded in Hermite polynomials of the independent germs, whose squared coefficients are
the parts of the variance (B. Sudret, "Global sensitivity analysis using polynomial chaos expansions", Reliability
Engineering & System Safety 93 (2008), pages 964-979); numpy's hermite_e is the general-purpose reference here.
"""

from __future__ import annotations

import itertools
import math
from pathlib import Path

import numpy as np
import pytest
from numpy.polynomial import hermite_e

from tolerance.arrays import FloatArray
from tolerance.process.draws import draw_process, process_of
from tolerance.scenario import load
from tolerance.solver.plan import SolverSettings
from tolerance.statistics.drivers import Model
from tolerance.statistics.ranking import model_of, rank_drivers
from tolerance.study.lines import prepare
from tolerance.study.predicting import predict_line

BOARD = Path(__file__).parents[1] / "scenarios" / "weir-module-10-layer.toml"
DEGREE = 3


def analytic_indices(model: Model) -> tuple[FloatArray, FloatArray]:
    """First-order and total indices (variables,) of the expansion, from a regression on random germs."""
    germ = np.random.default_rng(5).normal(size=(6000, model.dimensions))
    values = model.response(model.coordinates(germ))
    single = np.stack([hermite_e.hermeval(germ, np.eye(DEGREE + 1)[degree]) / math.sqrt(math.factorial(degree))
                       for degree in range(DEGREE + 1)])
    exponents = np.array([powers for powers in itertools.product(range(DEGREE + 1), repeat=model.dimensions)
                          if sum(powers) <= DEGREE])
    basis = np.prod([single[exponents[:, column], :, column] for column in range(model.dimensions)], axis=0).T
    coefficients = np.linalg.lstsq(basis, values, rcond=None)[0]
    unexplained = np.std(values - basis @ coefficients) / np.std(values)
    assert unexplained < 0.01, "the expansion stands for the impedance"
    present = exponents > 0
    parts = np.where(present.any(axis=1), coefficients**2, 0.0)
    alone = present & (present.sum(axis=1) == 1)[:, None]
    return parts @ alone / parts.sum(), parts @ present / parts.sum()


@pytest.mark.parametrize("name", ["memory data", "link pair out"])
def test_sampled_indices_are_those_of_the_polynomial(name: str) -> None:
    scenario = load(BOARD)
    line = next(line for line in scenario.lines if line.name == name)
    process = process_of(scenario)
    draws = draw_process(process, coupons=1024, chance=np.random.default_rng(0))
    known = predict_line(prepare(scenario, line, SolverSettings()), draws, chance=np.random.default_rng(1))
    model = model_of(known.predictor)
    first, total = analytic_indices(model)
    drivers = {driver.variable: driver for driver in rank_drivers(
        model, chance=np.random.default_rng(2), with_shapley=False)}
    for column, variable in enumerate(model.names):
        assert drivers[variable].first.value == pytest.approx(first[column], abs=0.005)
        assert drivers[variable].total.value == pytest.approx(total[column], abs=0.005)
    ranking = sorted(model.names, key=lambda variable: -total[model.names.index(variable)])
    large = [variable for variable in ranking if total[model.names.index(variable)] > 0.02]
    assert list(drivers)[: len(large)] == large
