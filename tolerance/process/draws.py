"""Draws of the process: which variables vary, how they hang together, and scrambled Sobol' samples of them.

A draw is held as standard normals (germs), one a variable; values of properties come out of it through their laws.
A Gaussian copula makes correlations: the germs of correlated variables are jointly normal.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, field

import numpy as np
from scipy.special import ndtri
from scipy.stats import qmc

from tolerance.arrays import FloatArray, IntArray, read_only
from tolerance.process.laws import Law, quantile
from tolerance.process.measured import measured_law
from tolerance.process.resin import Resin, resins_of, through_resin, with_causes
from tolerance.process.values import nominals_of
from tolerance.scenario.amounts import LevelShares
from tolerance.scenario.properties import Property, members
from tolerance.scenario.tables import Scenario, Variation

REPLICATES = 8  # independent scrambles of a sample; with 16 intervals of the yield are no narrower, of the mean wider
SOBOL_BITS = 30  # of a coordinate; points are moved to the middle of their cell, so that 0 never occurs
ETCH = "etch"  # the property whose percentages are of each line's own width
COUPON_ALONE = LevelShares(coupon=1.0)  # every coupon has a draw of its own


@dataclass(frozen=True, slots=True)
class Variable:
    """One standard draw and the properties it moves, each by a law of its own.

    The name is that of the property, or, of properties drawn together, those of all joined by " + ".
    levels : which shares of the variance of the draw lots, panels and coupons carry.  levelled : the scenario says so.
    """

    name: str
    members: tuple[tuple[Property, Law], ...]
    levels: LevelShares = COUPON_ALONE
    levelled: bool = False


@dataclass(frozen=True, slots=True)
class Process:
    """All that varies, and the nominals of it and of what does not.

    nominals : by property name [SI]; a copper layer has its plating and etch factor there even where 0 or infinite.
    correlation : of the germs, (variables, variables).
    resins : what resin content does to the thickness and Dk of a layer, by layer.
    """

    variables: tuple[Variable, ...]
    nominals: Mapping[str, float]
    correlation: FloatArray
    resins: Mapping[str, Resin] = field(default_factory=dict)  # by layer
    _places: Mapping[str, tuple[int, Law]] = field(init=False, repr=False, compare=False, default_factory=dict)

    def __post_init__(self) -> None:
        places: dict[str, tuple[int, Law]] = {}
        for column, variable in enumerate(self.variables):
            for member, law in variable.members:
                places.setdefault(member.name, (column, law))
        object.__setattr__(self, "_places", places)

    def place(self, name: str) -> tuple[int, Law] | None:
        """Column of the germ and law of the property `name`; None where it does not vary."""
        return self._places.get(name)

    @property
    def is_correlated(self) -> bool:
        return len(correlated_groups(self.correlation)) > 0

    @property
    def has_levels(self) -> bool:
        """Whether a level is told of any variable, be it the coupon; then coupons are drawn as whole lots."""
        return any(variable.levelled or variable.levels.lot > 0.0 or variable.levels.panel > 0.0
                   for variable in self.variables)


@dataclass(frozen=True, slots=True)
class LotSize:
    """What a lot is made of."""

    panels: int = 20
    coupons_per_panel: int = 2

    @property
    def coupons(self) -> int:
        return self.panels * self.coupons_per_panel


@dataclass(frozen=True, slots=True)
class ProcessDraws:
    """A sample of the process: germ (coupons, variables), standard normals with their correlation.

    Coupons of one replicate stand together: replicate r has the rows from r * coupons / replicates on. Where coupons
    were drawn as whole `lots`, those of a lot stand together, and in it those of a panel.
    """

    process: Process
    germ: FloatArray
    replicates: int = 1
    lots: LotSize | None = None

    @property
    def coupons(self) -> int:
        return len(self.germ)

    def value(self, name: str) -> FloatArray:
        """Values [SI] of the property `name` ("P1.thickness"), shape (coupons,). KeyError where there is none."""
        return through_resin(name, self.own, self.process.resins)

    def own(self, name: str) -> FloatArray:
        """Values of the property by its own law alone, (coupons,)."""
        nominal = self.process.nominals[name]
        found = self._law(name)
        if found is None:
            return np.full(self.coupons, nominal)
        column, law = found
        return quantile(law, self.germ[:, column], reference=nominal)

    def etch(self, layer: str, *, width: float) -> FloatArray:
        """Finished foot width minus drawn width [m] of a line `width` [m] wide on `layer`, shape (coupons,)."""
        found = self._law(f"{layer}.{ETCH}")
        if found is None:
            return np.zeros(self.coupons)
        column, law = found
        return quantile(law, self.germ[:, column], reference=width)

    def rows(self, index: slice | IntArray) -> ProcessDraws:
        """The coupons at `index`, in its order, as a sample of one replicate."""
        return ProcessDraws(self.process, read_only(self.germ[index]))

    def _law(self, name: str) -> tuple[int, Law] | None:
        return self.process.place(name)


def process_of(scenario: Scenario) -> Process:
    """The variables of a scenario in its order, and their correlation."""
    variables = tuple(variable for variation in scenario.variations for variable in _variables(scenario, variation))
    nominals = nominals_of(scenario)
    return Process(variables, nominals, correlation_of(scenario, variables), resins_of(scenario, nominals))


def correlation_of(scenario: Scenario, variables: tuple[Variable, ...]) -> FloatArray:
    """Correlation of the germs, (variables, variables). A correlation names a variable, or a property that it moves."""
    matrix = np.eye(len(variables))
    column_of = {name: column for column, variable in enumerate(variables)
                 for name in (variable.name, *(member.name for member, _ in variable.members))}
    for correlation in scenario.correlations:
        one, other = (column_of[name] for name in correlation.between)
        matrix[one, other] = matrix[other, one] = correlation.coefficient
    return read_only(matrix)


def correlated_groups(correlation: FloatArray) -> list[list[int]]:
    """Columns that hang together by correlations, directly or through others; only groups of two and more."""
    groups: list[list[int]] = []
    left = set(range(len(correlation)))
    while left:
        group, edge = set[int](), {min(left)}
        while edge:
            group |= edge
            edge = {int(other) for one in edge for other in np.flatnonzero(correlation[one])} - group
        left -= group
        if len(group) > 1:
            groups.append(sorted(group))
    return groups


def columns_moving(process: Process, names: Collection[str]) -> tuple[int, ...]:
    """Columns of the variables that move any property in `names`, directly or through the resin of a layer."""
    names = with_causes(names, process.resins)
    return tuple(column for column, variable in enumerate(process.variables)
                 if any(member.name in names for member, _ in variable.members))


def draw_process(
    process: Process, *, coupons: int, chance: np.random.Generator, replicates: int = REPLICATES
) -> ProcessDraws:
    """A sample of `coupons` as independent scrambles of the Sobol' sequence, each of a power of two of points.

    ValueError where coupons / replicates is not a power of two. The sample depends on the process, the sizes and
    the state of `chance` alone.
    """
    germ = np.empty((coupons, len(process.variables)), order="F")
    block = coupons // replicates
    if block * replicates != coupons or block & (block - 1):
        raise ValueError(f"{coupons} coupons do not make {replicates} replicates of a power of two")
    for replicate, generator in enumerate(chance.spawn(replicates)):
        germ[replicate * block : (replicate + 1) * block] = sobol_normals(len(process.variables), block, generator)
    correlate(germ, process.correlation)
    return ProcessDraws(process, read_only(germ), replicates)


def correlate(germ: FloatArray, correlation: FloatArray) -> None:
    """Give independent germs (coupons, variables) their correlation, in place."""
    for group in correlated_groups(correlation):
        root = np.linalg.cholesky(correlation[np.ix_(group, group)])
        free = germ[:, group]
        for row, column in enumerate(group):
            germ[:, column] = sum(root[row, other] * free[:, other] for other in range(row + 1))


def sobol_normals(dimensions: int, points: int, chance: np.random.Generator) -> FloatArray:
    """Independent standard normals (points, dimensions) from one scramble of the Sobol' sequence."""
    return ndtri(sobol_uniforms(dimensions, points, chance))


def sobol_uniforms(dimensions: int, points: int, chance: np.random.Generator) -> FloatArray:
    """Uniforms (points, dimensions) in (0, 1) from one scramble of the Sobol' sequence; points: a power of two.

    Scrambling: linear matrix scramble and digital shift (J. Matousek, "On the L2-discrepancy for anchored boxes",
    Journal of Complexity, volume 14, pages 527-556, 1998), as scipy has it.
    """
    if dimensions == 0:
        return np.empty((points, 0))
    engine = qmc.Sobol(dimensions, scramble=True, bits=SOBOL_BITS, rng=chance)
    return np.asarray(engine.random_base2(points.bit_length() - 1) + 0.5**(SOBOL_BITS + 1), dtype=np.float64)


def _variables(scenario: Scenario, variation: Variation) -> tuple[Variable, ...]:
    """One variable for each property that the variation names, or one for all where they are drawn together."""
    pairs = tuple((each, _law(scenario, each, variation)) for each in members(scenario, variation))
    told = variation.has_level
    if variation.together:
        return (Variable(" + ".join(each.name for each, _ in pairs), pairs, variation.level, told),)
    return tuple(Variable(each.name, ((each, law),), variation.level, told) for each, law in pairs)


def _law(scenario: Scenario, each: Property, variation: Variation) -> Law:
    if variation.shape == "measured":
        readings = np.array(scenario.readings_of(each.name).values)
        return Law("measured", each.nominal, shift=variation.shift, measured=measured_law(readings))
    return Law(
        variation.shape, each.nominal, tolerance=variation.tolerance, shift=variation.shift,
        sigmas=variation.sigmas, cpk=variation.cpk, low=variation.low, high=variation.high,
    )
