"""Draws that remember what is laborious in them, for many processes that differ in a law or two.

A value of a law with ends is a start plus a width times what its shape makes of the germ. That is worked out once for
each column of the germ and each shape: a tolerance that is scaled, or a centre that is moved, keeps it.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from scipy.special import erf

from tolerance.arrays import FloatArray
from tolerance.process.draws import ETCH, Process, ProcessDraws
from tolerance.process.laws import Law, cut_normal, quantile, triangular

DIGITS = 12  # to which a shape is told apart: then the order of the questions changes nothing
FEWEST = 4096  # coupons for which it is worth it

Shape = tuple[str, float, float]


@dataclass(frozen=True, slots=True)
class Remembered:
    """Germs (coupons, variables), and what shapes make of their columns, each (coupons,)."""

    germ: FloatArray
    _known: dict[tuple[int, Shape], FloatArray] = field(default_factory=dict)

    def draws(self, process: Process, rows: slice) -> RememberedDraws:
        """The coupons at `rows` as draws of a process."""
        return RememberedDraws(process, self.germ[rows], remembered=self, kept=rows)

    def values(self, column: int, law: Law, *, reference: float, rows: slice) -> FloatArray:
        """As `quantile` gives them for the germ of these rows."""
        found = _standard(law, reference) if len(self.germ) >= FEWEST else None
        if found is None:
            return quantile(law, self.germ[rows, column], reference=reference)
        shape, start, width, made = found
        key = column, shape
        if key not in self._known:
            self._known[key] = made(self.germ[:, column])
        return start + width * self._known[key][rows]


@dataclass(frozen=True, slots=True)
class RememberedDraws(ProcessDraws):
    """ProcessDraws of the coupons at the rows `kept` of what is remembered."""

    remembered: Remembered | None = None
    kept: slice = field(default_factory=lambda: slice(None))

    def own(self, name: str) -> FloatArray:
        nominal = self.process.nominals[name]
        found = self._law(name)
        return np.full(self.coupons, nominal) if found is None else self._value(*found, nominal)

    def etch(self, layer: str, *, width: float) -> FloatArray:
        found = self._law(f"{layer}.{ETCH}")
        return np.zeros(self.coupons) if found is None else self._value(*found, width)

    def _value(self, column: int, law: Law, reference: float) -> FloatArray:
        assert self.remembered is not None
        return self.remembered.values(column, law, reference=reference, rows=self.kept)


def _standard(law: Law, reference: float) -> tuple[Shape, float, float, Callable[[FloatArray], FloatArray]] | None:
    """What a law's shape makes of germs, under what name, and the start and the width that make it values [SI].

    None where there is nothing to remember, or where `quantile` is to say what is wrong with the law.
    """
    if law.shape not in ("uniform", "triangular", "truncated_normal"):
        return None
    low, high = law.ends(reference=reference)
    centre = law.centre(reference=reference)
    if not low < high:
        return None
    if law.shape == "uniform":
        return ("uniform", 0.0, 0.0), 0.5 * (low + high), 0.5 * (high - low), lambda germ: erf(germ * np.sqrt(0.5))
    if law.shape == "triangular":
        if not low <= centre <= high:
            return None
        peak = round((centre - low) / (high - low), DIGITS)
        return ("triangular", peak, 0.0), low, high - low, lambda germ: triangular(germ, peak=peak)
    deviation = law.deviation(reference=reference)
    cuts = round((low - centre) / deviation, DIGITS), round((high - centre) / deviation, DIGITS)

    def cut(germ: FloatArray) -> FloatArray:
        return np.clip(cut_normal(germ, low=cuts[0], high=cuts[1]), *cuts)

    return ("truncated_normal", *cuts), centre, deviation, cut
