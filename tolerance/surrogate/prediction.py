"""The impedance of one line, predicted: ln Z as a polynomial of its coordinates, with its errors in ohm."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.errors import UnfinishedError
from tolerance.surrogate.coordinates import Coordinates
from tolerance.surrogate.polynomial import Polynomial, fit

HELD_OUT_RUNS = 32  # coupons solved for the check alone, never used in a fit
LARGEST_ERROR = 0.01  # [ohm] leave-one-out error above which the degree is raised
LIMIT_SHARE = 0.002  # of the distance from target to limit, where that asks for less


@dataclass(frozen=True, slots=True)
class Predictor:
    """Predicts one line's impedance from germs. `level` [ohm]: the geometric mean of the training impedances."""

    coordinates: Coordinates
    polynomial: Polynomial
    level: float

    @property
    def leave_one_out_error(self) -> float:
        """Root mean square error [ohm] over the box of the training runs, which is wider than the draws."""
        return self.polynomial.leave_one_out * self.level

    def impedance(self, germ: FloatArray) -> FloatArray:
        """Impedances [ohm] (coupons,) of draws of the whole process, germ (coupons, variables)."""
        return self.impedance_at(self.coordinates.of_draws(germ))

    def impedance_at(self, coordinates: FloatArray) -> FloatArray:
        """Impedances [ohm] (points,) at coordinates (points, dimensions)."""
        return np.exp(self.polynomial.evaluate(coordinates))

    def held_out_errors(self, germ: FloatArray, impedance: FloatArray) -> tuple[float, float]:
        """Root mean square and largest error [ohm] at solved coupons that the fit has not seen.

        germ (coupons, variables); impedance (coupons,) [ohm], as solved.
        """
        error = np.abs(self.impedance(germ) - impedance)
        return float(np.sqrt(np.mean(error**2))), float(np.max(error))


def fit_predictor(
    coordinates: Coordinates, germ: FloatArray, impedance: FloatArray, *, degree: int
) -> Predictor:
    """Predictor of `degree` from training runs: germ (runs, variables), impedance (runs,) [ohm].

    Raises UnfinishedError where an impedance is not a finite positive number, or as `polynomial.fit` does.
    """
    if not np.all(np.isfinite(impedance) & (impedance > 0.0)):
        raise UnfinishedError("a training run gave an impedance that is not a positive number")
    logarithm = np.log(impedance)
    polynomial = fit(coordinates.of_draws(germ), logarithm, degree=degree)
    return Predictor(coordinates, polynomial, float(np.exp(np.mean(logarithm))))


def largest_error_wanted(*, target: float, limit: float) -> float:
    """The leave-one-out error [ohm] to stay under: 0.01 ohm, or less for tight limits.

    target [ohm]; limit: half-width of the limits as a share of the target.
    """
    return min(LARGEST_ERROR, LIMIT_SHARE * target * limit)
