"""What a reading does to the verdict: yield as read, false accepts, false rejects, and the guard band against them.

A reading is the true impedance + bias + a normal error. It accepts a coupon inside the limits less the guard band. The
chance of that is known for each true impedance, so the risks are means over the coupons, no reading being drawn: the
consumer's risk is the share of coupons that lie outside the limits and are accepted all the same, the producer's the
share of those inside that are rejected.
Source: JCGM 106:2012, "Evaluation of measurement data: the role of measurement uncertainty in conformity assessment",
section 9.5 (global risks of consumer and producer) and section 8 (guarded acceptance).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq
from scipy.special import ndtr

from tolerance.arrays import BoolArray, FloatArray
from tolerance.statistics.estimates import Interval, interval_of
from tolerance.statistics.yields import RARE, Limits, passes, share_interval

FALSE_ACCEPTS_WANTED = (0.01, 0.001, 0.0001)  # shares of all coupons, for which guard bands are told
SMALLEST_STEP = 1e-6  # ohm, how finely a guard band is found
LIKELY = 0.5  # probability above which a coupon counts as accepted, where coupons are counted


@dataclass(frozen=True, slots=True)
class Reading:
    """One reading of an impedance, and what is taken off both limits at acceptance. All in ohm."""

    repeatability: float = 0.0  # standard deviation
    bias: float = 0.0  # what a reading has too much
    guard_band: float = 0.0

    @property
    def changes_nothing(self) -> bool:
        return self.repeatability == self.bias == self.guard_band == 0.0


@dataclass(frozen=True, slots=True)
class GuardBand:
    """The guard band [ohm] that holds false accepts to a wanted share of all coupons, and what it costs.

    It is 0 where false accepts are as rare without one.
    """

    wanted: float
    band: Interval
    false_accepts: float
    false_rejects: float


@dataclass(frozen=True, slots=True)
class ReadingRisks:
    """What readings make of the coupons. Shares of all coupons [-]."""

    reading: Reading
    as_read: Interval  # read inside the limits, no guard band
    accepted: Interval  # read inside the limits less the guard band
    false_accepts: Interval  # outside in truth, accepted: the consumer's risk
    false_rejects: Interval  # inside in truth, rejected: the producer's risk
    guard_bands: tuple[GuardBand, ...]


@dataclass(frozen=True, slots=True)
class Coupons:
    """True impedances [ohm] and whether the section exists, (lines, coupons), with limits and errors of the lines.

    A coupon passes, and is accepted, where all its lines are. error : (lines,) [ohm] of the impedances.
    cluster : coupons of a lot where coupons were drawn as lots, else 1.
    """

    impedance: FloatArray
    possible: BoolArray
    limits: tuple[Limits, ...]
    error: FloatArray
    replicates: int
    cluster: int = 1

    def line(self, number: int) -> Coupons:
        """The same coupons with this line alone."""
        rows = slice(number, number + 1)
        return Coupons(self.impedance[rows], self.possible[rows], self.limits[rows], self.error[rows],
                       self.replicates, self.cluster)

    def conforming(self) -> BoolArray:
        """Verdicts (coupons,) on the true impedances."""
        verdicts = [passes(*row) for row in zip(self.impedance, self.possible, self.limits, strict=True)]
        return np.asarray(np.all(verdicts, axis=0), dtype=np.bool_)

    def accepted(self, reading: Reading) -> FloatArray:
        """Probability (coupons,) that readings accept the coupon."""
        result = np.ones(self.impedance.shape[1])
        for values, exists, limit in zip(self.impedance, self.possible, self.limits, strict=True):
            result *= np.where(exists, acceptance(values, limit, reading), 0.0)
        return result

    def moved_out(self, share: float) -> Coupons:
        """Every impedance moved away from the middle of its limits by so large a share of its error."""
        middle = np.array([[0.5 * (limit.low + limit.high)] for limit in self.limits])
        impedance = self.impedance + share * self.error[:, np.newaxis] * np.sign(self.impedance - middle)
        return Coupons(impedance, self.possible, self.limits, self.error, self.replicates, self.cluster)

    def rows(self, index: BoolArray) -> Coupons:
        """The coupons at `index` alone."""
        return Coupons(self.impedance[:, index], self.possible[:, index], self.limits, self.error, 1)


def acceptance(impedance: FloatArray, limit: Limits, reading: Reading) -> FloatArray:
    """Probability that a reading of each impedance [ohm] lies inside the limits less the guard band; same shape."""
    low, high = limit.low + reading.guard_band - reading.bias, limit.high - reading.guard_band - reading.bias
    if low > high:
        return np.zeros_like(impedance)
    if reading.repeatability == 0.0:
        return np.asarray((impedance >= low) & (impedance <= high), dtype=np.float64)
    to_low, to_high = (impedance - low) / reading.repeatability, (impedance - high) / reading.repeatability
    lower_side = to_low + to_high < 0.0  # each tail from its own side
    return np.asarray(ndtr(np.where(lower_side, to_low, -to_high)) - ndtr(np.where(lower_side, to_high, -to_low)))


def judge_readings(coupons: Coupons, reading: Reading) -> ReadingRisks:
    """Yield as read and the risks of coupons, a coupon being accepted where all its lines are."""
    unguarded = Reading(reading.repeatability, reading.bias)
    estimates = [_shares(coupons, reading, unguarded)]
    if np.any(coupons.error):
        estimates += [_shares(coupons.moved_out(side), reading, unguarded) for side in (-1.0, 1.0)]
    conforming, accepted = coupons.conforming(), estimates[0]["accepted"] > LIKELY
    at_limits = max(float(acceptance(np.array([limit.low, limit.high]), limit, reading).max())
                    for limit in coupons.limits)
    cases = {  # the coupons behind each share, and the most that each of them can add to it
        "as_read": (estimates[0]["as_read"] > LIKELY, 1.0), "accepted": (accepted, 1.0),
        "false_accepts": (~conforming, at_limits), "false_rejects": (conforming & ~accepted, 1.0),
    }
    intervals = {name: _interval(name, estimates, coupons.replicates) for name in cases}
    for name, (behind, highest) in cases.items():
        if _rests_on_few(estimates[0][name], coupons.cluster):
            intervals[name] = _allowing_for_more(intervals[name], behind, highest, coupons)
    return ReadingRisks(
        reading, as_read=intervals["as_read"], accepted=intervals["accepted"],
        false_accepts=intervals["false_accepts"], false_rejects=intervals["false_rejects"],
        guard_bands=tuple(guard_band_for(wanted, coupons, reading) for wanted in FALSE_ACCEPTS_WANTED),
    )


def guard_band_for(wanted: float, coupons: Coupons, reading: Reading) -> GuardBand:
    """The guard band that holds false accepts to the share `wanted`, instead of the reading's own."""
    conforming = coupons.conforming()
    widest = min(0.5 * (limit.high - limit.low) for limit in coupons.limits)
    block = conforming.size // coupons.replicates
    risks = [_risk_at(coupons.rows(~conforming), reading, conforming.size)]
    for replicate in range(coupons.replicates):
        here = np.arange(conforming.size) // block == replicate
        risks.append(_risk_at(coupons.rows(here & ~conforming), reading, block))
    band, *of_replicates = (_root(risk, wanted, widest) for risk in risks)
    guarded = Reading(reading.repeatability, reading.bias, band)
    rejected = 1.0 - coupons.rows(conforming).accepted(guarded)
    return GuardBand(wanted, interval_of(np.array(of_replicates), value=band).within(0.0, widest),
                     false_accepts=risks[0](band), false_rejects=float(np.sum(rejected)) / conforming.size)


def _risk_at(failing: Coupons, reading: Reading, coupons: int) -> Callable[[float], float]:
    """False accepts as a function of the guard band [ohm]: of `failing` ones among so many coupons."""
    def risk(band: float) -> float:
        return float(np.sum(failing.accepted(Reading(reading.repeatability, reading.bias, band)))) / coupons

    return risk


def _root(risk: Callable[[float], float], wanted: float, widest: float) -> float:
    if risk(0.0) <= wanted:
        return 0.0
    if risk(widest) > wanted:
        return widest
    return float(brentq(lambda band: risk(band) - wanted, 0.0, widest, xtol=SMALLEST_STEP))


def _shares(coupons: Coupons, reading: Reading, unguarded: Reading) -> dict[str, FloatArray]:
    """Each share before it is averaged, (coupons,)."""
    conforming, accepted = coupons.conforming(), coupons.accepted(reading)
    return {
        "as_read": coupons.accepted(unguarded), "accepted": accepted,
        "false_accepts": np.where(conforming, 0.0, accepted),
        "false_rejects": np.where(conforming, 1.0 - accepted, 0.0),
    }


def _interval(name: str, estimates: list[dict[str, FloatArray]], replicates: int) -> Interval:
    """Interval by the replicates, its ends moved by what the error of the impedances does."""
    here, *moved = (each[name] for each in estimates)
    interval = interval_of(np.mean(here.reshape(replicates, -1), axis=1))
    shifts = [float(np.mean(each)) - interval.value for each in moved]
    return interval.widened(max([0.0, *(-shift for shift in shifts)]), max([0.0, *shifts])).within(0.0, 1.0)


def _rests_on_few(values: FloatArray, cluster: int) -> bool:
    """Whether the mean of probabilities (coupons,), or what it lacks to 1, comes from few lots (or coupons).

    Source of the effective number: L. Kish, "Survey sampling", 1965.
    """
    rarer = values if 2.0 * np.sum(values) <= len(values) else 1.0 - values
    of_cluster = np.sum(rarer.reshape(-1, cluster), axis=1)
    return bool(np.sum(of_cluster) ** 2 <= min(RARE, 0.5 * len(of_cluster)) * np.sum(of_cluster**2))


def _allowing_for_more(interval: Interval, cases: BoolArray, highest: float, coupons: Coupons) -> Interval:
    """The interval reaching to the most and the fewest `cases` that there can be; highest: what one of them can add."""
    counted = share_interval(cases, replicates=coupons.replicates, cluster=coupons.cluster)
    return Interval(interval.value, low=min(interval.low, counted.low * highest),
                    high=max(interval.high, counted.high * highest))
