"""Impedances along one quantity that is changed: predicted at a few places, and between them coupon by coupon.

ln Z of every coupon is a polynomial through four or five places, so that a yield at any place between them costs
one product of matrices. At the places themselves nothing is interpolated.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from tolerance.arrays import BoolArray, FloatArray
from tolerance.decisions.board import LineModel, Side, sides_of
from tolerance.process.draws import Process

SMALLEST_IMPEDANCE = 1e-6  # [ohm] what stands for an impedance of a section that cannot exist


@dataclass(frozen=True, slots=True)
class Path:
    """One line along a quantity: places rising, logarithm (places, coupons) of the impedance in ohm there.

    possible : (places, coupons); None where all are possible everywhere.
    """

    line: LineModel
    places: FloatArray
    logarithm: FloatArray
    possible: BoolArray | None

    def at(self, place: float) -> FloatArray:
        """ln of the impedance in ohm (coupons,) at a place between the first and the last."""
        return np.asarray(lagrange_weights(self.places, place) @ self.logarithm, dtype=np.float64)

    def impedance(self, place: float) -> FloatArray:
        """The same in ohm."""
        return np.exp(self.at(place))

    def passes(self, place: float) -> BoolArray:
        """Which coupons pass there, without regard to the prediction's error."""
        logarithm, limits = self.at(place), self.line.limits
        inside = np.asarray((logarithm >= np.log(limits.low)) & (logarithm <= np.log(limits.high)), dtype=np.bool_)
        return inside if self.possible is None else inside & self._possible_at(self.possible, place)

    def sides(self, place: float) -> Side:
        """Verdicts at a place. Between two places only what is possible at both counts as possible."""
        if self.possible is None:
            return sides_of(self.impedance(place), None, self.line)
        return sides_of(self.impedance(place), self._possible_at(self.possible, place), self.line)

    def _possible_at(self, possible: BoolArray, place: float) -> BoolArray:
        around = {int(np.searchsorted(self.places, place, side="right")) - 1,
                  int(np.searchsorted(self.places, place, side="left"))}
        return np.asarray(np.all(possible[sorted(around)], axis=0), dtype=np.bool_)


def logarithm_of(line: LineModel, process: Process, germ: FloatArray) -> FloatArray:
    """ln of the impedance in ohm (coupons,)."""
    return np.log(np.maximum(line.impedance(process, germ), SMALLEST_IMPEDANCE))


def path_of(
    line: LineModel, germ: FloatArray, places: FloatArray, process_at: Callable[[float], Process], *,
    known: Mapping[float, FloatArray] = MappingProxyType({}),
) -> Path:
    """A line along a quantity whose process at a place is `process_at`; germ (coupons, variables).

    known : logarithms (coupons,) at places where they need not be predicted again.
    Sections lie between those of the two ends in every dimension, so that where both ends are possible all are.
    """
    processes = [process_at(float(place)) for place in places]
    logarithm = np.stack([known[float(place)] if float(place) in known else logarithm_of(line, process, germ)
                          for place, process in zip(places, processes, strict=True)])
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
