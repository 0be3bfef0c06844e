"""Processes put together by hand for the tests of draws, predictions and statistics."""

from __future__ import annotations

import numpy as np

from tolerance.arrays import FloatArray, read_only
from tolerance.process.draws import Process, Variable
from tolerance.process.laws import Law, Shape
from tolerance.scenario.amounts import Amount
from tolerance.scenario.properties import Property


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
