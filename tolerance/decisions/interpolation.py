"""Impedances along one quantity that is changed: solved at five places, and between them coupon by coupon.

ln Z of every coupon is a polynomial of degree 4 through five places, so that a yield at any place between them costs
one product of matrices. At the places themselves nothing is interpolated.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import BoolArray, FloatArray
from tolerance.decisions.board import LineModel, Side, sides_of
from tolerance.process.draws import Process

SMALLEST_IMPEDANCE = 1e-6  # [ohm] what stands for an impedance of a section that cannot exist


@dataclass(frozen=True, slots=True)
class Path:
    """One line along a quantity: places (5,) rising, logarithm (5, coupons) of the impedance in ohm there.

    possible : (5, coupons); None where all are possible everywhere.
    """

    line: LineModel
    places: FloatArray
    logarithm: FloatArray
    possible: BoolArray | None

    def impedance(self, place: float) -> FloatArray:
        """Impedances [ohm] (coupons,) at a place between the first and the last."""
        return np.exp(lagrange_weights(self.places, place) @ self.logarithm)

    def sides(self, place: float) -> Side:
        """Verdicts at a place. Between two places only what is possible at both counts as possible."""
        if self.possible is None:
            return sides_of(self.impedance(place), None, self.line)
        around = {int(np.searchsorted(self.places, place, side="right")) - 1,
                  int(np.searchsorted(self.places, place, side="left"))}
        return sides_of(self.impedance(place), np.all(self.possible[sorted(around)], axis=0), self.line)

    def rows(self, index: slice) -> Path:
        """The same of fewer coupons."""
        possible = None if self.possible is None else self.possible[:, index]
        return Path(self.line, self.places, np.ascontiguousarray(self.logarithm[:, index]), possible)


def path_of(line: LineModel, germ: FloatArray, places: FloatArray, process_at: Callable[[float], Process]) -> Path:
    """A line along a quantity whose process at a place is `process_at`; germ (coupons, variables).

    Sections lie between those of the two ends in every dimension, so that where both ends are possible all are.
    """
    processes = [process_at(float(place)) for place in places]
    logarithm = np.stack([np.log(np.maximum(line.impedance(process, germ), SMALLEST_IMPEDANCE))
                          for process in processes])
    ends = [line.possible(processes[0], germ), line.possible(processes[-1], germ)]
    if all(bool(np.all(end)) for end in ends):
        return Path(line, places, logarithm, None)
    inner = [line.possible(process, germ) for process in processes[1:-1]]
    return Path(line, places, logarithm, np.stack([ends[0], *inner, ends[1]]))


def lagrange_weights(places: FloatArray, at: float) -> FloatArray:
    """Weights (places,) by which values at `places` make that of the polynomial through them at `at`."""
    difference = places[:, np.newaxis] - places
    np.fill_diagonal(difference, 1.0)
    steps = np.broadcast_to(at - places, difference.shape).copy()
    np.fill_diagonal(steps, 1.0)
    return np.asarray(np.prod(steps / difference, axis=1), dtype=np.float64)
