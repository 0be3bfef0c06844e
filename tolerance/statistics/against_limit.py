"""Yield as a function of the limit: what share of the coupons would pass were the limits wider or closer.

One and the same sample serves every limit, so the curve never falls; its intervals are those of the yields
(replicates, exact binomial ends for rare counts, room for the error of the prediction).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, IntArray, read_only
from tolerance.statistics.estimates import Interval, half_interval
from tolerance.statistics.yields import RARE, binomial_interval, crowding_of_rare

STEPS = 40  # of a grid of limits, at least
BEYOND = 2.0  # how far a grid goes, over the widest limit


@dataclass(frozen=True, slots=True)
class YieldByLimit:
    """Share of coupons that pass, for each half-width of the limits (a share of the target); arrays (limits,).

    needed : the half-width at which just the target yield passes; None where impossible coupons forbid it.
    """

    limit: FloatArray
    value: FloatArray
    low: FloatArray  # ends of the two-sided 95 % interval
    high: FloatArray
    needed: Interval | None


@dataclass(frozen=True, slots=True)
class LimitSample:
    """The coupons of all lines: impedance [ohm] and possible (lines, coupons), target and error [ohm] (lines,)."""

    impedance: FloatArray
    possible: BoolArray
    target: FloatArray
    error: FloatArray
    replicates: int
    cluster: int = 1  # coupons of a lot where coupons were drawn as lots


def limit_grid(widest: float) -> FloatArray:
    """Half-widths from nought to at least twice the widest limit, in round steps (1, 2 or 5 times a power of ten)."""
    reach = BEYOND * widest
    power = 10.0 ** np.floor(np.log10(reach / STEPS))
    step = max(power * factor for factor in (1.0, 2.0, 5.0) if power * factor <= reach / STEPS * (1.0 + 1e-9))
    return np.asarray(step * np.arange(np.ceil(reach / step - 1e-9) + 1.0), dtype=np.float64)


def yields_by_limit(
    sample: LimitSample, limits: FloatArray, *, target_yield: float,
) -> tuple[tuple[YieldByLimit, ...], YieldByLimit]:
    """Of each line, and of all lines together were all held to the same limit. limits : (limits,), rising."""
    lines, together = [], [np.zeros(sample.impedance.shape[1]) for _ in range(3)]
    for impedance, possible, target, error in zip(
        sample.impedance, sample.possible, sample.target, sample.error, strict=True,
    ):
        off = np.where(possible, np.abs(impedance / target - 1.0), np.inf)
        views = (off, off + error / target, off - error / target)  # as it is; all doubt against; in favour
        lines.append(_curve(views, limits, sample, target_yield))
        for worst, view in zip(together, views, strict=True):
            np.maximum(worst, view, out=worst)
    return tuple(lines), _curve(together, limits, sample, target_yield)


def _curve(
    views: Sequence[FloatArray], limits: FloatArray, sample: LimitSample, target_yield: float
) -> YieldByLimit:
    """The curve of coupons that lie `views` [share of the target] off it, three times (coupons,)."""
    replicates = sample.replicates
    each, surely, perhaps = (_passing(off, limits, replicates) for off in views)
    coupons, counts = views[0].size, each.sum(axis=0)
    value = counts / coupons
    half = half_interval(each / (coupons // replicates))
    low, high = value - half, value + half
    for place in np.flatnonzero(np.minimum(counts, coupons - counts) < RARE * sample.cluster):
        crowding = crowding_of_rare(views[0] <= limits[place], sample.cluster)
        if crowding is not None:
            rare = binomial_interval(counts[place] / crowding, coupons / crowding)
            low[place], high[place] = rare.low, rare.high
    low -= (counts - surely.sum(axis=0)) / coupons
    high += (perhaps.sum(axis=0) - counts) / coupons
    return YieldByLimit(read_only(limits), read_only(value), read_only(np.maximum(low, 0.0)),
                        read_only(np.minimum(high, 1.0)), _needed(views, replicates, target_yield))


def _needed(views: Sequence[FloatArray], replicates: int, target_yield: float) -> Interval | None:
    """The limit that lets just the target yield pass: a quantile of how far coupons lie off their target."""
    value, worst, best = (_quantile(off, target_yield) for off in views)
    each = np.array([_quantile(block, target_yield) for block in views[0].reshape(replicates, -1)])
    if not (np.isfinite(each).all() and np.isfinite(value)):
        return None
    half = float(half_interval(each))
    return Interval(value, value - half, value + half).widened(value - best, worst - value).within(0.0, np.inf)


def _quantile(values: FloatArray, share: float) -> float:
    """The smallest value at or under which this share of `values` lies."""
    place = min(max(int(np.ceil(share * values.size - 1e-9)) - 1, 0), values.size - 1)
    return float(np.partition(values, place)[place])


def _passing(off: FloatArray, limits: FloatArray, replicates: int) -> IntArray:
    """How many coupons of each replicate lie within each limit, (replicates, limits)."""
    first = np.searchsorted(limits, off, side="left").reshape(replicates, -1)  # the closest limit that lets it pass
    counts = np.stack([np.bincount(block, minlength=limits.size + 1) for block in first])
    return np.cumsum(counts, axis=1)[:, :-1].astype(np.int64)
