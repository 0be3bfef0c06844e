"""The board as decisions see it: each line's impedance for any process, on one sample of germs.

Every change is judged on the same germs, so that coupons whose verdict stays do not blur the difference.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, read_only
from tolerance.process.draws import Process
from tolerance.statistics.estimates import Interval, half_interval
from tolerance.statistics.yields import Limits, binomial_interval, crowding_of_rare, share_interval

Aim = Literal["each line", "together"]  # which yield must reach the target: of every line, or of all of a coupon
Side = tuple[BoolArray, BoolArray, BoolArray]  # passes; surely passes; perhaps passes


@dataclass(frozen=True, slots=True)
class LineModel:
    """One line: what it `answers` for a process and germs (coupons, variables): impedances [ohm] and whether sections
    can exist, (coupons,) each.

    width : drawn width [m], what a percentage of etch is of.
    process : as this line sees it.  reaching : names of the properties that reach it.
    error : root mean square error [ohm] of the impedances.
    """

    name: str
    target: float
    limits: Limits
    error: float
    width: float
    reaching: frozenset[str]
    process: Process
    answers: Callable[[Process, FloatArray], tuple[FloatArray, BoolArray]]


@dataclass(frozen=True, slots=True)
class Board:
    """All lines on one sample: germ (coupons, variables), in replicates, and in clusters that were drawn together."""

    lines: tuple[LineModel, ...]
    germ: FloatArray
    replicates: int
    cluster: int = 1

    @property
    def coupons(self) -> int:
        return len(self.germ)

    def thinned(self, coupons: int) -> Board:
        """The same with the first coupons of each replicate only, at least so many of all; whole clusters."""
        block = self.coupons // self.replicates
        kept = min(max(coupons // self.replicates // self.cluster, 1) * self.cluster, block)
        rows = (np.arange(self.replicates)[:, np.newaxis] * block + np.arange(kept)).ravel()
        return replace(self, germ=read_only(self.germ[rows]))

    def sides(self, line: LineModel, process: Process) -> Side:
        """Verdicts (coupons,) on a line under a process: as predicted, and with its error against and in favour."""
        return sides_of(*line.answers(process, self.germ), line)

    def share(self, sides: Side) -> Interval:
        """The share of coupons that pass, with its interval."""
        passes, surely, perhaps = sides
        return share_interval(passes, replicates=self.replicates, surely=surely, perhaps=perhaps,
                              cluster=self.cluster)

    def difference(self, new: Side, old: Side) -> Interval:
        """Yield of `new` less that of `old` on the same coupons; the interval allows for the prediction's error."""
        gained, lost = new[0] & ~old[0], old[0] & ~new[0]
        up, down = int(np.count_nonzero(gained)), int(np.count_nonzero(lost))
        value = (up - down) / self.coupons
        crowding = crowding_of_rare(gained | lost, self.cluster)
        if crowding is not None:
            few, many = (binomial_interval(count / crowding, self.coupons / crowding) for count in (up, down))
            interval = Interval(value, few.low - many.high, few.high - many.low)
        else:
            each = np.mean((gained.astype(float) - lost).reshape(self.replicates, -1), axis=1)
            half = float(half_interval(each))
            interval = Interval(value, value - half, value + half)
        doubt = sum(abs(np.count_nonzero(side[2]) - np.count_nonzero(side[1])) for side in (new, old))
        if not up + down:
            doubt = 0  # the same verdicts of the same prediction
        return interval.widened(0.5 * doubt / self.coupons, 0.5 * doubt / self.coupons).within(-1.0, 1.0)


def sides_of(impedance: FloatArray, possible: BoolArray | None, line: LineModel) -> Side:
    """Verdicts on impedances [ohm] (coupons,); `possible` None: all are."""
    margins = (0.0, -line.error, line.error)
    found = [(impedance >= line.limits.low - margin) & (impedance <= line.limits.high + margin) for margin in margins]
    passes, surely, perhaps = (each if possible is None else each & possible for each in found)
    return passes, surely, perhaps


def every(sides: Sequence[Side], coupons: int) -> Side:
    """What passes on all of these lines."""
    every_one = tuple(np.ones(coupons, dtype=np.bool_) for _ in range(3))
    for side in sides:
        for whole, part in zip(every_one, side, strict=True):
            np.logical_and(whole, part, out=whole)
    return every_one[0], every_one[1], every_one[2]


def aimed(line_yields: Sequence[float], together: float, aim: Aim) -> float:
    """The yield that is held against the target: the lowest of the lines, or that of all together."""
    return together if aim == "together" else min(line_yields)
