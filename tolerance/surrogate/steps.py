"""Process values a small step to both sides in each variable: from derivatives by dimensions to those by coordinates.

A solver tells how the impedance answers to each dimension of a section. How dimensions and coordinates answer to each
variable is told by small steps, without solving anything; what the impedance does along the coordinates follows.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.draws import ETCH
from tolerance.process.resin import Resin, through_resin
from tolerance.process.values import ProcessValues
from tolerance.surrogate.coordinates import SMALL_STEP

SMALLEST_SHARE = 1e-8  # of the strongest direction, below which variables do not move the coordinates


class OwnValues(ProcessValues, Protocol):
    """Process values that know a property's own law from what resin does to it."""

    def own(self, name: str) -> FloatArray:
        """Values [SI] of the property `name` by its own law alone, (points,)."""


@dataclass(frozen=True, slots=True)
class Stepped:
    """Values of `points` points, each a step up and then down in each variable: see ProcessValues.

    Every array has shape (2 * variables * points,), the points of one step beside each other.
    spans : by property name the place of the variable that moves it, and half the width of its box [SI].
    """

    values: OwnValues
    spans: Mapping[str, tuple[int, float]]
    variables: int
    resins: Mapping[str, Resin]

    def value(self, name: str) -> FloatArray:
        """Values [SI] of the property `name`."""
        return through_resin(name, self.own, self.resins)

    def own(self, name: str) -> FloatArray:
        """Values of the property by its own law alone."""
        return self._stepped(name, self.values.own(name))

    def etch(self, layer: str, *, width: float) -> FloatArray:
        """Finished foot width minus drawn width [m] of a line `width` [m] wide."""
        return self._stepped(f"{layer}.{ETCH}", self.values.etch(layer, width=width))

    def _stepped(self, name: str, values: FloatArray) -> FloatArray:
        steps = np.zeros((2, self.variables, 1))
        if name in self.spans:
            place, half = self.spans[name]
            steps[:, place, 0] = SMALL_STEP * half, -SMALL_STEP * half
        return np.asarray((values + steps).ravel(), dtype=np.float64)

    def by_variable(self, stepped: FloatArray) -> FloatArray:
        """Derivatives by each variable, in units of its box, (variables, points, ...), of what was stepped:
        (2 * variables * points, ...)."""
        up, down = stepped.reshape(2, self.variables, -1, *stepped.shape[1:])
        return np.asarray((up - down) / (2.0 * SMALL_STEP), dtype=np.float64)


def along_coordinates(by_variable: FloatArray, coordinates: FloatArray) -> FloatArray:
    """Derivatives of a value by the coordinates, (points, coordinates).

    by_variable : of the value by the variables, (variables, points).  coordinates : of the coordinates by the
    variables, (variables, points, coordinates).
    """
    inverse = np.linalg.pinv(coordinates.transpose(1, 0, 2), rcond=SMALLEST_SHARE)
    return np.asarray(np.einsum("pcv,vp->pc", inverse, by_variable), dtype=np.float64)
