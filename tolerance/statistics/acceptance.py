"""Acceptance of lots by sample: how likely a lot is accepted, how that hangs on its quality, what accepted lots are.

Of each simulated lot a sample is taken at random; every coupon of it is read on all its lines. Given the true
impedances the readings are independent, so that the chance of at most so many failures follows exactly (the law of a
sum of unequal trials, built up coupon by coupon), and only the lots and the choice of the sample are drawn.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.stats import binom, hypergeom

from tolerance.arrays import BoolArray, FloatArray, IntArray
from tolerance.process.draws import LotSize
from tolerance.statistics.estimates import Interval, interval_of
from tolerance.statistics.yields import RARE, binomial_interval, crowding_of_rare, share_interval

CLASSES = (0.0, 0.01, 0.02, 0.05, 0.10, 0.20, 0.50, 1.0)  # highest share of failing coupons of each class of lots


@dataclass(frozen=True, slots=True)
class SamplingPlan:
    """`sample_size` coupons of a lot are measured; it is accepted with at most `accept_number` failures."""

    sample_size: int
    accept_number: int


@dataclass(frozen=True, slots=True)
class OperatingPoint:
    """Lots of one quality: `above` < share of failing coupons <= `up_to` (0 to 0: none fails).

    accepted : probability that such a lot is accepted; as_known : the same, were every reading true (hypergeometric).
    """

    above: float
    up_to: float
    share_of_lots: float
    failing: float  # mean share of failing coupons in them
    accepted: Interval
    as_known: float


@dataclass(frozen=True, slots=True)
class LotAcceptance:
    """What the sampling plan does to the lots of this process."""

    plan: SamplingPlan
    size: LotSize
    lots: int  # simulated
    accepted: Interval  # probability that a lot is accepted
    if_independent: float  # the same by the binomial formula, as if coupons of a lot were independent
    quality: Interval | None  # share of passing coupons in accepted lots; None where none is ever accepted
    curve: tuple[OperatingPoint, ...]


def judge_lot_acceptance(
    passing: BoolArray, accepted: FloatArray, plan: SamplingPlan, size: LotSize, *,
    replicates: int, chance: np.random.Generator,
) -> LotAcceptance:
    """passing, accepted : (lots, coupons of a lot), the true verdict and the probability that readings accept it.

    Lots of a replicate stand together.
    """
    order = np.argsort(chance.random(accepted.shape), axis=1)[:, : plan.sample_size]
    probability = chance_of_few_failures(np.take_along_axis(accepted, order, axis=1), plan.accept_number)
    return LotAcceptance(
        plan, size, len(passing), accepted=_mean_interval(probability, replicates),
        if_independent=float(binom.cdf(plan.accept_number, plan.sample_size, 1.0 - np.mean(accepted))),
        quality=_quality(passing, probability, replicates),
        curve=_curve(np.count_nonzero(~passing, axis=1), probability, plan, size),
    )


def chance_of_few_failures(accepted: FloatArray, most: int) -> FloatArray:
    """Probability (lots,) of at most `most` failures among trials that pass as `accepted` (lots, trials) says."""
    law = np.zeros((most + 1, len(accepted)))  # of the number of failures so far
    law[0] = 1.0
    for passes in accepted.T:
        fewer = law[:-1] * (1.0 - passes)
        law *= passes
        law[1:] += fewer
    return np.asarray(np.minimum(np.sum(law, axis=0), 1.0))


def _curve(
    failing: IntArray, probability: FloatArray, plan: SamplingPlan, size: LotSize
) -> tuple[OperatingPoint, ...]:
    """The operating characteristic: one point for each class of lots that occurs."""
    points = []
    known = np.asarray(hypergeom.cdf(plan.accept_number, size.coupons, failing, plan.sample_size))
    share = failing / size.coupons
    for above, up_to in zip((-1.0, *CLASSES), CLASSES, strict=False):
        here = (share > above) & (share <= up_to)
        if np.any(here):
            points.append(OperatingPoint(
                max(above, 0.0), up_to, float(np.mean(here)), float(np.mean(share[here])),
                _mean_interval(probability[here], int(np.count_nonzero(here))), float(np.mean(known[here]))))
    return tuple(points)


def _mean_interval(probability: FloatArray, replicates: int) -> Interval:
    """Mean of probabilities (lots,) with its interval; where nearly all or none are accepted, as of counted ones."""
    lots, total = len(probability), float(np.sum(probability))
    if min(total, lots - total) < RARE or replicates < 2:
        return binomial_interval(total, lots)
    return interval_of(np.mean(probability.reshape(replicates, -1), axis=1)).within(0.0, 1.0)


def _quality(passing: BoolArray, probability: FloatArray, replicates: int) -> Interval | None:
    """Share of passing coupons in accepted lots; its interval from leaving out one replicate at a time.

    Where few lots fail at all, it reaches down to what the yield of all lots may be.
    Source: the jackknife of a ratio, as in B. Efron, "The jackknife, the bootstrap and other resampling plans", 1982.
    """
    weights = np.sum(probability.reshape(replicates, -1), axis=1)
    products = np.sum((np.mean(passing, axis=1) * probability).reshape(replicates, -1), axis=1)
    if np.sum(weights) <= 0.0:
        return None
    value = float(np.sum(products) / np.sum(weights))
    others = np.sum(weights) - weights
    if np.any(others <= 0.0):
        return Interval(value, 0.0, 1.0)
    without = (np.sum(products) - products) / others
    interval = interval_of(replicates * value - (replicates - 1) * without, value=value).within(0.0, 1.0)
    if crowding_of_rare(passing.ravel(), passing.shape[1]) is None:
        return interval
    every = share_interval(passing.ravel(), replicates=replicates, cluster=passing.shape[1])
    return Interval(value, min(interval.low, every.low), max(interval.high, every.high))
