"""Coordinates of a line's prediction: where its training runs lie, and how a draw is seen by the polynomial.

A coordinate is the logarithm of the variable's property where that stays well above zero (impedance goes nearly as
powers of lengths and permittivities), else the property itself (etch, registration), scaled so that the training runs
fill [-1, 1]. Measured on eight-variable microstrips against their closed form, degree 2: logarithms make the largest
error five times smaller than the values themselves. Runs evenly over +-3 deviations give a root mean square error
over draws within a third of the smallest of all designs tried (normal ones of 1 to 2 deviations, even and arcsine
ones over +-2.5 to +-5), and the smallest largest error; an even box of +-5 deviations is three times worse.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from tolerance.arrays import FloatArray
from tolerance.process.draws import ETCH, Process, Variable, sobol_uniforms
from tolerance.process.laws import Law, quantile

TRAINING_REACH = 3.0  # germs of the training runs go from minus to plus this; uniform laws: from end to end
FARTHEST_GERM = 6.5  # no draw goes further: Sobol' points are at least 2^-31 from the ends
LOWEST_SHARE = 0.1  # of the nominal that the farthest draw must keep for its logarithm to be taken


@dataclass(frozen=True, slots=True)
class Coordinates:
    """The coordinates of one line: of the variables at `columns` of the process, which reach the line.

    width : drawn width of the line [m], what a percentage of etch is of.
    """

    process: Process
    columns: tuple[int, ...]
    width: float

    @property
    def dimensions(self) -> int:
        return len(self.columns)

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the variables, in the order of the coordinates."""
        return tuple(self.process.variables[column].name for column in self.columns)

    @property
    def correlation(self) -> FloatArray:
        """Correlation of the germs of these variables, (dimensions, dimensions)."""
        return np.asarray(self.process.correlation[np.ix_(self.columns, self.columns)], dtype=np.float64)

    def of_draws(self, germ: FloatArray) -> FloatArray:
        """Coordinates (coupons, dimensions) of draws of the whole process, germ (coupons, variables)."""
        return self.of(germ[:, list(self.columns)])

    def of(self, germ: FloatArray) -> FloatArray:
        """Coordinates of germs of these variables alone, both (points, dimensions)."""
        result = np.empty(germ.shape, order="F")
        for position in range(self.dimensions):
            result[:, position] = self.of_one(position, germ[:, position])
        return result

    def of_one(self, position: int, germ: FloatArray) -> FloatArray:
        """Coordinate at `position` of germs of that variable, both (points,)."""
        return _coordinate(self.process.variables[self.columns[position]], germ, self.width)

    def training_germs(self, *, runs: int, chance: np.random.Generator) -> FloatArray:
        """Germs (runs, variables of the process) of training runs; variables that do not reach the line stay at 0.

        Even in the coordinates and of low discrepancy. Fewer runs are the first rows of more runs from a generator
        in the same state, so that a design grows by what it lacks.
        """
        points = 1 << max(runs - 1, 1).bit_length()
        uniforms = sobol_uniforms(self.dimensions, points, chance)[:runs]
        germ = np.zeros((runs, len(self.process.variables)))
        for position, column in enumerate(self.columns):
            law = self.process.variables[column].members[0][1]
            share = uniforms[:, position]
            if law.measured is not None:
                germ[:, column] = law.measured.spread_germs(share, reach=TRAINING_REACH)
            else:
                germ[:, column] = ndtri(share) if law.shape == "uniform" else TRAINING_REACH * (2.0 * share - 1.0)
        return germ


def _coordinate(variable: Variable, germ: FloatArray, width: float) -> FloatArray:
    """Coordinate (points,) of germs (points,), by the variable's first property."""
    each, law = variable.members[0]
    reference = width if each.property == ETCH else law.nominal
    reach = np.inf if law.shape == "uniform" else TRAINING_REACH
    if law.measured is not None:
        reach = TRAINING_REACH * law.measured.widest
    if law.shape == "lognormal":
        return germ / reach
    low, high = quantile(law, np.array([-reach, reach]), reference=reference)
    if not high > low:
        return germ / TRAINING_REACH
    value = quantile(law, germ, reference=reference)
    if _stays_positive(law, reference):
        floor = 0.5 * LOWEST_SHARE * law.nominal  # never met by a draw, see FARTHEST_GERM
        value, low, high = np.log(np.maximum(value, floor)), np.log(low), np.log(high)
    return np.asarray((2.0 * value - (low + high)) / (high - low), dtype=np.float64)


def _stays_positive(law: Law, reference: float) -> bool:
    farthest = quantile(law, np.array([-FARTHEST_GERM]), reference=reference)[0]
    return law.nominal > 0.0 and bool(farthest > LOWEST_SHARE * law.nominal)
