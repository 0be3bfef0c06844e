"""Processes put together by hand for the tests of draws, predictions and statistics."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from tolerance.arrays import FloatArray, read_only
from tolerance.process.draws import Process, Variable
from tolerance.process.laws import Law, Shape
from tolerance.process.values import ProcessValues
from tolerance.scenario.amounts import Amount
from tolerance.scenario.properties import Property
from tolerance.surrogate.coordinates import BoxValues, training_shares
from tolerance.surrogate.prediction import Predictor, fit_predictor, see


def variable(name: str, nominal: float, *, shape: Shape = "normal", **terms: float | Amount | None) -> Variable:
    """A variable of one property; `terms` as the fields of a law, a bare tolerance or shift being a share."""
    layer, key = name.split(".")
    amounts = {word: Amount(value, relative=True) if isinstance(value, float) and word in ("tolerance", "shift")
               else value for word, value in terms.items()}
    law = Law(shape, nominal, **amounts)  # type: ignore[arg-type]
    return Variable(name, ((Property(name, layer, key, nominal), law),))


def process(*variables: Variable, correlation: FloatArray | None = None) -> Process:
    """A process of these variables, independent unless a correlation is given."""
    nominals = {member.name: member.nominal for each in variables for member, _ in each.members}
    return Process(variables, nominals, read_only(np.eye(len(variables)) if correlation is None else correlation))


def predictor_of(
    known: Process, columns: tuple[int, ...], impedance: Callable[[ProcessValues], FloatArray],
    logarithms: Callable[[ProcessValues], FloatArray], *, runs: int = 60, seed: int = 0, width: float = 1e-4,
) -> Predictor:
    """A prediction of `impedance` [ohm] in dimensions whose logarithms are given, (dimensions, points)."""
    see_chance, box_chance = np.random.default_rng(seed).spawn(2)
    seen = see(known, columns, logarithms, width=width, chance=see_chance)
    box = BoxValues(known, columns, width, training_shares(len(columns), runs=runs, chance=box_chance))
    return fit_predictor(seen, seen.of(box), impedance(box))
