"""Scenarios side by side on common random numbers: differences of yields, and which of them are real."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import read_only
from tolerance.process.draws import Process, Variable
from tolerance.statistics.estimates import Interval


@dataclass(frozen=True, slots=True)
class Difference:
    """How much more of the coupons pass than in the first scenario: of all lines together, and of each by name."""

    together: Interval
    lines: Mapping[str, Interval]


def is_real(difference: Interval) -> bool:
    """Whether the interval of a difference leaves nought out."""
    return difference.low > 0.0 or difference.high < 0.0


def on_common_columns(processes: Sequence[Process]) -> list[Process]:
    """The processes with their variables in the same columns, by name; what one lacks is there as a draw that moves
    nothing. One seed then gives all of them the same draws."""
    names = tuple(dict.fromkeys(variable.name for process in processes for variable in process.variables))
    return [_spread(process, names) for process in processes]


def _spread(process: Process, names: tuple[str, ...]) -> Process:
    own = {variable.name: number for number, variable in enumerate(process.variables)}
    if tuple(own) == names:
        return process
    columns = [names.index(name) for name in own]
    correlation = np.eye(len(names))
    correlation[np.ix_(columns, columns)] = process.correlation
    variables = tuple(process.variables[own[name]] if name in own else Variable(name, ()) for name in names)
    return replace(process, variables=variables, correlation=read_only(correlation))
