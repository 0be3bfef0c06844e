"""The laws of varying properties: from a standard normal draw (a germ) to the value of the property.

Every shape is an inverse distribution applied to Phi(germ), with each tail computed from its own side, so that
draws five deviations out are as exact as those in the middle. All of them rise with the germ.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.special import erf, ndtr, ndtri

from tolerance.arrays import FloatArray
from tolerance.errors import InputError
from tolerance.process.measured import MeasuredLaw
from tolerance.scenario.amounts import Amount

Shape = Literal["normal", "truncated_normal", "uniform", "triangular", "lognormal", "measured"]

DEFAULT_SIGMAS = 3.0  # deviations that a half-width covers unless the scenario says otherwise
FARTHEST_CUT = 30.0  # deviations from the mean to the nearer end beyond which tail masses lose their digits


@dataclass(frozen=True, slots=True)
class Law:
    """How one property varies about its nominal; SI. What a field means: the scenario format, section Shapes.

    `tolerance` (half-width) and `shift` are amounts, absolute or a share of a reference; `low` and `high`, where
    given, stand instead of `tolerance`. Of `sigmas` and `cpk` at most one is given. A measured law has its readings
    and of the rest at most a shift.
    """

    shape: Shape
    nominal: float
    tolerance: Amount | None = None
    shift: Amount | None = None
    sigmas: float | None = None
    cpk: float | None = None
    low: float | None = None
    high: float | None = None
    measured: MeasuredLaw | None = None  # with the shape "measured", which takes its spread from readings

    def centre(self, *, reference: float) -> float:
        """Nominal + shift [SI]; percentages are of `reference`."""
        return self.nominal + _size(self.shift, reference)

    def half_width(self, *, reference: float) -> float:
        """The tolerance, or half the distance of the ends where those are given [SI]."""
        if self.low is not None and self.high is not None:
            return 0.5 * (self.high - self.low)
        return _size(self.tolerance, reference)

    def ends(self, *, reference: float) -> tuple[float, float]:
        """The ends of a bounded shape [SI]."""
        if self.low is not None and self.high is not None:
            return self.low, self.high
        centre, half = self.centre(reference=reference), self.half_width(reference=reference)
        return centre - half, centre + half

    def deviation(self, *, reference: float) -> float:
        """Standard deviation of the (uncut) normal [SI], or of the logarithm for a lognormal [-].

        Raises InputError where cpk leaves no room, or where a lognormal's nominal or median is not positive.
        """
        half = self.half_width(reference=reference)
        sigmas = DEFAULT_SIGMAS if self.sigmas is None else self.sigmas
        if self.shape == "lognormal":
            if self.nominal <= 0.0 or self.centre(reference=reference) <= 0.0:
                raise InputError("a lognormal law needs a nominal, and a nominal + shift, above 0")
            return float(np.log1p(half / self.nominal)) / sigmas
        if self.cpk is None:
            return half / sigmas
        room = half - abs(_size(self.shift, reference))
        if room <= 0.0:
            raise InputError("a law with cpk needs a shift smaller than its tolerance")
        return room / (3.0 * self.cpk)


def quantile(law: Law, germ: FloatArray, *, reference: float) -> FloatArray:
    """Values [SI] of the property at standard normal draws `germ` (any shape); result of the same shape.

    reference : what a percentage is of [SI]: the nominal, or for an etch the line's own width.
    Rises with the germ; -inf and inf give the ends of a bounded shape. Raises InputError as `Law.deviation` does.
    """
    if law.measured is not None:
        return law.measured.value(germ) + _size(law.shift, reference)
    centre = law.centre(reference=reference)
    if law.shape == "normal":
        return np.asarray(centre + law.deviation(reference=reference) * germ, dtype=np.float64)
    if law.shape == "lognormal":
        return np.asarray(centre * np.exp(law.deviation(reference=reference) * germ), dtype=np.float64)
    low, high = law.ends(reference=reference)
    if low == high:
        return np.full_like(germ, low)
    if law.shape == "uniform":
        return np.asarray(0.5 * (low + high) + 0.5 * (high - low) * erf(germ * np.sqrt(0.5)), dtype=np.float64)
    if law.shape == "triangular":
        if not low <= centre <= high:
            raise InputError("a triangular law needs its peak, nominal + shift, between its ends")
        return low + (high - low) * triangular(germ, peak=(centre - low) / (high - low))
    deviation = law.deviation(reference=reference)
    cut = cut_normal(germ, low=(low - centre) / deviation, high=(high - centre) / deviation)
    return np.asarray(np.clip(centre + deviation * cut, low, high), dtype=np.float64)  # only rounding can lie outside


def triangular(germ: FloatArray, *, peak: float) -> FloatArray:
    """Triangular quantile on [0, 1] with its peak at `peak`, an end included."""
    below, above = ndtr(germ), ndtr(-germ)
    return np.where(below <= peak, np.sqrt(below * peak), 1.0 - np.sqrt(above * (1.0 - peak)))


def cut_normal(germ: FloatArray, *, low: float, high: float) -> FloatArray:
    """Quantile of a standard normal cut at `low` and `high`; both tail masses are sums of positive terms."""
    if low > FARTHEST_CUT or high < -FARTHEST_CUT:
        raise InputError("a truncated normal law needs its mean, nominal + shift, nearer to its ends")
    mass = ndtr(-low) - ndtr(-high) if low > 0.0 else ndtr(high) - ndtr(low)
    below = ndtr(low) + ndtr(germ) * mass
    above = ndtr(-high) + ndtr(-germ) * mass
    lower_side = below <= above
    value = ndtri(np.where(lower_side, below, above))
    return np.where(lower_side, value, -value)


def _size(amount: Amount | None, reference: float) -> float:
    return 0.0 if amount is None else amount.of(reference)
