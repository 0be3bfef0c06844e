"""An estimate with its interval, and how replicates of a randomised design make one.

Points of one scrambled Sobol' design are not independent, so neither a binomial interval nor a bootstrap over them
holds; independent scrambles of the design are. The spread of their estimates gives the interval by Student's t.
Source: A. B. Owen, "Monte Carlo variance of scrambled net quadrature", SIAM Journal on Numerical Analysis,
volume 34, pages 1884-1910, 1997; the practice of replicates as in P. L'Ecuyer and C. Lemieux, "Recent advances in
randomized quasi-Monte Carlo methods", in Modeling Uncertainty, 2002.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import stdtrit

from tolerance.arrays import FloatArray

CONFIDENCE = 0.95  # of every interval


@dataclass(frozen=True, slots=True)
class Interval:
    """An estimate with the ends of its two-sided 95 % interval."""

    value: float
    low: float
    high: float

    def widened(self, below: float, above: float) -> Interval:
        """The same estimate with its ends moved out by `below` and `above`, both at least 0."""
        return Interval(self.value, float(self.low - below), float(self.high + above))

    def at_most(self, bound: float) -> Interval:
        """The same interval, its estimate not above a bound that is known better."""
        return Interval(min(self.value, bound), min(self.low, bound), self.high)

    def within(self, lowest: float, highest: float) -> Interval:
        """The same estimate with its ends inside what is possible; the estimate itself is never moved."""
        return Interval(self.value, max(self.low, lowest), min(self.high, highest))


@dataclass(frozen=True, slots=True)
class Driver:
    """What one varying property does to one line's impedance: shares of its variance.

    `first` is what the variable explains alone, `total` what would remain were all others known;
    `shapley` stands only where inputs are correlated, and then ranks.
    """

    variable: str
    first: Interval
    total: Interval
    shapley: Interval | None = None


def half_interval(estimates: FloatArray) -> FloatArray:
    """Half the 95 % interval of the mean of `estimates` (replicates, ...); result (...). Needs two replicates."""
    replicates = estimates.shape[0]
    student = stdtrit(replicates - 1, 0.5 + 0.5 * CONFIDENCE)
    spread = np.std(estimates, axis=0, ddof=1)
    return np.asarray(student * spread / np.sqrt(replicates), dtype=np.float64)


def interval_of(estimates: FloatArray, *, value: float | None = None) -> Interval:
    """Interval from one estimate a replicate, shape (replicates,); about their mean, or about `value`."""
    centre = float(np.mean(estimates)) if value is None else value
    half = float(half_interval(estimates))
    return Interval(centre, centre - half, centre + half)
