"""How often a line fails, integrated along one direction: sure of its figure where hardly any coupon fails.

In the space of independent standard normals a line is drawn through each of a few points, all of them along the
direction in which the impedance rises most; on each the share that fails is known from where it crosses the limits,
and only the points beside the direction are sampled. With a nearly linear ln Z all lines say nearly the same.
Sources: P. S. Koutsourelakis, H. J. Pradlwarter and G. I. Schueller, "Reliability of structures in high dimensions",
Probabilistic Engineering Mechanics, volume 19, pages 409-423, 2004; A. Griewank, F. Y. Kuo, H. Leoevey and
I. H. Sloan, "High dimensional integration of kinks and jumps: smoothing by preintegration", Journal of Computational
and Applied Mathematics, volume 344, pages 259-274, 2018.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr

from tolerance.arrays import BoolArray, FloatArray, IntArray
from tolerance.process.draws import sobol_normals
from tolerance.statistics.yields import Limits

REPLICATES = 8
LINES = 256  # of each replicate
SLOPE_POINTS = 1024  # from which the direction is known
FARTHEST = 9.0  # deviations along a line
FARTHEST_MASS = float(ndtr(-FARTHEST))  # what lies beyond: 1e-19
LOOKED_AT = 6.0  # deviations along a line within which it should rise throughout
STEPS = 24  # between the ends of a line
REFINEMENTS = 5  # of each crossing
NEAR_ENOUGH = 1e-8  # of the limit: some 1e-6 of a share that fails

Response = Callable[[FloatArray], FloatArray]  # independent standard normals (points, d) -> impedance [ohm] (points,)


@dataclass(frozen=True, slots=True)
class Bundle:
    """Parallel lines through the space of standard normals.

    direction : (d,), of length 1.  beside : (lines, d), where each line passes, at right angles to the direction.
    Lines of one replicate stand together.
    """

    direction: FloatArray
    beside: FloatArray
    replicates: int = REPLICATES

    def points(self, lines: IntArray, along: FloatArray) -> FloatArray:
        """Places (points, d) at `along` on the lines of these numbers, both (points,)."""
        return np.asarray(self.beside[lines] + along[:, np.newaxis] * self.direction, dtype=np.float64)

    def by_replicate(self, values: FloatArray) -> FloatArray:
        """Means (replicates,) of values (lines,)."""
        return np.asarray(np.mean(values.reshape(self.replicates, -1), axis=1), dtype=np.float64)


@dataclass(frozen=True, slots=True)
class Crossings:
    """Where lines cross a limit: the line's number, the place along it, and whether it fails on the way out of there.

    Arrays (crossings,). leaving : further along, the line fails.
    """

    lines: IntArray
    along: FloatArray
    leaving: BoolArray


@dataclass(frozen=True, slots=True)
class Failing:
    """Shares that fail on each line (lines,), where the limits are crossed, and whether every line rises throughout."""

    below: FloatArray
    above: FloatArray
    low: Crossings
    high: Crossings
    monotone: bool


def bundle(response: Response, dimensions: int, *, chance: np.random.Generator, lines: int = LINES) -> Bundle:
    """Lines along the direction of the best linear part of ln Z. `lines`: of each replicate, a power of two.

    A response that nothing moves gets lines along the first variable.
    """
    slope_chance, *replicate_chances = chance.spawn(1 + REPLICATES)
    points = sobol_normals(dimensions, SLOPE_POINTS, slope_chance)
    values = np.log(response(points))
    design = np.column_stack([np.ones(len(points)), points])
    slopes = np.linalg.lstsq(design, values)[0][1:]
    length = float(np.linalg.norm(slopes))
    direction = slopes / length if length > 0.0 else np.eye(dimensions)[0]
    places = np.concatenate([sobol_normals(dimensions, lines, generator) for generator in replicate_chances])
    return Bundle(direction, places - np.outer(places @ direction, direction))


@dataclass(frozen=True, slots=True)
class Profile:
    """A response along the lines of a bundle: values [ohm] (lines, places) at the same places (places,) of each."""

    response: Response
    through: Bundle
    grid: FloatArray
    values: FloatArray


def profile(response: Response, through: Bundle, *, steps: int = STEPS) -> Profile:
    """The response along the lines. steps : in which crossings are looked for."""
    grid = np.linspace(-FARTHEST, FARTHEST, steps + 1)
    count = len(through.beside)
    numbers = np.repeat(np.arange(count), grid.size)
    values = response(through.points(numbers, np.tile(grid, count))).reshape(count, grid.size)
    return Profile(response, through, grid, values)


def failing(response: Response, through: Bundle, limits: Limits, *, steps: int = STEPS) -> Failing:
    """What fails along the lines of a bundle, at either limit. steps : in which crossings are looked for."""
    return failing_along(profile(response, through, steps=steps), limits)


def failing_along(known: Profile, limits: Limits) -> Failing:
    """What fails along lines whose profile is known, at either limit."""
    response, through, grid, values = known.response, known.through, known.grid, known.values
    below, low = _beyond(response, through, grid, values, limits.low, sign=-1.0)
    above, high = _beyond(response, through, grid, values, limits.high, sign=1.0)
    return Failing(below, above, low, high,
                   bool(np.all(np.diff(values[:, np.abs(grid) <= LOOKED_AT], axis=1) >= 0.0)))


def _beyond(
    response: Response, through: Bundle, grid: FloatArray, values: FloatArray, limit: float, *, sign: float,
) -> tuple[FloatArray, Crossings]:
    """Share of each line that lies beyond a limit, and the crossings; sign 1: above fails, -1: below fails."""
    excess = sign * np.log(values / limit)
    fails = excess > 0.0
    share = (fails[:, :-1] & fails[:, 1:]) @ _mass(grid[:-1], grid[1:])
    share = share + FARTHEST_MASS * (fails[:, 0].astype(float) + fails[:, -1])
    lines, steps = np.nonzero(fails[:, :-1] != fails[:, 1:])
    left, right = grid[steps], grid[steps + 1]
    along = _root(lambda place: sign * np.log(response(through.points(lines, place)) / limit),
                  left, right, excess[lines, steps], excess[lines, steps + 1])
    leaving = fails[lines, steps + 1]
    np.add.at(share, lines, np.where(leaving, _mass(along, right), _mass(left, along)))
    return share, Crossings(lines, along, leaving)


def _root(
    excess: Callable[[FloatArray], FloatArray], left: FloatArray, right: FloatArray, at_left: FloatArray,
    at_right: FloatArray,
) -> FloatArray:
    """Where the excess changes its sign in each interval (crossings,): false position as in the Illinois method.

    Source: M. Dowell and P. Jarratt, "A modified regula falsi method for computing the root of an equation", BIT,
    volume 11, pages 168-174, 1971.
    """
    left, right, at_left, at_right = left.copy(), right.copy(), at_left.copy(), at_right.copy()
    place = right
    for _ in range(REFINEMENTS):
        if left.size == 0:
            break
        place = right - at_right * (right - left) / (at_right - at_left)
        value = excess(place)
        over = np.sign(value) != np.sign(at_right)
        left, at_left = np.where(over, right, left), np.where(over, at_right, 0.5 * at_left)
        right, at_right = place, value
        done = at_right == at_left
        at_left = np.where(done, at_left - np.finfo(float).tiny, at_left)
        if np.all(np.abs(value) < NEAR_ENOUGH):
            break
    return place


def _mass(left: FloatArray, right: FloatArray) -> FloatArray:
    """Probability of a standard normal between two places, exact in both tails."""
    return np.asarray(np.where(left > 0.0, ndtr(-left) - ndtr(-right), ndtr(right) - ndtr(left)), dtype=np.float64)
