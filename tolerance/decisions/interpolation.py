"""Impedances along one quantity that is changed: predicted at a few places, and between them coupon by coupon.

ln Z of every coupon is a polynomial through four or five places, so that a yield at any place between them costs
one product of matrices. At the places themselves nothing is interpolated, nor are coupons whose section cannot exist
somewhere along the way: those are predicted wherever they are asked about.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, IntArray
from tolerance.decisions.board import LineModel, Side, sides_of
from tolerance.process.draws import Process

SMALLEST_IMPEDANCE = 1e-6  # [ohm] what stands for an impedance of a section that cannot exist


@dataclass(frozen=True, slots=True)
class Path:
    """One line along a quantity: places rising, logarithm (places, coupons) of the impedance in ohm there.

    process_at : the process at a place.  in_doubt : rows of the coupons that cannot exist at one of the places, and
    germ_in_doubt, theirs (rows, variables); all others can exist everywhere.
    """

    line: LineModel
    places: FloatArray
    logarithm: FloatArray
    process_at: Callable[[float], Process]
    in_doubt: IntArray
    germ_in_doubt: FloatArray

    def at(self, place: float) -> FloatArray:
        """ln of the impedance in ohm (coupons,) at a place between the first and the last."""
        found = np.asarray(lagrange_weights(self.places, place) @ self.logarithm, dtype=np.float64)
        if self.in_doubt.size and place not in self.places:
            found[self.in_doubt] = logarithm_of(self.line.answers(self.process_at(place), self.germ_in_doubt)[0])
        return found

    def impedance(self, place: float) -> FloatArray:
        """The same in ohm."""
        return np.exp(self.at(place))

    def passes(self, place: float) -> BoolArray:
        """Which coupons pass there, without regard to the prediction's error."""
        logarithm, limits = self.at(place), self.line.limits
        inside = np.asarray((logarithm >= np.log(limits.low)) & (logarithm <= np.log(limits.high)), dtype=np.bool_)
        possible = self.possible(place)
        return inside if possible is None else inside & possible

    def sides(self, place: float) -> Side:
        """Verdicts at a place."""
        return sides_of(self.impedance(place), self.possible(place), self.line)

    def possible(self, place: float) -> BoolArray | None:
        """Which sections can exist there (coupons,); None: all."""
        if not self.in_doubt.size:
            return None
        possible = np.ones(self.logarithm.shape[1], dtype=np.bool_)
        possible[self.in_doubt] = self.line.answers(self.process_at(place), self.germ_in_doubt)[1]
        return possible


def logarithm_of(impedance: FloatArray) -> FloatArray:
    """ln of impedances in ohm (coupons,), where nought stands for a section that cannot exist."""
    return np.asarray(np.log(np.maximum(impedance, SMALLEST_IMPEDANCE)), dtype=np.float64)


def path_of(
    line: LineModel, germ: FloatArray, places: FloatArray, process_at: Callable[[float], Process], *,
    known: Mapping[float, FloatArray] = MappingProxyType({}),
) -> Path:
    """A line along a quantity whose process at a place is `process_at`; germ (coupons, variables).

    known : logarithms (coupons,) at places other than the ends, where they need not be predicted again.
    Sections lie between those of the two ends in every dimension, so that what can exist at both can exist between.
    """
    logarithm = np.empty((places.size, len(germ)))
    everywhere = np.ones(len(germ), dtype=np.bool_)
    for number, place in enumerate(places.tolist()):
        if place in known:
            logarithm[number] = known[place]
            continue
        impedance, possible = line.answers(process_at(place), germ)
        logarithm[number] = logarithm_of(impedance)
        everywhere &= possible
    in_doubt = np.flatnonzero(~everywhere)
    return Path(line, places, logarithm, process_at, in_doubt, germ[in_doubt])


def lagrange_weights(places: FloatArray, at: float) -> FloatArray:
    """Weights (places,) by which values at `places` make that of the polynomial through them at `at`."""
    difference = places[:, np.newaxis] - places
    np.fill_diagonal(difference, 1.0)
    steps = np.broadcast_to(at - places, difference.shape).copy()
    np.fill_diagonal(steps, 1.0)
    return np.asarray(np.prod(steps / difference, axis=1), dtype=np.float64)
