"""Yield, below, above, mean, deviation and capability of impedances against their limits, each with its interval.

Intervals come from the replicates of the sample. Two things make them wider: counts so small that the spread of the
replicates says little, where the exact binomial interval stands instead (scrambled Sobol' points scatter no more
than independent ones); and the error of the predicted impedances, where it is given.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import betaincinv

from tolerance.arrays import BoolArray, FloatArray, IntArray
from tolerance.errors import UnfinishedError
from tolerance.statistics.estimates import CONFIDENCE, Interval, half_interval

RARE = 20  # coupons, or lots with such coupons: with fewer on one side the binomial interval stands
STILL = 1e-12  # relative range of impedances below which nothing moves them
FEWEST_POSSIBLE = 2  # coupons of each replicate that must be possible, for a deviation


@dataclass(frozen=True, slots=True)
class LineYield:
    """One line's coupons against its limits. Shares [-]; mean and deviation [ohm], over possible coupons.

    `cp` and `cpk` are None where the interval of the deviation reaches zero, for then they have no finite bound.
    """

    inside: Interval
    below: Interval
    above: Interval
    mean: Interval
    deviation: Interval
    cp: Interval | None
    cpk: Interval | None
    impossible: int

    def from_tails(self, below: Interval, above: Interval, failing: Interval) -> LineYield:
        """The same line with its shares from an integral over its failures, which are too rare to be counted."""
        value = 1.0 - failing.value
        low, high = (float(np.nextafter(value, end)) for end in (0.0, 2.0))  # never narrower than numbers can tell
        inside = Interval(value, min(1.0 - failing.high, low), min(max(1.0 - failing.low, high), 1.0))
        return replace(self, below=below, above=above, inside=inside)


@dataclass(frozen=True, slots=True)
class Judgement:
    """Every line, and the coupon as a whole: `inside` is the share of coupons on which all lines pass."""

    lines: tuple[LineYield, ...]
    inside: Interval
    impossible: int  # coupons on which some line cannot exist


@dataclass(frozen=True, slots=True)
class Limits:
    """The impedance limits of one line [ohm]; both ends pass."""

    low: float
    high: float


def judge(
    impedance: FloatArray, possible: BoolArray, limits: tuple[Limits, ...], *,
    replicates: int, impedance_error: FloatArray | None = None, verdict_error: FloatArray | None = None,
    cluster: int = 1,
) -> Judgement:
    """Judge impedance [ohm] (lines, coupons); `possible` (lines, coupons): the section exists. Limits: one a line.

    Impossible coupons fail, and count neither as below nor as above; their impedances may hold anything.
    impedance_error : (lines,) [ohm] root mean square error of the impedances; ends of intervals move by it, and by the
        share of coupons that it could carry over a limit. Absent: none.
    verdict_error : the same of the impedances near the limits, where they are known better. Absent: impedance_error.
    cluster : coupons that were drawn together, one after another (a lot); 1: each for itself.
    Raises UnfinishedError where so few coupons of a line are possible that nothing can be said of its impedance.
    """
    errors = np.zeros(len(limits)) if impedance_error is None else impedance_error
    near = errors if verdict_error is None else verdict_error
    lines: list[LineYield] = []
    every = np.ones((3, impedance.shape[1]), dtype=np.bool_)  # passes; surely passes; perhaps passes
    for values, exists, limit, error, doubt in zip(
        impedance, possible, limits, errors.tolist(), near.tolist(), strict=True,
    ):
        lines.append(judge_line(values, exists, limit, replicates=replicates, impedance_error=error,
                                verdict_error=doubt, cluster=cluster))
        for verdicts, margin in zip(every, (0.0, -doubt, doubt), strict=True):
            verdicts &= passes(values, exists, limit, margin=margin)
    inside = share_interval(every[0], replicates=replicates, surely=every[1], perhaps=every[2], cluster=cluster)
    return Judgement(tuple(lines), inside, int(np.count_nonzero(~np.all(possible, axis=0))))


def passes(impedance: FloatArray, possible: BoolArray, limit: Limits, *, margin: float = 0.0) -> BoolArray:
    """Verdicts (coupons,) on impedances [ohm] (coupons,), the limits moved out by `margin` [ohm]."""
    return possible & _between(impedance, limit.low - margin, limit.high + margin)


def judge_line(
    impedance: FloatArray, possible: BoolArray, limit: Limits, *, replicates: int, impedance_error: float = 0.0,
    verdict_error: float | None = None, cluster: int = 1,
) -> LineYield:
    """Judge one line: impedance [ohm] and possible, both (coupons,). See `judge`."""
    error = impedance_error
    doubt = error if verdict_error is None else verdict_error
    mean, deviation = _moments(impedance, possible, replicates, cluster)
    surely = min(deviation[0] - float(half_interval(deviation[1])), float(np.min(deviation[1])))
    fixed = surely - error <= 0.0
    shares = {
        name: _share(impedance, possible, Limits(low, high), error=doubt, replicates=replicates, cluster=cluster)
        for name, low, high in (
            ("inside", limit.low, limit.high),
            ("below", -np.inf, np.nextafter(limit.low, -np.inf)),
            ("above", np.nextafter(limit.high, np.inf), np.inf),
        )
    }
    return LineYield(
        inside=shares["inside"], below=shares["below"], above=shares["above"],
        mean=_replicate_interval(mean).widened(error, error),
        deviation=_replicate_interval(deviation).widened(error, error).within(0.0, np.inf),
        cp=None if fixed else _cp(deviation, limit, error),
        cpk=None if fixed else _cpk(mean, deviation, limit, error),
        impossible=int(np.count_nonzero(~possible)),
    )


def _share(
    impedance: FloatArray, possible: BoolArray, between: Limits, *, error: float, replicates: int, cluster: int
) -> Interval:
    """Share of possible coupons in `between` [ohm], both ends included."""
    verdicts, surely, perhaps = (passes(impedance, possible, between, margin=margin)
                                 for margin in (0.0, -error, error))
    return share_interval(verdicts, replicates=replicates, surely=surely, perhaps=perhaps, cluster=cluster)


def share_interval(
    verdicts: BoolArray, *, replicates: int, surely: BoolArray | None = None, perhaps: BoolArray | None = None,
    cluster: int = 1,
) -> Interval:
    """Share of true `verdicts` (coupons,) with its interval, never of zero width.

    surely, perhaps : verdicts with all doubt counted against and in favour; they move the ends out.
    cluster : see `judge`. What is rare and comes in few clusters counts as fewer trials, by how it crowds.
    Replicates whose counts differ by one coupon at most leave a doubt of one coupon each.
    Source: E. L. Korn and B. I. Graubard, "Confidence intervals for proportions with small expected number of positive
    counts estimated from survey data", Survey Methodology, volume 24, pages 193-201, 1998.
    """
    coupons = len(verdicts)
    count = int(np.count_nonzero(verdicts))
    crowding = crowding_of_rare(verdicts, cluster)
    if crowding is not None:
        interval = binomial_interval(count / crowding, coupons / crowding)
    else:
        each = np.mean(verdicts.reshape(replicates, -1), axis=1)
        interval = _replicate_interval((count / coupons, each))
        one = replicates / coupons
        if cluster == 1 and np.ptp(each) < 1.5 * one:  # one variable decides: Sobol' counts agree, and say too little
            interval = interval.widened(max(0.0, one - (interval.value - interval.low)),
                                        max(0.0, one - (interval.high - interval.value)))
    if surely is not None and perhaps is not None:
        interval = interval.widened((count - np.count_nonzero(surely)) / coupons,
                                    (np.count_nonzero(perhaps) - count) / coupons)
    return interval.within(0.0, 1.0)


def crowding_of_rare(verdicts: BoolArray, cluster: int) -> float | None:
    """How many of the rarer verdict stand together in a cluster that has any, where that is few clusters; else None.

    With none at all: the whole cluster, for what is never seen may come by the lot.
    """
    if cluster == 1:
        count = int(np.count_nonzero(verdicts))
        return None if min(count, len(verdicts) - count) >= min(RARE, 0.5 * len(verdicts)) else 1.0
    count = np.count_nonzero(verdicts.reshape(-1, cluster), axis=1)
    rarer = count if 2 * np.sum(count) <= len(verdicts) else cluster - count
    spread_over = np.count_nonzero(rarer)
    if spread_over >= min(RARE, 0.5 * len(rarer)):
        return None
    return float(np.sum(rarer**2) / np.sum(rarer)) if spread_over else float(cluster)


def binomial_interval(count: float, trials: float) -> Interval:
    """Exact 95 % interval of a share, `count` of `trials` independent ones (or as many as they are worth).

    Source: C. J. Clopper and E. S. Pearson, "The use of confidence or fiducial limits illustrated in the case of
    the binomial", Biometrika, volume 26, pages 404-413, 1934.
    """
    tail = 0.5 * (1.0 - CONFIDENCE)
    low = 0.0 if count == 0 else float(betaincinv(count, trials - count + 1, tail))
    high = 1.0 if count == trials else float(betaincinv(count + 1, trials - count, 1.0 - tail))
    return Interval(count / trials, low, high)


def histogram(impedance: FloatArray, *, bins: int = 60) -> tuple[FloatArray, IntArray]:
    """Edges (bins + 1,) [ohm] and counts (bins,) of impedances (coupons,) [ohm], of the possible coupons only."""
    if np.ptp(impedance) <= STILL * np.max(np.abs(impedance)):  # nothing moves it: rounding alone makes no bins
        impedance = np.full_like(impedance, impedance[0])
    counts, edges = np.histogram(impedance, bins=bins)
    return edges.astype(np.float64), counts.astype(np.int64)


_Estimates = tuple[float, FloatArray]  # over all coupons, and of each replicate


def _replicate_interval(estimates: _Estimates) -> Interval:
    value, each = estimates
    half = float(half_interval(each))
    return Interval(value, value - half, value + half)


def _between(values: FloatArray, low: float, high: float) -> BoolArray:
    return np.asarray((values >= low) & (values <= high), dtype=np.bool_)


def _moments(
    impedance: FloatArray, possible: BoolArray, replicates: int, cluster: int
) -> tuple[_Estimates, _Estimates]:
    """Mean and deviation [ohm] of the possible coupons, over all and of each replicate.

    A replicate of few clusters says little of its own mean: there deviations are from the mean of all.
    """
    blocks = [values[exists] for values, exists in zip(
        impedance.reshape(replicates, -1), possible.reshape(replicates, -1), strict=True)]
    if min(len(block) for block in blocks) < FEWEST_POSSIBLE:
        count, coupons = np.count_nonzero(possible), len(possible)
        raise UnfinishedError(f"only {count} of {coupons} coupons have a section that can exist")
    whole = np.concatenate(blocks)
    mean = float(np.mean(whole))
    if np.ptp(whole) <= STILL * abs(mean):
        return (mean, np.full(replicates, mean)), (0.0, np.zeros(replicates))
    means = np.array([np.mean(block) for block in blocks])
    if cluster == 1:
        deviations = np.array([np.std(block, ddof=1) for block in blocks])
    else:
        deviations = np.array([np.sqrt(np.mean((block - mean) ** 2)) for block in blocks])
    return (mean, means), (float(np.std(whole, ddof=1)), deviations)


def _cp(deviation: _Estimates, limit: Limits, error: float) -> Interval:
    """Distance of the limits over six deviations.

    Source of both: V. E. Kane, "Process capability indices", Journal of Quality Technology, volume 18, pages 41-52,
    1986.
    """
    width, value = limit.high - limit.low, deviation[0]
    interval = _replicate_interval((width / (6.0 * value), width / (6.0 * deviation[1])))
    lowest, highest = width / (6.0 * (value + error)), width / (6.0 * (value - error))
    return interval.widened(interval.value - lowest, highest - interval.value)


def _cpk(mean: _Estimates, deviation: _Estimates, limit: Limits, error: float) -> Interval:
    """Distance of the mean to the nearer limit over three deviations."""
    room = min(limit.high - mean[0], mean[0] - limit.low)
    rooms = np.minimum(limit.high - mean[1], mean[1] - limit.low)
    interval = _replicate_interval((room / (3.0 * deviation[0]), rooms / (3.0 * deviation[1])))
    corners = [(room + side * error) / (3.0 * (deviation[0] + other * error))
               for side in (-1.0, 1.0) for other in (-1.0, 1.0)]
    return interval.widened(interval.value - min(corners), max(corners) - interval.value)
