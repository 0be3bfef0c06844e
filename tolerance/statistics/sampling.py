"""What the sampling of measured data does to the intervals of a judgement.

The law of measured data is known from readings only. The sample is judged again under many laws that other readings
of the same number would have given, with the same germs otherwise; the spread of those verdicts, from their 2.5 to
their 97.5 % quantile, is the doubt that the readings leave. It is joined to the interval of the computation as
independent errors are, by squares.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import BoolArray, FloatArray
from tolerance.statistics.estimates import CONFIDENCE, Interval
from tolerance.statistics.yields import Judgement, Limits, LineYield

INSIDE, BELOW, ABOVE, MEAN, DEVIATION, CP, CPK = range(7)
FEWEST_POSSIBLE = 2


@dataclass(frozen=True, slots=True)
class Figures:
    """Figures of one law: of each line (lines, 7) in the order inside, below, above, mean, deviation, cp, cpk; and the
    share of coupons on which every line passes."""

    lines: FloatArray
    every: float


def figures(
    impedance: Sequence[FloatArray], possible: Sequence[BoolArray], limits: Sequence[Limits],
) -> Figures:
    """Figures of impedances [ohm] and of whether the section exists, (coupons,) for each line.

    Where a line has no deviation its cp and cpk are infinite; where it has no possible coupon its mean is not a number.
    """
    lines = np.empty((len(limits), 7))
    every = np.ones(len(possible[0]), dtype=np.bool_)
    for row, values, exists, limit in zip(lines, impedance, possible, limits, strict=True):
        low, high = values < limit.low, values > limit.high
        passes = exists & ~low & ~high
        every &= passes
        row[[INSIDE, BELOW, ABOVE]] = [np.mean(passes), np.mean(exists & low), np.mean(exists & high)]
        row[[MEAN, DEVIATION, CP, CPK]] = _capability(values[exists], limit)
    return Figures(lines, float(np.mean(every)))


def _capability(values: FloatArray, limit: Limits) -> tuple[float, float, float, float]:
    if len(values) < FEWEST_POSSIBLE:
        return np.nan, np.nan, np.nan, np.nan
    mean, deviation = float(np.mean(values)), float(np.std(values, ddof=1))
    if deviation <= 0.0:
        return mean, 0.0, np.inf, np.inf
    room = min(limit.high - mean, mean - limit.low)
    return mean, deviation, (limit.high - limit.low) / (6.0 * deviation), room / (3.0 * deviation)


def widened_by_sampling(judged: Judgement, own: Figures, others: Sequence[Figures]) -> Judgement:
    """The judgement with the doubt of the readings in every interval.

    own : figures of the coupons judged again under the law itself.  others : under the laws of other readings.
    """
    lines = tuple(
        _widened_line(line, own.lines[number], np.stack([other.lines[number] for other in others]))
        for number, line in enumerate(judged.lines)
    )
    every = np.array([other.every for other in others])
    return replace(judged, lines=lines, inside=_widened(judged.inside, own.every, every).within(0.0, 1.0))


def _widened_line(line: LineYield, own: FloatArray, others: FloatArray) -> LineYield:
    def of(interval: Interval, which: int) -> Interval:
        return _widened(interval, float(own[which]), others[:, which])

    return replace(
        line,
        inside=of(line.inside, INSIDE).within(0.0, 1.0), below=of(line.below, BELOW).within(0.0, 1.0),
        above=of(line.above, ABOVE).within(0.0, 1.0), mean=of(line.mean, MEAN),
        deviation=of(line.deviation, DEVIATION).within(0.0, np.inf),
        cp=None if line.cp is None else of(line.cp, CP), cpk=None if line.cpk is None else of(line.cpk, CPK),
    )


def _widened(interval: Interval, own: float, others: FloatArray) -> Interval:
    """The interval with its ends moved out by the spread of `others` about `own`."""
    known = others[np.isfinite(others)]
    if known.size == 0 or not np.isfinite(own):
        return interval
    tail = 0.5 * (1.0 - CONFIDENCE)
    low, high = np.quantile(known, [tail, 1.0 - tail])
    below, above = max(own - float(low), 0.0), max(float(high) - own, 0.0)
    return Interval(interval.value, interval.value - float(np.hypot(interval.value - interval.low, below)),
                    interval.value + float(np.hypot(interval.high - interval.value, above)))
