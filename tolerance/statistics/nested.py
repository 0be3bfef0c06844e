"""Nested analysis of variance: how much of the spread of readings arises between lots, between the panels of a lot, and
between the coupons of a panel. Balanced or not.

Source: S. R. Searle, G. Casella and C. E. McCulloch, "Variance Components", Wiley 1992, chapter 5; the same as
R. R. Sokal and F. J. Rohlf, "Biometry", box 10.2 (both from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from tolerance.arrays import FloatArray, IntArray


@dataclass(frozen=True, slots=True)
class Component:
    """One level: degrees of freedom, mean square, and the estimated variance, which chance may make negative."""

    level: str
    groups: int
    degrees: int
    mean_square: float
    variance: float


def variance_components(values: FloatArray, levels: Sequence[tuple[str, Sequence[object]]]) -> tuple[Component, ...]:
    """Components of readings (readings,) from the outermost level to the readings themselves, called "coupon".

    levels : at most two, outermost first, each a name and a label for every reading; inner labels count within outer
    ones. A level of a single group, or of as many groups as readings, says nothing and is left out.
    """
    kept: list[tuple[str, IntArray]] = []
    above: list[tuple[object, ...]] = [() for _ in values]
    for name, labels in levels:
        joined = [(*outer, label) for outer, label in zip(above, labels, strict=True)]
        groups = _numbered(joined)
        above = joined
        known = kept[-1][1].max() + 1 if kept else 1
        if known < groups.max() + 1 < len(values):
            kept.append((name, groups))
    return _components(values, kept)


def shares(components: Sequence[Component]) -> dict[str, float]:
    """Share of each level in the total variance, negative estimates taken as none; empty where nothing varies."""
    positive = {one.level: max(one.variance, 0.0) for one in components}
    total = sum(positive.values())
    return {name: value / total for name, value in positive.items()} if total > 0.0 else {}


def _numbered(labels: Sequence[tuple[object, ...]]) -> IntArray:
    places = {label: place for place, label in enumerate(dict.fromkeys(labels))}
    return np.array([places[label] for label in labels], dtype=np.int64)


def _components(values: FloatArray, levels: list[tuple[str, IntArray]]) -> tuple[Component, ...]:
    """Mean squares of each level in the groups of the level above, and what their expectations make of them.

    The expectation of the mean square of a level is the variance within, plus the variance of each deeper level and of
    its own, each times a mean group size; `_size` is that.
    """
    whole = np.zeros(len(values), dtype=np.int64)
    chain = [whole, *(groups for _, groups in levels), np.arange(len(values))]
    names = [*(name for name, _ in levels), "coupon"]
    squares: list[tuple[int, float]] = []
    for outer, inner in pairwise(chain):
        degrees = int(inner.max() - outer.max())
        squares.append((degrees, float(np.sum((_means(values, inner) - _means(values, outer)) ** 2)) / degrees))
    variances = [0.0] * len(names)
    for level in range(len(names) - 1, -1, -1):
        degrees, mean_square = squares[level]
        deeper = sum(_size(chain[level], chain[level + 1], chain[other + 1], degrees) * variances[other]
                     for other in range(level + 1, len(names)))
        variances[level] = (mean_square - deeper) / _size(chain[level], chain[level + 1], chain[level + 1], degrees)
    return tuple(
        Component(name, int(chain[level + 1].max()) + 1, *squares[level], variances[level])
        for level, name in enumerate(names)
    )


def _means(values: FloatArray, groups: IntArray) -> FloatArray:
    counts = np.bincount(groups)
    return np.asarray((np.bincount(groups, weights=values) / counts)[groups], dtype=np.float64)


def _size(outer: IntArray, inner: IntArray, source: IntArray, degrees: int) -> float:
    """What the variance of the groups `source` counts in the mean square of `inner` groups within `outer` ones."""
    counts = np.bincount(source).astype(np.float64)
    first = np.array([np.flatnonzero(source == group)[0] for group in range(len(counts))])

    def sum_over(groups: IntArray) -> float:
        totals = np.bincount(groups).astype(np.float64)
        return float(np.sum(counts**2 / totals[groups[first]]))

    return (sum_over(inner) - sum_over(outer)) / degrees
