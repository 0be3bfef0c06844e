"""A law taken from readings: smoothed quantiles of the readings, or a fitted shape where they are few.

Many readings (50 and more) speak for themselves: their quantiles, smoothed by averaging over the order statistics
that a quantile could be, stretched so that mean and deviation are those of the readings. Beyond the outermost readings
the law goes on as a straight line on normal probability paper, through the median. With fewer readings a normal is
fitted; where Shapiro and Wilk's test refuses that at 5 %, a lognormal; where it refuses that too, the quantiles stand.

Another sample of the same size would have given another law. `resampled` draws such laws: for a fitted shape by the
distribution of its mean and deviation given the readings, for quantiles by the fact that the shares below sorted
readings are distributed like sorted uniform numbers, whatever the law (which is also what Wilks' tolerance limits
rest on).
Sources: F. E. Harrell and C. E. Davis, "A new distribution-free quantile estimator", Biometrika, volume 69, pages
635-640, 1982; S. S. Shapiro and M. B. Wilk, "An analysis of variance test for normality", Biometrika, volume 52,
pages 591-611, 1965; S. S. Wilks, "Determination of sample sizes for setting tolerance limits", Annals of Mathematical
Statistics, volume 12, pages 91-96, 1941 (all from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from scipy.special import betainc, chdtri, ndtr, ndtri
from scipy.stats import normaltest, shapiro

from tolerance.arrays import FloatArray, IntArray, read_only

Method = Literal["normal", "lognormal", "smoothed"]
FEWEST_FOR_QUANTILES = 50
REFUSED_BELOW = 0.05  # p value under which a shape is not taken
MOST_KNOTS = 1000  # order statistics that stand for all of a large sample
MOST_FOR_SHAPIRO = 5000  # readings up to which its p value is known
GRID = 401  # quantiles of the smoothed law
FARTHEST_GERM = 10.0
LEAST_SLOPE = 1e-9  # of the deviation, for a germ; keeps the law invertible where readings repeat
WIDEST_QUANTILES = 1.25  # how much wider than its own range other samples of a smoothed law may reach


@dataclass(frozen=True, slots=True, eq=False)
class MeasuredLaw:
    """The law of `count` readings; SI.

    mean, deviation : of the readings.  p_normal, p_lognormal : of the tests of fit, None where there is none.
    germs, values : rising tables of the law, a germ and its value; between them, and beyond, straight lines. For a
        lognormal `values` are logarithms.
    knots, ranks : sorted readings, and how many readings lie at or below each.
    """

    method: Method
    count: int
    mean: float
    deviation: float
    p_normal: float | None
    p_lognormal: float | None
    germs: FloatArray
    values: FloatArray
    knots: FloatArray
    ranks: IntArray

    @property
    def widest(self) -> float:
        """How many times wider than this law a law of another sample may well be (97.5 %)."""
        if self.method == "smoothed":
            return WIDEST_QUANTILES
        return float(np.sqrt((self.count - 1) / chdtri(self.count - 1, 0.975)))

    def value(self, germ: FloatArray) -> FloatArray:
        """Values [SI] at standard normal draws, same shape."""
        value = _lines(germ, self.germs, self.values)
        return np.asarray(np.exp(value)) if self.method == "lognormal" else value

    def spread_by(self, factor: float) -> MeasuredLaw:
        """The law with `factor` times the spread about its middle; of a lognormal, of the logarithms."""
        middle = float(_lines(np.zeros(1), self.germs, self.values)[0])
        centre = float(np.exp(middle)) if self.method == "lognormal" else middle
        return replace(self, deviation=factor * self.deviation, values=read_only(middle + factor * (
            self.values - middle)), knots=read_only(centre + factor * (self.knots - centre)))

    def germ(self, value: FloatArray) -> FloatArray:
        """The germs whose values these are; the inverse of `value`."""
        if self.deviation == 0.0:
            return np.zeros_like(value)
        place = np.asarray(np.log(value), dtype=np.float64) if self.method == "lognormal" else value
        return _lines(place, self.values, self.germs)

    def resampled(self, germ: FloatArray, chance: np.random.Generator) -> FloatArray:
        """Germs (coupons,) whose values in this law are those of `germ` in a law that another sample would give."""
        if self.deviation == 0.0:
            return germ
        if self.method != "smoothed":
            wider = np.sqrt((self.count - 1) / chance.chisquare(self.count - 1))
            return np.asarray(wider * (germ + chance.standard_normal() / np.sqrt(self.count)), dtype=np.float64)
        spacings = chance.standard_gamma(np.diff(self.ranks, prepend=0, append=self.count + 1))
        below = np.cumsum(spacings)[:-1] / np.sum(spacings)
        germs, values = _with_tails(ndtri(below), self.knots)
        return _lines(_lines(germ, germs, values), self.values, self.germs)


def measured_law(readings: FloatArray) -> MeasuredLaw:
    """The law of readings (readings,) [SI], at least two of them."""
    ordered = np.sort(readings)
    count, deviation = len(ordered), float(np.std(ordered, ddof=1))
    mean = float(np.mean(ordered))
    if float(np.ptp(ordered)) <= 1e-12 * abs(mean):
        deviation = 0.0
    p_normal = _fits_normal(ordered, deviation)
    logs = np.log(ordered) if ordered[0] > 0.0 else None
    p_lognormal = None if logs is None else _fits_normal(logs, deviation)
    method = _method(count, p_normal, p_lognormal)
    if method == "lognormal" and logs is not None:
        germs, values = _straight(float(np.mean(logs)), float(np.std(logs, ddof=1)))
    elif method == "normal" or deviation == 0.0:
        germs, values = _straight(mean, deviation)
    else:
        germs, values = _smoothed(ordered, mean, deviation)
    ranks = _ranks(count)
    return MeasuredLaw(method, count, mean, deviation, p_normal, p_lognormal, read_only(germs), read_only(values),
                       read_only(ordered[ranks - 1]), ranks)


def _method(count: int, p_normal: float | None, p_lognormal: float | None) -> Method:
    if count >= FEWEST_FOR_QUANTILES and p_normal is not None:
        return "smoothed"
    if p_normal is None or p_normal >= REFUSED_BELOW:
        return "normal"
    return "lognormal" if p_lognormal is not None and p_lognormal >= REFUSED_BELOW else "smoothed"


def _fits_normal(ordered: FloatArray, deviation: float) -> float | None:
    """p value of a normal law: Shapiro and Wilk; D'Agostino and Pearson for very many. None for equal readings."""
    if deviation == 0.0 or len(ordered) < 3:
        return None
    scaled = (ordered - np.mean(ordered)) / np.std(ordered, ddof=1)
    test = shapiro(scaled) if len(ordered) <= MOST_FOR_SHAPIRO else normaltest(scaled)
    return float(test.pvalue)


def _ranks(count: int) -> IntArray:
    """Ranks, counted from 1, of the order statistics that stand for all; the first and the last are among them."""
    return np.unique(np.linspace(1, count, min(count, MOST_KNOTS)).round().astype(np.int64))


def _straight(mean: float, deviation: float) -> tuple[FloatArray, FloatArray]:
    germs = np.array([-FARTHEST_GERM, FARTHEST_GERM])
    return germs, mean + deviation * germs


def _smoothed(ordered: FloatArray, mean: float, deviation: float) -> tuple[FloatArray, FloatArray]:
    """Table of smoothed quantiles between those that the outermost readings stand for, and lines beyond."""
    count, ranks = len(ordered), _ranks(len(ordered))
    edges = np.concatenate([[0.0], ranks[:-1] + 0.5 * np.diff(ranks), [count]]) if count > MOST_KNOTS \
        else np.arange(count + 1.0)
    end = ndtri(count / (count + 1.0))
    germs = np.linspace(-end, end, GRID)
    share = ndtr(germs)[:, np.newaxis]
    weights = np.diff(betainc((count + 1) * share, (count + 1) * (1.0 - share), edges / count), axis=1)
    germs, values = _with_tails(germs, weights @ ordered[ranks - 1])
    fine = np.linspace(-8.0, 8.0, 4001)
    mass = np.exp(-0.5 * fine**2) / np.sum(np.exp(-0.5 * fine**2))
    found = _lines(fine, germs, values)
    centre = float(mass @ found)
    stretch = deviation / np.sqrt(float(mass @ (found - centre) ** 2))
    values = mean + stretch * (values - centre)
    return germs, np.maximum.accumulate(values) + LEAST_SLOPE * deviation * germs


def _with_tails(germs: FloatArray, values: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The table, and beyond its ends straight lines as steep as from the middle to that end."""
    middle = len(values) // 2
    low = (values[middle] - values[0]) / (germs[middle] - germs[0])
    high = (values[-1] - values[middle]) / (germs[-1] - germs[middle])
    first, last = min(germs[0] - 1.0, -FARTHEST_GERM), max(germs[-1] + 1.0, FARTHEST_GERM)
    ends = values[0] + low * (first - germs[0]), values[-1] + high * (last - germs[-1])
    return np.concatenate([[first], germs, [last]]), np.concatenate([[ends[0]], values, [ends[1]]])


def _lines(places: FloatArray, knots: FloatArray, values: FloatArray) -> FloatArray:
    """Straight lines between the knots, and beyond them the first and the last line carried on."""
    inside = np.interp(places, knots, values)
    below, above = places < knots[0], places > knots[-1]
    if np.any(below) or np.any(above):
        first = (values[1] - values[0]) / (knots[1] - knots[0])
        last = (values[-1] - values[-2]) / (knots[-1] - knots[-2])
        inside = np.where(below, values[0] + first * (places - knots[0]), inside)
        inside = np.where(above, values[-1] + last * (places - knots[-1]), inside)
    return np.asarray(inside, dtype=np.float64)
