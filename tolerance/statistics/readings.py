"""Readings of measured coupons: means of lines, and how far those means may be off by scatter and by reading."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, IntArray


@dataclass(frozen=True, slots=True)
class Readings:
    """Readings one after another. line : (readings,) its number.  value : (readings,) [ohm].

    unit : (readings,) number of what was measured together (a coupon, a panel, a lot), whose lines scatter together.
    """

    line: IntArray
    value: FloatArray
    unit: IntArray

    def of(self, rows: FloatArray | IntArray) -> Readings:
        return Readings(self.line[rows], self.value[rows], self.unit[rows])


@dataclass(frozen=True, slots=True)
class LineMeans:
    """Means of the lines that were read. lines : their numbers.  mean, count : (lines,).  units : how many there are.

    scatter : variance of one unit against the next, as a share of that of the whole given process.
    covariance : (lines, lines) of the means [ohm^2], by scatter and reading.
    """

    lines: IntArray
    mean: FloatArray
    count: IntArray
    units: int
    scatter: float
    covariance: FloatArray


def line_means(readings: Readings, *, spread: FloatArray, repeatability: float) -> LineMeans:
    """Means with their covariance; spread : covariance [ohm^2] (all lines, all lines) of single coupons of the process.

    The scatter of the units is taken from the readings, and counts as the whole given spread with the weight of one
    unit, so that few units do not seem to scatter little by chance.
    """
    lines = np.unique(readings.line)
    units = np.unique(readings.unit)
    sums, counts = np.zeros((2, len(lines), len(units)))
    place = (np.searchsorted(lines, readings.line), np.searchsorted(units, readings.unit))
    np.add.at(sums, place, readings.value)
    np.add.at(counts, place, 1.0)
    total = counts.sum(axis=1)
    mean = sums.sum(axis=1) / total
    own = spread[np.ix_(lines, lines)]
    scatter = _scatter(sums, counts, np.diag(own), repeatability)
    together = (counts / total[:, np.newaxis]) @ (counts / total[:, np.newaxis]).T
    covariance = scatter * own * together + np.diag(repeatability**2 / total)
    return LineMeans(lines, mean, total.astype(np.int64), len(units), scatter, covariance)


def _scatter(sums: FloatArray, counts: FloatArray, variance: FloatArray, repeatability: float) -> float:
    """Share of the given variance that units show among themselves, with the given one as one unit more."""
    excess = given = 0.0
    for line in range(len(sums)):
        there = counts[line] > 0
        if np.count_nonzero(there) > 1:
            freedom = np.count_nonzero(there) - 1
            means = sums[line, there] / counts[line, there]
            noise = repeatability**2 * float(np.mean(1.0 / counts[line, there]))
            excess += freedom * (float(np.var(means, ddof=1)) - noise)
            given += freedom * float(variance[line])
    units = int(np.max(np.count_nonzero(counts > 0, axis=1), initial=1))
    seen = max(excess / given, 0.0) if given > 0.0 else 1.0
    return (1.0 + (units - 1) * seen) / units


def numbered(names: Sequence[object]) -> IntArray:
    """A number for each different name, in the order in which they come."""
    known = {name: number for number, name in enumerate(dict.fromkeys(names))}
    return np.array([known[name] for name in names], dtype=np.int64)
