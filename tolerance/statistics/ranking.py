"""The drivers of one line, ranked: which variables move its impedance, and by what share."""

from __future__ import annotations

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.draws import correlated_groups
from tolerance.statistics.dependent import dependent_indices
from tolerance.statistics.drivers import Model, ranked, sobol_indices
from tolerance.statistics.estimates import Driver
from tolerance.surrogate.prediction import Predictor


def model_of(predictor: Predictor) -> Model:
    """The predicted impedance [ohm] of one line, as a response of the variables that reach it."""
    return Model(predictor.names, lambda _, germ: germ, predictor.impedance_at, predictor.correlation,
                 swapped=predictor.impedance_swapped)


def rank_drivers(model: Model, *, chance: np.random.Generator, with_shapley: bool) -> tuple[Driver, ...]:
    """Every variable of the model with its shares of the variance, largest first.

    Ranked by total effect, or, where `with_shapley` (when anything in the scenario is correlated), by Shapley effect;
    equal ones stay in the order of the model. Correlated variables have their conditional indices; without
    correlation the indices are SALib's.
    """
    if not model.names:
        return ()
    index_chance, shapley_chance = chance.spawn(2)
    shapley: FloatArray | None = None
    if with_shapley:
        dependent = dependent_indices(model, chance=shapley_chance)
        first, total, shapley = dependent.first, dependent.total, dependent.shapley
    if not correlated_groups(model.correlation):
        independent = sobol_indices(model, chance=index_chance)
        first, total = independent.first, independent.total
    return ranked(model, first, total, shapley)
