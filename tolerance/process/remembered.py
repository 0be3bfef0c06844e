"""Draws that remember what the laws that were not changed came to, for many processes that differ in a law or two."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.draws import ETCH, Process, ProcessDraws
from tolerance.process.laws import Law, quantile

Key = tuple[int, int, float]  # column of the germ, identity of the law, and what its percentages are of


@dataclass(frozen=True, slots=True)
class RememberedDraws(ProcessDraws):
    """ProcessDraws with values (coupons,) [SI] that are known already."""

    known: Mapping[Key, FloatArray] = field(default_factory=dict)

    def _drawn(self, name: str) -> FloatArray:
        nominal = self.process.nominals[name]
        found = self._law(name)
        return np.full(self.coupons, nominal) if found is None else self._value(*found, nominal)

    def etch(self, layer: str, *, width: float) -> FloatArray:
        found = self._law(f"{layer}.{ETCH}")
        return np.zeros(self.coupons) if found is None else self._value(*found, width)

    def _value(self, column: int, law: Law, reference: float) -> FloatArray:
        known = self.known.get((column, id(law), reference))
        return quantile(law, self.germ[:, column], reference=reference) if known is None else known


def remember(process: Process, germ: FloatArray, *, width: float) -> dict[Key, FloatArray]:
    """What every law of the process comes to for germ (coupons, variables), etch for lines `width` [m] wide.

    Holds as long as the process does: laws are told apart by their identity.
    """
    known: dict[Key, FloatArray] = {}
    for column, variable in enumerate(process.variables):
        for member, law in variable.members:
            reference = width if member.property == ETCH else process.nominals[member.name]
            known[column, id(law), reference] = quantile(law, germ[:, column], reference=reference)
    return known
