"""Values of the process, as the sections ask for them: of draws, or here of the nominals alone."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.scenario.properties import properties
from tolerance.scenario.tables import COPPER, Scenario


class ProcessValues(Protocol):
    """What sections are built from; every array has shape (coupons,)."""

    def value(self, name: str) -> FloatArray:
        """Values [SI] of the property `name` ("P1.thickness"). KeyError where there is none."""

    def etch(self, layer: str, *, width: float) -> FloatArray:
        """Finished foot width minus drawn width [m] of a line `width` [m] wide on `layer`."""


@dataclass(frozen=True, slots=True)
class NominalValues:
    """One coupon with every property at its nominal (not at its mean: shifts do not count)."""

    nominals: Mapping[str, float]

    def value(self, name: str) -> FloatArray:
        """See ProcessValues."""
        return self.own(name)

    def own(self, name: str) -> FloatArray:
        """The nominal, which is also what resin makes of it."""
        return np.array([self.nominals[name]])

    def etch(self, layer: str, *, width: float) -> FloatArray:  # noqa: ARG002  the nominal etch of any line is nought
        """See ProcessValues."""
        return np.zeros(1)


def nominals_of(scenario: Scenario) -> Mapping[str, float]:
    """Nominals [SI] by property name; of copper also a plating of 0 and an infinite etch factor."""
    nominals = {each.name: each.nominal for each in properties(scenario)}
    for layer in scenario.layers:
        if layer.kind == COPPER:
            nominals |= {f"{layer.name}.plating": layer.plating, f"{layer.name}.etch_factor": layer.etch_factor}
    return nominals
