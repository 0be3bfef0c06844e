"""Resin content as the shared cause of a ply's thickness and Dk, draw by draw.

Beside a thickness or Dk of its own, a layer of glass and resin has a resin content; what that does is a factor on
both, 1 at the nominals. So a pressed thickness that is given stays the nominal one, and a variation of its own stands
beside that of the resin content.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.scenario.mixtures import Mixture, mixtures_of
from tolerance.scenario.tables import Scenario

RESIN_MAKES = ("thickness", "dk")
_COPPER_ITEMS = ("foil", "plating")


@dataclass(frozen=True, slots=True)
class Resin:
    """A layer of glass and resin with what it comes to at the nominals: `thickness` [m] and `dk`."""

    mixture: Mixture
    thickness: float
    dk: float

    @property
    def causes(self) -> tuple[str, ...]:
        """The properties that move thickness and Dk through the resin."""
        copper = (f"{name}.{item}" for name, _ in self.mixture.etched for item in _COPPER_ITEMS)
        return (f"{self.mixture.layer}.resin_content", *copper)

    def applied(self, item: str, own: FloatArray, drawn: Callable[[str], FloatArray]) -> FloatArray:
        """The layer's thickness [m] or Dk, (coupons,): its `own` draw times what the resin does to the nominal.

        A thickness is -inf where there is no such ply.  drawn : own draws [SI] of any property, (coupons,).
        """
        thickness, dk = self._values(drawn)
        if item == "dk":
            return own * (dk / self.dk)
        there = thickness > 0.0
        return np.where(there, own * (np.where(there, thickness, 0.0) / self.thickness), -np.inf)

    def _values(self, drawn: Callable[[str], FloatArray]) -> tuple[FloatArray, FloatArray]:
        content = drawn(f"{self.mixture.layer}.resin_content")
        filled = np.zeros_like(content)
        for name, share in self.mixture.etched:
            filled = filled + share * np.maximum(sum(drawn(f"{name}.{item}") for item in _COPPER_ITEMS), 0.0)
        return self.mixture.thickness_and_dk(resin_content=content, filled=filled)


def resins_of(scenario: Scenario, nominals: Mapping[str, float]) -> Mapping[str, Resin]:
    """The layers of glass and resin of a checked scenario, by name. nominals : by property name [SI]."""
    found = {}
    for mixture in mixtures_of(scenario):
        thickness, dk = Resin(mixture, 1.0, 1.0)._values(lambda name: np.array([nominals[name]]))
        found[mixture.layer] = Resin(mixture, float(thickness[0]), float(dk[0]))
    return found


def through_resin(name: str, drawn: Callable[[str], FloatArray], resins: Mapping[str, Resin]) -> FloatArray:
    """Values [SI] (coupons,) of a property from own draws of any, `drawn`: with what the resin of its layer does."""
    layer, _, item = name.rpartition(".")
    resin = resins.get(layer) if item in RESIN_MAKES else None
    return drawn(name) if resin is None else resin.applied(item, drawn(name), drawn)


def with_causes(names: Collection[str], resins: Mapping[str, Resin]) -> frozenset[str]:
    """The names, and with a ply's thickness or Dk all that moves it through the resin."""
    more = (cause for layer, resin in resins.items() for item in RESIN_MAKES if f"{layer}.{item}" in names
            for cause in resin.causes)
    return frozenset(names).union(more)
