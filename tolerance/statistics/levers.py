"""What matters for yield: what it gains were one variable's spread halved, its mean moved, its deviation changed.

The variance says what moves the impedance; what fails depends also on where the limits lie. All figures are of the
predicted impedance, integrated along the lines of one bundle (see tails), so that they are compared on the same draws:
derivatives from how the crossings of the limits move, halved spreads by integrating anew.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.special import stdtr

from tolerance.arrays import FloatArray, IntArray
from tolerance.process.changes import Change, Moments
from tolerance.statistics.estimates import Interval, interval_of
from tolerance.statistics.tails import Bundle, Failing, bundle, failing
from tolerance.statistics.yields import Limits

LINES = 64  # of each replicate
MORE_LINES = 512  # where those leave the failing share unsure: a response that bends rather than rises
UNSURE = 0.2  # half of the interval over the failing share
STEPS = 12  # along a line
HALF = 0.5
STEP = 1e-3  # of a deviation or of its logarithm, and along a line, for derivatives

Response = Callable[[FloatArray, Change | None], FloatArray]  # independent normals (points, d), change -> ohm (points,)


@dataclass(frozen=True, slots=True)
class Lever:
    """What one variable does to a line's yield. Shares [-].

    halved : the gain of yield were its spread half of what it is.
    by_mean : the change of yield for each deviation that its mean is moved up.
    by_deviation : the change of yield by the logarithm of its deviation.
    order : probability that it truly gains no less than the next in the ranking by `halved`; 1 for the last.
    """

    variable: str
    halved: Interval
    by_mean: Interval
    by_deviation: Interval
    order: float


@dataclass(frozen=True, slots=True)
class Levers:
    """All of a line, largest gain first, and the yield [-] that they are compared with."""

    inside: Interval
    each: tuple[Lever, ...]


def levers_of(
    response: Response, names: Sequence[str], moments: Sequence[dict[str, Moments]], limits: Limits, *,
    chance: np.random.Generator, lines: int = LINES,
) -> Levers:
    """What each variable does to the yield between the limits [ohm].

    moments : what each variable moves, by property name.  lines : of each replicate, a power of two.
    """
    def unchanged(points: FloatArray) -> FloatArray:
        return response(points, None)

    through, base = _failing_surely(unchanged, len(names), limits, chance, lines)
    fails, edge = through.by_replicate(base.below + base.above), _Edge.of(unchanged, through, base)
    gains, means, deviations = (np.empty((len(names), through.replicates)) for _ in range(3))
    for place, moved in enumerate(moments):
        narrow = Change(moved, stretch=HALF)
        halved = failing(lambda points, change=narrow: response(points, change), through, limits,  # type: ignore[misc]
                         steps=STEPS)
        gains[place] = fails - through.by_replicate(halved.below + halved.above)
        means[place] = -edge.slope(response, Change(moved, shift=STEP), Change(moved, shift=-STEP))
        deviations[place] = -edge.slope(response, Change(moved, stretch=float(np.exp(STEP))),
                                        Change(moved, stretch=float(np.exp(-STEP))))
    ranking = sorted(range(len(names)), key=lambda place: -float(np.mean(gains[place])))
    order = [_surely_more(gains[one], gains[other]) for one, other in pairwise(ranking)]
    return Levers(
        interval_of(1.0 - fails).within(0.0, 1.0),
        tuple(Lever(names[place], interval_of(gains[place]), interval_of(means[place]), interval_of(deviations[place]),
                    probability) for place, probability in zip(ranking, [*order, 1.0], strict=True)),
    )


def _failing_surely(
    unchanged: Callable[[FloatArray], FloatArray], dimensions: int, limits: Limits, chance: np.random.Generator,
    lines: int,
) -> tuple[Bundle, Failing]:
    """A bundle and what fails along it: of more lines where those asked for say too little."""
    for count in (lines, MORE_LINES):
        through = bundle(unchanged, dimensions, chance=chance, lines=count)
        base = failing(unchanged, through, limits, steps=STEPS)
        fails = interval_of(through.by_replicate(base.below + base.above))
        if fails.high - fails.low <= 2.0 * UNSURE * fails.value:
            break
    return through, base


@dataclass(frozen=True, slots=True)
class _Edge:
    """Where lines cross a limit: points (crossings, d), and how the failing mass of the line goes with dZ there."""

    through: Bundle
    lines: IntArray
    points: FloatArray
    mass_by_impedance: FloatArray

    @staticmethod
    def of(unchanged: Callable[[FloatArray], FloatArray], through: Bundle, base: Failing) -> _Edge:
        """A crossing at s moves by ds = -dZ / (dZ/ds), and with it the mass phi(s) ds."""
        lines, along, leaving = (np.concatenate([getattr(base.low, name), getattr(base.high, name)])
                                 for name in ("lines", "along", "leaving"))
        rise = unchanged(through.points(lines, along + STEP)) - unchanged(through.points(lines, along - STEP))
        steep = np.abs(rise) > 0.0
        density = np.exp(-0.5 * along**2) / np.sqrt(2.0 * np.pi)
        by_impedance = np.where(leaving, 1.0, -1.0) * np.where(steep, density / np.where(steep, rise, 1.0), 0.0)
        return _Edge(through, lines, through.points(lines, along), by_impedance)

    def slope(self, response: Response, up: Change, down: Change) -> FloatArray:
        """Derivative of the failing share by a change, (replicates,); the two changes lie 2 STEP apart."""
        moved = np.zeros(len(self.through.beside))
        by_change = response(self.points, up) - response(self.points, down)
        np.add.at(moved, self.lines, self.mass_by_impedance * by_change)
        return self.through.by_replicate(moved)


def _surely_more(one: FloatArray, other: FloatArray) -> float:
    """Probability that the first gains no less, by Student's t of the differences of the replicates."""
    difference = one - other
    mean, error = float(np.mean(difference)), float(np.std(difference, ddof=1)) / np.sqrt(len(difference))
    if error <= 0.0:
        return 1.0
    return float(stdtr(len(difference) - 1, mean / error))
