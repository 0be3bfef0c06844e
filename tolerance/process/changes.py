"""Process values as they would be were one variable's mean or spread another: the same draws, moved.

Works for every shape: values are stretched about the mean of their law and shifted by a share of its deviation; a
lognormal is stretched in its logarithm.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from tolerance.arrays import FloatArray
from tolerance.process.draws import ETCH, Process, ProcessDraws
from tolerance.process.laws import Law, quantile
from tolerance.process.resin import through_resin

QUANTILES = 4096  # of a law, for its mean and deviation


@dataclass(frozen=True, slots=True)
class Moments:
    """Mean and standard deviation [SI] of one property; logarithmic: of a lognormal, whose centre is its median."""

    centre: float
    deviation: float
    logarithmic: bool


@dataclass(frozen=True, slots=True)
class Change:
    """Stretch and shift [deviations] of the properties in `moments`, by name."""

    moments: Mapping[str, Moments]
    stretch: float = 1.0
    shift: float = 0.0

    def of(self, name: str, values: FloatArray) -> FloatArray:
        """Changed values of the property `name`; the values themselves where it is not among those changed."""
        moments = self.moments.get(name)
        if moments is None:
            return values
        if moments.logarithmic:
            stretched = moments.centre * (values / moments.centre) ** self.stretch
        else:
            stretched = moments.centre + self.stretch * (values - moments.centre)
        return np.asarray(stretched + self.shift * moments.deviation, dtype=np.float64)


@dataclass(frozen=True, slots=True)
class ChangedValues:
    """Draws of the process with one variable changed: see ProcessValues."""

    draws: ProcessDraws
    change: Change

    def value(self, name: str) -> FloatArray:
        """Values [SI] of the property `name`."""
        return through_resin(name, lambda own: self.change.of(own, self.draws.own(own)), self.draws.process.resins)

    def etch(self, layer: str, *, width: float) -> FloatArray:
        """Finished foot width minus drawn width [m] of a line `width` [m] wide on `layer`."""
        return self.change.of(f"{layer}.{ETCH}", self.draws.etch(layer, width=width))


def moments_of(process: Process, column: int, *, width: float) -> dict[str, Moments]:
    """Moments of all that the variable at `column` moves, by property name; width: the drawn width of the line [m]."""
    return {member.name: _moments(law, width if member.property == ETCH else law.nominal)
            for member, law in process.variables[column].members}


def _moments(law: Law, reference: float) -> Moments:
    germ = ndtri((np.arange(QUANTILES) + 0.5) / QUANTILES)
    values = quantile(law, germ, reference=reference)
    logarithmic = law.shape == "lognormal"
    centre = float(np.exp(np.mean(np.log(values))) if logarithmic else np.mean(values))
    return Moments(centre, float(np.std(values)), logarithmic)
