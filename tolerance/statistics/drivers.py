"""Which variables drive a line's impedance: Sobol' indices of independent variables, with intervals.

The estimators are SALib's: first order by Saltelli et al. 2010, total by Jansen. The design is the same as SALib's
(one Sobol' sequence over twice the variables gives the matrices A and B; A with one column of B gives the rest), laid
out in whole arrays, because SALib writes its own cell by cell, and moved to the middle of the Sobol' cells, so that no
normal draw is infinite. Intervals come from independent scrambles: a bootstrap over one such design is many times too
wide. Of independent variables 0 <= first <= total <= 1 holds exactly, of estimates only within their errors: what
is reported is held to it (the estimate of the total is the surer one), its interval is left as it is. A variable that
moves nothing has indices of exactly 0.
Sources: A. Saltelli et al., "Variance based sensitivity analysis of model output", Computer Physics Communications,
volume 181, pages 259-270, 2010; M. J. W. Jansen, "Analysis of variance designs for model output", Computer Physics
Communications, volume 117, pages 35-43, 1999; J. Herman and W. Usher, "SALib", Journal of Open Source Software,
volume 2, 97, 2017.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from SALib.analyze.sobol import first_order, total_order

from tolerance.arrays import FloatArray
from tolerance.process.draws import correlated_groups, sobol_normals
from tolerance.statistics.estimates import Driver, Interval, interval_of

REPLICATES = 8
POINTS = 2048  # of each replicate: index errors of 0.0013 at most over ten designs of a ten-variable product

MOVES_NOTHING = 1e-11  # of the mean: what a variable changes at most that changes nothing but the rounding


@dataclass(frozen=True, slots=True)
class Model:
    """A response to independent or correlated standard normals, in two steps.

    coordinate : (position, germ (points,)) -> coordinate (points,) of that variable.
    response : coordinates (points, dimensions) -> values (points,).
    correlation : of the germs, (dimensions, dimensions).
    swapped : where the model has a shorter way for it: (germ, other), both (points, dimensions) -> responses at the
        one, at the other, and at the one with each column in turn from the other, (2 + dimensions, points).
    """

    names: tuple[str, ...]
    coordinate: Callable[[int, FloatArray], FloatArray]
    response: Callable[[FloatArray], FloatArray]
    correlation: FloatArray
    swapped: Callable[[FloatArray, FloatArray], FloatArray] | None = None

    @property
    def dimensions(self) -> int:
        return len(self.names)

    def coordinates(self, germ: FloatArray) -> FloatArray:
        """Coordinates of germs, both (points, dimensions)."""
        result = np.empty(germ.shape, order="F")
        for position in range(self.dimensions):
            result[:, position] = self.coordinate(position, germ[:, position])
        return result


@dataclass(frozen=True, slots=True)
class Indices:
    """Shares of the variance, one estimate for each replicate: (replicates, dimensions)."""

    first: FloatArray
    total: FloatArray


def sobol_indices(
    model: Model, *, chance: np.random.Generator, points: int = POINTS, replicates: int = REPLICATES
) -> Indices:
    """First-order and total indices of independent variables; points: a power of two. The correlation is not used.

    A response that nothing moves has all indices zero.
    """
    first = np.zeros((replicates, model.dimensions))
    total = np.zeros((replicates, model.dimensions))
    for replicate, generator in enumerate(chance.spawn(replicates)):
        base, other, mixed = saltelli_values(model, points=points, chance=generator)
        both = np.concatenate([base, other])
        centre, scale = np.mean(both), np.std(both)
        if scale <= 1e-12 * abs(centre):
            continue
        moving = np.max(np.abs(mixed - base[:, np.newaxis]), axis=0) > MOVES_NOTHING * abs(centre)
        base, other, mixed = ((values - centre) / scale for values in (base, other, mixed))
        for position in np.flatnonzero(moving):
            first[replicate, position] = first_order(base, mixed[:, position], other)
            total[replicate, position] = total_order(base, mixed[:, position], other)
    return Indices(first, total)


def saltelli_values(
    model: Model, *, points: int, chance: np.random.Generator
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Values of the response at A (points,), at B (points,), and at A with column i of B: (points, dimensions)."""
    germ = sobol_normals(2 * model.dimensions, points, chance)
    if model.swapped is not None:
        values = model.swapped(germ[:, : model.dimensions], germ[:, model.dimensions :])
        return values[0], values[1], values[2:].T
    base = model.coordinates(germ[:, : model.dimensions])
    other = model.coordinates(germ[:, model.dimensions :])
    mixed = np.empty((points, model.dimensions))
    for position in range(model.dimensions):
        swapped = base.copy(order="F")
        swapped[:, position] = other[:, position]
        mixed[:, position] = model.response(swapped)
    return model.response(base), model.response(other), mixed


def ranked(model: Model, first: FloatArray, total: FloatArray, shapley: FloatArray | None = None) -> tuple[Driver, ...]:
    """Drivers from estimates (replicates, dimensions), largest first: by Shapley effect where there is one, else total.

    Equal ones stay in the order of the model.
    """
    independent = not correlated_groups(model.correlation)
    drivers = []
    for position, name in enumerate(model.names):
        alone, whole = interval_of(first[:, position]), interval_of(total[:, position])
        if independent:
            whole = _held(whole, 1.0)
            alone = _held(alone, whole.value)
        drivers.append(Driver(name, alone, whole, None if shapley is None else interval_of(shapley[:, position])))
    return tuple(sorted(drivers, key=_share_that_ranks, reverse=True))


def _held(estimate: Interval, most: float) -> Interval:
    """The estimate held between 0 and `most`; its interval still spans it."""
    value = min(max(estimate.value, 0.0), most)
    return Interval(value, min(estimate.low, value), max(estimate.high, value))


def _share_that_ranks(driver: Driver) -> float:
    return driver.total.value if driver.shapley is None else driver.shapley.value
