"""Which variables drive a line's impedance when some are correlated: conditional indices and Shapley effects.

With a set u of variables known, S(u) = Var(E[Z | X_u]) / Var(Z). The first-order index of variable i is S({i}), its
total 1 - S(all but i), both under the true conditional law of the Gaussian copula. The Shapley effect of i is the
mean over all orders of what i adds when it becomes known after its forerunners; effects are never negative and add up
to 1, correlated or not. S(u) comes from pairs of responses that share X_u, the rest drawn anew given X_u:
S(u) = 1 - E[(Z - Z')^2] / (2 Var(Z)).
Sources: E. Song, B. L. Nelson and J. Staum, "Shapley effects for global sensitivity analysis: theory and
computation", SIAM/ASA Journal on Uncertainty Quantification, volume 4, pages 1060-1083, 2016; A. B. Owen and
C. Prieur, "On Shapley value for measuring importance of dependent inputs", the same journal, volume 5, 2017.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.draws import correlated_groups, sobol_normals
from tolerance.statistics.drivers import REPLICATES, Model

POINTS = 2048  # of each replicate, for first-order and total indices
SUBSET_POINTS = 512  # of each replicate, for the many sets of the Shapley effects: errors below 0.0025
MOST_FOR_ALL_SETS = 8  # variables up to which every set is evaluated; beyond, sets along random orders
ORDERS = 16  # of each replicate, half of them the other half backwards; more do not lower the error


@dataclass(frozen=True, slots=True)
class DependentIndices:
    """Shares of the variance, one estimate for each replicate: (replicates, dimensions)."""

    first: FloatArray
    total: FloatArray
    shapley: FloatArray


@dataclass(frozen=True, slots=True)
class _Pairs:
    """Responses at one design, and at its mates that share some of the variables. A set is a bit mask.

    germ : (points, dimensions), with its correlation; spare : independent normals of the same shape, for the rest.
    """

    model: Model
    germ: FloatArray
    spare: FloatArray
    groups: list[list[int]]
    base: FloatArray
    response: FloatArray  # at base
    fresh: FloatArray  # coordinates of the spare normals, which serve where nothing is correlated
    redrawn: dict[tuple[int, int], FloatArray] = field(default_factory=dict)

    def explained(self, known: int) -> float:
        """S(u) of the set `known`; 0 for none and 1 for all."""
        dimensions = self.model.dimensions
        if known == 0:
            return 0.0
        if known == (1 << dimensions) - 1:
            return 1.0
        mate = self.fresh.copy(order="F")
        for position in range(dimensions):
            if known >> position & 1:
                mate[:, position] = self.base[:, position]
        for number, group in enumerate(self.groups):
            unknown = [position for position in group if not known >> position & 1]
            if unknown and len(unknown) < len(group):
                mate[:, unknown] = self._given(number, known)
            elif unknown:
                mate[:, group] = self._given(number, 0)
        one, other = self.response, self.model.response(mate)
        variance = float(np.var(np.concatenate([one, other])))
        if variance <= (1e-12 * float(np.mean(one))) ** 2:
            return 0.0
        return 1.0 - 0.5 * float(np.mean((one - other) ** 2)) / variance

    def _given(self, number: int, known: int) -> FloatArray:
        """Coordinates of the unknown members of a correlated group, drawn anew given its known ones."""
        group = self.groups[number]
        mask = sum(1 << position for position in group if known >> position & 1)
        if (number, mask) not in self.redrawn:
            given = [position for position in group if mask >> position & 1]
            unknown = [position for position in group if not mask >> position & 1]
            germ = conditional_normals(self.model.correlation, self.germ, self.spare, given=given, unknown=unknown)
            self.redrawn[number, mask] = np.stack(
                [self.model.coordinate(position, germ[:, column]) for column, position in enumerate(unknown)], axis=1)
        return self.redrawn[number, mask]


def dependent_indices(
    model: Model, *, chance: np.random.Generator, points: int = POINTS, subset_points: int = SUBSET_POINTS,
    replicates: int = REPLICATES,
) -> DependentIndices:
    """First-order and total indices and Shapley effects under the model's correlation; points: powers of two."""
    dimensions = model.dimensions
    result = DependentIndices(*(np.zeros((replicates, dimensions)) for _ in range(3)))
    every = (1 << dimensions) - 1
    for replicate, generator in enumerate(chance.spawn(replicates)):
        index_chance, set_chance, order_chance = generator.spawn(3)
        pairs = _draw_pairs(model, points, index_chance)
        for position in range(dimensions):
            result.first[replicate, position] = pairs.explained(1 << position)
            result.total[replicate, position] = 1.0 - pairs.explained(every ^ 1 << position)
        pairs = _draw_pairs(model, subset_points, set_chance)
        effects = _effects_of_all_sets(pairs) if dimensions <= MOST_FOR_ALL_SETS else _effects_along_orders(
            pairs, order_chance)
        result.shapley[replicate] = effects
    return result


def group_totals(
    model: Model, groups: list[list[int]], *, chance: np.random.Generator, points: int = POINTS,
    replicates: int = REPLICATES,
) -> FloatArray:
    """Share of the variance that would be left were all but a group's variables known: (replicates, groups).

    groups : positions of variables.  points : a power of two.
    """
    every = (1 << model.dimensions) - 1
    result = np.zeros((replicates, len(groups)))
    for replicate, generator in enumerate(chance.spawn(replicates)):
        pairs = _draw_pairs(model, points, generator)
        for number, group in enumerate(groups):
            result[replicate, number] = 1.0 - pairs.explained(every ^ sum(1 << position for position in group))
    return result


def conditional_normals(
    correlation: FloatArray, germ: FloatArray, spare: FloatArray, *, given: list[int], unknown: list[int]
) -> FloatArray:
    """Draws (points, unknown) of jointly normal germs given those at `given`, from independent normals `spare`."""
    rest = correlation[np.ix_(unknown, unknown)]
    centre: FloatArray = np.zeros((len(germ), len(unknown)))
    if given:
        cross = correlation[np.ix_(unknown, given)]
        weights = np.linalg.solve(correlation[np.ix_(given, given)], cross.T).T
        rest = rest - weights @ cross.T
        centre = germ[:, given] @ weights.T
    return np.asarray(centre + spare[:, unknown] @ np.linalg.cholesky(rest).T, dtype=np.float64)


def _draw_pairs(model: Model, points: int, chance: np.random.Generator) -> _Pairs:
    normals = sobol_normals(2 * model.dimensions, points, chance)
    free, spare = normals[:, : model.dimensions], normals[:, model.dimensions :]
    germ = free @ np.linalg.cholesky(model.correlation).T
    base = model.coordinates(germ)
    return _Pairs(model, germ, spare, correlated_groups(model.correlation), base=base, response=model.response(base),
                  fresh=model.coordinates(spare))


def _effects_of_all_sets(pairs: _Pairs) -> FloatArray:
    """Shapley effects (dimensions,) from S(u) of every set u."""
    dimensions = pairs.model.dimensions
    return _shapley(np.array([pairs.explained(known) for known in range(1 << dimensions)]), dimensions)


def _shapley(explained: FloatArray, dimensions: int) -> FloatArray:
    """Shapley effects (dimensions,) from S(u) of every set u, a bit mask and the index into `explained`."""
    sets = np.arange(1 << dimensions)
    sizes = np.array([known.bit_count() for known in range(1 << dimensions)])
    weights = np.array([1.0 / (dimensions * math.comb(dimensions - 1, size)) for size in range(dimensions)])
    effects = np.empty(dimensions)
    for position in range(dimensions):
        without = sets[(sets >> position & 1) == 0]
        effects[position] = np.sum(weights[sizes[without]] * (explained[without | 1 << position] - explained[without]))
    return effects


def _effects_along_orders(pairs: _Pairs, chance: np.random.Generator) -> FloatArray:
    """Shapley effects (dimensions,) as the mean over random orders, each taken forwards and backwards.

    The response's best linear part has effects that are known exactly; only what the orders add to those is averaged,
    so that the choice of orders hardly matters (a control variate).
    """
    dimensions = pairs.model.dimensions
    linear = _LinearPart.of(pairs)
    effects = np.zeros(dimensions)
    seen = {0: 0.0}
    for _ in range(ORDERS // 2):
        order = chance.permutation(dimensions)
        for walk in (order, order[::-1]):
            known = 0
            for position in walk.tolist():
                before, known = known, known | 1 << position
                if known not in seen:
                    seen[known] = pairs.explained(known) - linear.explained(known)
                effects[position] += seen[known] - seen[before]
    return effects / ORDERS + linear.effects()


@dataclass(frozen=True, slots=True)
class _LinearPart:
    """A response slopes . germ with the variance `variance`; groups: of correlated positions, single ones included."""

    slopes: FloatArray
    correlation: FloatArray
    variance: float
    groups: list[list[int]]

    @staticmethod
    def of(pairs: _Pairs) -> _LinearPart:
        """The least-squares linear part of the response over the design."""
        response = pairs.response
        centred = pairs.germ - np.mean(pairs.germ, axis=0)
        slopes = np.linalg.lstsq(centred, response - np.mean(response))[0]
        together = {position for group in pairs.groups for position in group}
        singles = [[position] for position in range(pairs.model.dimensions) if position not in together]
        variance = max(float(np.var(response)), np.finfo(float).tiny)
        return _LinearPart(slopes, pairs.model.correlation, variance, pairs.groups + singles)

    def explained(self, known: int) -> float:
        """Share of the variance that the linear part has with the set `known`: it adds up over the groups."""
        return sum(self._explained([position for position in group if known >> position & 1], group)
                   for group in self.groups)

    def effects(self) -> FloatArray:
        """Shapley effects (dimensions,): those within each group, whose sets are all taken."""
        effects = np.empty(len(self.slopes))
        for group in self.groups:
            explained = np.array([self._explained([group[place] for place in range(len(group)) if known >> place & 1],
                                                  group) for known in range(1 << len(group))])
            effects[group] = _shapley(explained, len(group))
        return effects

    def _explained(self, known: list[int], group: list[int]) -> float:
        if not known:
            return 0.0
        shared = self.correlation[np.ix_(known, group)] @ self.slopes[group]
        return float(shared @ np.linalg.solve(self.correlation[np.ix_(known, known)], shared)) / self.variance
